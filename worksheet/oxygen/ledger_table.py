"""The table that a change ledger is, and the words for what it rests on."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from enum import IntEnum
from typing import Any

from .domain import Floats
from .readings import Bools, Codes, Ints

STEPS = ("lung", "haemoglobin", "function", "flow")


class Level(IntEnum):
    """In what a change is counted."""

    NONE = 0
    CAO2 = 1
    DO2 = 2
    DO2I = 3


UNITS: Mapping[int, str] = {Level.NONE: "", Level.CAO2: "mL/dL", Level.DO2: "mL/min", Level.DO2I: "mL/min/m2"}


class Note(IntEnum):
    """On what a comparison rests; bits of ``Ledger.notes``."""

    HB_NOT_REMEASURED = 1
    FLOW_NOT_REMEASURED = 2
    DYSHAEMOGLOBINS_NOT_REMEASURED = 4  # known at one end only, or carried into both: taken as the same
    FLOW_MISSING = 8  # ledger of content alone
    SATURATION_CALCULATED = 16  # at one end or both
    SATURATION_BY_TWO_WAYS = 32  # measured at one end, calculated or from the finger at the other
    HB_BY_TWO_METHODS = 64
    FLOW_BY_TWO_METHODS = 128
    SHIFT_UNKNOWN = 256  # pH or PCO2 missing at an end: taken as the same
    DYSHAEMOGLOBINS_ASSUMED = 512  # at both ends
    FLOW_METHOD_UNKNOWN = 1024  # not recorded: taken as one method
    PO2_MISSING = 2048  # at an end: the change of saturation counts for the lung as a whole, dissolved not counted


@dataclass(frozen=True)
class Ledger:
    """Changes, one row for each comparison; NaN where there is none.

    Attributes
    ----------
    start_row, end_row : ndarray of int64
        Rows compared, -1 where there is no comparison.
    level : ndarray of int8
        Codes of :class:`Level`.
    lung, haemoglobin, function, flow, total, residual : ndarray
        Contributions and their sum; ``residual`` is the part of function that is measured minus curve
        [unit of the level].
    start_supply, end_supply : ndarray
        Supply at the two ends, on the same footing [unit of the level].
    sd : mapping of str to ndarray
        1 SD of each step, of ``total`` and ``residual``, of ``shift`` (function without residual) and of
        ``saturation`` (the measured saturation's part) [unit of the level].
    notes : ndarray of int64
        Bits of :class:`Note`.
    parts : mapping of str to ndarray
        Finer terms: ``dissolved``, ``po2``, ``active`` and each displacement [unit of the level].
    """

    start_row: Ints
    end_row: Ints
    level: Codes
    lung: Floats
    haemoglobin: Floats
    function: Floats
    flow: Floats
    total: Floats
    residual: Floats
    start_supply: Floats
    end_supply: Floats
    sd: Mapping[str, Floats]
    notes: Ints
    parts: Mapping[str, Floats]

    def __len__(self) -> int:
        return len(self.start_row)

    def step(self, name: str) -> Floats:
        """Contribution of a step.

        Parameters
        ----------
        name : str
            Of :data:`STEPS`.

        Returns
        -------
        ndarray
            Contribution [unit of the level], NaN where there is no comparison.
        """
        values: Floats = getattr(self, name)
        return values

    @property
    def unit(self) -> tuple[str, ...]:
        """Unit of each comparison in words, empty where there is none."""
        return tuple(UNITS[int(level)] for level in self.level)

    def take(self, rows: Ints | Bools) -> Ledger:
        """The comparisons of the given rows.

        Parameters
        ----------
        rows : ndarray of int64 or bool
            Which [row number].

        Returns
        -------
        Ledger
            Only these, in that order [unchanged].
        """
        columns: dict[str, Any] = {
            key: {name: column[rows] for name, column in value.items()} if isinstance(value, Mapping) else value[rows]
            for key, value in vars(self).items()
        }
        return Ledger(**columns)
