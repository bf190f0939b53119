"""Ledgers of pairs of rows: both ends on one footing, split, with the uncertainty of every step, in one table."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from .constants import Constants
from .domain import Floats
from .factors import row_factors
from .footing import Pair
from .ledger_noise import step_sds
from .ledger_table import Ledger, Level, Note
from .measurement import Uncertainties
from .readings import Codes, Derived, Ints, Snapshots
from .shapley import SHIFTS, Split, split


def compare(
    snapshots: Snapshots, derived: Derived, start_rows: Ints, end_rows: Ints, constants: Constants,
    settings: Uncertainties, most: Codes | None, unloading: bool,
) -> Ledger:  # fmt: skip
    """Ledgers of the changes between pairs of rows, of content or of what can be unloaded.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    start_rows, end_rows : ndarray of int64, shape (m,)
        The two ends; a negative row gives an empty comparison [row number].
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Standard uncertainties in force.
    most : ndarray of int8 or None
        Highest level to count in [code].
    unloading : bool
        Extractable oxygen in place of content [bool].

    Returns
    -------
    Ledger
        One row for each pair.
    """
    ends = np.asarray(start_rows, dtype=np.int64), np.asarray(end_rows, dtype=np.int64)
    level = _common_level(derived, *ends, most)
    kept = np.flatnonzero(level > Level.NONE)
    rows = row_factors(snapshots, derived)
    pair = Pair.of(rows, snapshots, derived, ends[0][kept], ends[1][kept], level[kept], constants, unloading)
    found = split(pair.start, pair.end, constants)
    sds = step_sds(
        snapshots, rows, pair.start_row, pair.end_row, level[kept], pair.start, pair.end, found, constants, settings
    )
    return _table(ends, level, kept, pair, found, sds, constants)


def _common_level(derived: Derived, start_rows: Ints, end_rows: Ints, most: Codes | None) -> Codes:
    """Highest level whose supply is known at both ends."""
    level = np.zeros(len(start_rows), dtype=np.int8)
    there = (start_rows >= 0) & (end_rows >= 0)
    for code, name in ((Level.CAO2, "cao2"), (Level.DO2, "do2"), (Level.DO2I, "do2i")):
        known = ~np.isnan(derived[name])
        both = there.copy()
        both[there] = known[start_rows[there]] & known[end_rows[there]]
        level[both if most is None else both & (np.asarray(most) >= code)] = code
    return level


def _table(
    ends: tuple[Ints, Ints], level: Codes, kept: Ints, pair: Pair, found: Split, sds: Mapping[str, Floats],
    constants: Constants,
) -> Ledger:  # fmt: skip
    """Spread the comparisons that exist over all that were asked for."""

    def spread(values: Floats) -> Floats:
        result = np.full(len(level), np.nan)
        result[kept] = values
        return result

    terms = dict(found.terms)
    blind = (pair.notes & Note.PO2_MISSING) != 0
    terms["po2"] = np.where(blind, terms["residual"], terms["po2"])
    terms["residual"] = np.where(blind, 0.0, terms["residual"])
    sds = dict(sds) | {"lung": np.where(blind, sds["saturation"], sds["lung"])}
    shift = sum(terms[name] for name in (*SHIFTS, "active", "unloading"))
    notes = np.zeros(len(level), dtype=np.int64)
    notes[kept] = pair.notes
    return Ledger(
        np.where(level > 0, ends[0], -1),
        np.where(level > 0, ends[1], -1),
        level,
        spread(terms["po2"] + terms["dissolved"]),
        spread(terms["hb"]),
        spread(np.asarray(shift + terms["residual"])),
        spread(terms["flow"]),
        spread(found.total),
        spread(terms["residual"]),
        spread(pair.start.supply(constants)),
        spread(pair.end.supply(constants)),
        {name: spread(values) for name, values in sds.items()},
        notes,
        {name: spread(terms[name]) for name in ("po2", "dissolved", "active", *SHIFTS, "unloading")},
    )
