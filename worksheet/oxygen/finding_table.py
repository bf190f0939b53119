"""Findings of a table: which rows have which, and one of them in finished words."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from .finding_case import Hit
from .finding_kinds import KINDS, Kind, Severity
from .quantities import CATALOGUE
from .readings import Bools, Floats, Ints

Show = Callable[[str, float], str]


@dataclass(frozen=True)
class Finding:
    """One finding about one row or one value, in finished words.

    Attributes
    ----------
    code : str
        Code of its :class:`~worksheet.oxygen.finding_kinds.Kind`.
    severity : Severity
        Blocks, asks or informs.
    sentence : str
        What is wrong, with the numbers.
    settle : str
        What would settle it.
    source : str
        Basis of the limit.
    """

    code: str
    severity: Severity
    sentence: str
    settle: str
    source: str


@dataclass(frozen=True)
class Findings:
    """All findings of a table.

    Attributes
    ----------
    size : int
        Number of rows.
    rows : mapping of str to ndarray of int64
        Rows by code, in the order of the catalogue; codes without a row are left out [row number].
    numbers : mapping of str to mapping
        Numbers for the words by code: name → (quantity or "", values in the order of ``rows``) [canonical units].
    """

    size: int
    rows: Mapping[str, Ints]
    numbers: Mapping[str, Mapping[str, tuple[str, Floats]]]

    def mask(self, code: str) -> Bools:
        """Rows that have the finding, as a mask."""
        result = np.zeros(self.size, dtype=np.bool_)
        result[self.rows.get(code, np.zeros(0, dtype=np.int64))] = True
        return result

    def worst(self) -> NDArray[np.int8]:
        """For each row 3 if a finding blocks, 2 if one asks, 1 if one informs, else 0."""
        level = np.zeros(self.size, dtype=np.int8)
        rank = {Severity.IMPOSSIBLE: 3, Severity.UNLIKELY: 2, Severity.NOTE: 1}
        for code, rows in self.rows.items():
            level[rows] = np.maximum(level[rows], rank[KINDS[code].severity])
        return level

    def codes(self) -> list[str]:
        """The codes of each row, separated by semicolons."""
        words = (len(self.rows) + 62) // 63
        packed = np.zeros((max(words, 1), self.size), dtype=np.int64)
        for bit, rows in enumerate(self.rows.values()):
            packed[bit // 63, rows] |= np.int64(1) << np.int64(bit % 63)
        combinations, which = np.unique(packed, axis=1, return_inverse=True)
        texts = [self._text(combination) for combination in combinations.T.tolist()]
        return [texts[i] for i in which.ravel().tolist()]

    def _text(self, combination: list[int]) -> str:
        return ";".join(code for bit, code in enumerate(self.rows) if combination[bit // 63] >> (bit % 63) & 1)

    def of_row(self, row: int, show: Show | None = None) -> tuple[Finding, ...]:
        """The findings of one row in words; ``show(quantity, canonical value)`` writes a number with its unit."""
        found = []
        for code, rows in self.rows.items():
            at = int(np.searchsorted(rows, row))
            if at < len(rows) and rows[at] == row:
                numbers = {name: (q, float(values[at])) for name, (q, values) in self.numbers[code].items()}
                found.append(in_words(KINDS[code], numbers, show or plain))
        return tuple(found)


def plain(name: str, value: float) -> str:
    """A value with its edge unit, as files and messages write it.

    Parameters
    ----------
    name : str
        Quantity of the catalogue, empty for a plain number.
    value : float
        Value [canonical unit].

    Returns
    -------
    str
        Number and unit [edge unit]; "not measured" for NaN.
    """
    if np.isnan(value):
        return "not measured"
    if not name:
        return f"{value:.2g}" if value < 10.0 else f"{value:.0f}"
    quantity = CATALOGUE[name]
    decimals = max(quantity.decimals, 1) if quantity.unit.ucum == "%" else quantity.decimals
    return f"{float(quantity.unit.from_canonical(value)):.{decimals}f} {quantity.unit.label}".rstrip()


def in_words(kind: Kind, numbers: Mapping[str, tuple[str, float]], show: Show) -> Finding:
    """One finding in finished words.

    Parameters
    ----------
    kind : Kind
        Its kind.
    numbers : mapping of str to (str, float)
        Numbers for the words: name → (quantity or "", value) [canonical units].
    show : callable
        Writes a value of a quantity with its unit [function].

    Returns
    -------
    Finding
        The finding [words].
    """
    shown = {
        name: show(quantity, value) if quantity else plain("", value) for name, (quantity, value) in numbers.items()
    }
    return Finding(kind.code, kind.severity, kind.words.format(**shown), kind.settle, kind.source)


def gathered(size: int, hits: Mapping[str, Hit]) -> Findings:
    """Findings from masks: what is empty is left out, the rest in the order of the catalogue.

    Parameters
    ----------
    size : int
        Number of rows [1].
    hits : mapping of str to Hit
        Masks and numbers by code [canonical units].

    Returns
    -------
    Findings
        Rows and numbers by code.
    """
    found = {code: np.flatnonzero(hits[code].where) for code in KINDS if code in hits}
    kept = {code: rows for code, rows in found.items() if len(rows)}
    numbers = {
        code: {name: (quantity, values[rows]) for name, (quantity, values) in hits[code].numbers.items()}
        for code, rows in kept.items()
    }
    return Findings(size, kept, numbers)
