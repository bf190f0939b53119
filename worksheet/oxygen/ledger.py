"""The change ledger: what lung, haemoglobin, function and flow each added to or took from supply, and how sure.

Each comparison is between two rows at the same level: DO2I if it is known at both ends, else DO2, else CaO2. The split
is the exact nested Shapley value of :mod:`.shapley`; **lung** is PO2 (through saturation and dissolved),
**haemoglobin** its amount, **function** the active share, the curve's displacements and the residual (measured minus
curve), **flow** output or index. A window is the sum of its consecutive ledgers.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from .comparison import compare
from .constants import Constants
from .domain import Floats
from .factors import Route, row_factors
from .ledger_table import STEPS, UNITS, Ledger, Level, Note
from .measurement import DEFAULT, Uncertainties
from .readings import Bools, Codes, Derived, Ints, Snapshots
from .shapley import Factors, split

__all__ = [
    "STEPS", "UNITS", "Factors", "Ledger", "Level", "Note", "between", "consecutive", "extractable", "split",
    "window", "window_ends",
]  # fmt: skip


def between(
    snapshots: Snapshots,
    derived: Derived,
    start_rows: Ints,
    end_rows: Ints,
    constants: Constants,
    settings: Uncertainties = DEFAULT,
    level: Codes | None = None,
) -> Ledger:
    """Ledgers of the changes between pairs of rows.

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
    level : ndarray of int8, optional
        Highest level to count in, see :class:`Level`; by default the highest that both ends know.

    Returns
    -------
    Ledger
        One row for each pair.
    """
    return compare(snapshots, derived, start_rows, end_rows, constants, settings, level, False)


def extractable(
    snapshots: Snapshots,
    derived: Derived,
    start_rows: Ints,
    end_rows: Ints,
    constants: Constants,
    settings: Uncertainties = DEFAULT,
    level: Codes | None = None,
) -> Ledger:
    """Ledgers of extractable oxygen in place of content: a loss of function shows its full cost.

    The uncertainties are those of the content ledger's inputs; what the end-capillary saturation adds is left out.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    start_rows, end_rows : ndarray of int64, shape (m,)
        The two ends [row number].
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Standard uncertainties in force.
    level : ndarray of int8, optional
        Highest level to count in.

    Returns
    -------
    Ledger
        One row for each pair: oxygen that can be unloaded, times flow where it is known [unit of the level].
    """
    return compare(snapshots, derived, start_rows, end_rows, constants, settings, level, True)


def consecutive(
    snapshots: Snapshots, derived: Derived, constants: Constants, settings: Uncertainties = DEFAULT
) -> Ledger:
    """Ledger of each arterial row against its stay's previous arterial row.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Standard uncertainties in force.

    Returns
    -------
    Ledger
        Row i belongs to snapshot i; NaN for rows that are not arterial or have none before them [unit of the level].
    """
    return between(snapshots, derived, snapshots.previous, np.arange(len(snapshots)), constants, settings)


def window_ends(
    snapshots: Snapshots,
    derived: Derived,
    since: Floats | float = -np.inf,
    until: Floats | float = np.inf,
    rows: Bools | None = None,
    before: float = 6.0,
) -> tuple[Ints, Ints, Ints]:
    """First and last arterial row of a review window in each stay.

    The start is the last row at or before ``since`` if it is no more than ``before`` older, else the first after it.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    since, until : float or ndarray, one for each stay in ascending order
        The window [h since the epoch].
    rows : ndarray of bool, optional
        Which rows may be ends; by default those with a content.
    before : float
        How much older than ``since`` the start may be; common practice [h].

    Returns
    -------
    stays, start_rows, end_rows : ndarray of int64
        Stays in ascending order, and the row numbers; -1 where a stay has no two rows.
    """
    stays, own = np.unique(snapshots.readings.stay, return_inverse=True)
    usable = snapshots.arterial & ~np.isnan(derived["cao2"]) & (True if rows is None else rows)
    line = snapshots.order[usable[snapshots.order]]
    stay, time = own[line], snapshots.readings.time[line]
    since, until = (np.broadcast_to(np.asarray(t, dtype=np.float64), stays.shape) for t in (since, until))
    first = np.searchsorted(stay, np.arange(len(stays)), "left")
    upto_since = np.bincount(stay[time <= since[stay]], minlength=len(stays))
    upto_until = np.bincount(stay[time <= until[stay]], minlength=len(stays))
    if not len(line):
        return stays, np.full(len(stays), -1), np.full(len(stays), -1)
    base = np.clip(first + upto_since - 1, 0, len(line) - 1)
    old = (upto_since > 0) & (time[base] >= since - before)
    start, end = np.where(old, base, base + (upto_since > 0)), first + upto_until - 1
    start = np.where((upto_since == 0), first, start)
    there = (upto_until > 0) & (end > start)
    last = len(line) - 1
    start, end = (line[np.clip(at, 0, last)] for at in (start, end))
    return stays, np.where(there, start, -1), np.where(there, end, -1)


def window(
    snapshots: Snapshots,
    derived: Derived,
    start_rows: Ints,
    end_rows: Ints,
    constants: Constants,
    settings: Uncertainties = DEFAULT,
    unloading: bool = False,
) -> Ledger:
    """Ledger of each window: the sum of its consecutive ledgers, at the highest level that both ends know.

    Rows between that know less than both ends (no flow, no co-oximetry) are passed over, so that nothing falls out of
    the sum. The uncertainty is that of the two ends; that of the rows between them cancels to second order.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    start_rows, end_rows : ndarray of int64, shape (m,)
        The ends of each window, of one stay, see :func:`window_ends` [row number].
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Standard uncertainties in force.
    unloading : bool
        Extractable oxygen in place of content [bool].

    Returns
    -------
    Ledger
        One row for each window.
    """
    ends = compare(snapshots, derived, start_rows, end_rows, constants, settings, None, unloading)
    owner, each = _intervals(snapshots, derived, ends, constants, settings, unloading)
    if not len(owner):
        return ends
    none = ends.level == Level.NONE

    def summed(values: Floats) -> Floats:
        return np.where(none, np.nan, np.bincount(owner, values, minlength=len(ends)))

    lung, haemoglobin, function, flow, total, residual = (
        summed(getattr(each, name)) for name in (*STEPS, "total", "residual")
    )
    parts = {name: summed(values) for name, values in each.parts.items()}
    return replace(
        ends, lung=lung, haemoglobin=haemoglobin, function=function, flow=flow, total=total, residual=residual,
        parts=parts,
    )  # fmt: skip


def intervals(
    snapshots: Snapshots,
    derived: Derived,
    start_row: int,
    end_row: int,
    constants: Constants,
    settings: Uncertainties = DEFAULT,
) -> Ledger:
    """The consecutive ledgers that one window's ledger is the sum of.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    start_row, end_row : int
        The ends of the window, of one stay [row number].
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Standard uncertainties in force.

    Returns
    -------
    Ledger
        One row for each interval, in time order, all at one level; empty without a comparison.
    """
    first, last = np.array([start_row]), np.array([end_row])
    ends = compare(snapshots, derived, first, last, constants, settings, None, False)
    return _intervals(snapshots, derived, ends, constants, settings, False)[1]


def _intervals(
    snapshots: Snapshots, derived: Derived, ends: Ledger, constants: Constants, settings: Uncertainties, unloading: bool
) -> tuple[Ints, Ledger]:
    """The intervals of each window: whose they are, and their ledgers."""
    owner, low, high = _chain(snapshots, derived, ends)
    return owner, compare(snapshots, derived, low, high, constants, settings, ends.level[owner], unloading)


def _chain(snapshots: Snapshots, derived: Derived, ends: Ledger) -> tuple[Ints, Ints, Ints]:
    """Pairs of consecutive rows that lead from the start to the end of each window: window, earlier, later row."""
    place = np.empty(len(snapshots), dtype=np.int64)
    place[snapshots.order] = np.arange(len(snapshots))
    wanted = np.flatnonzero(ends.level > Level.NONE)
    first, last = place[ends.start_row[wanted]], place[ends.end_row[wanted]]
    length = last - first + 1
    owner = np.repeat(wanted, length)
    offset = np.arange(len(owner)) - np.repeat(np.cumsum(length) - length, length)
    row = snapshots.order[np.repeat(first, length) + offset]
    knows = _knowledge(snapshots, derived)
    needed = knows[ends.start_row[owner]] & knows[ends.end_row[owner]]
    kept = snapshots.arterial[row] & ((knows[row] & needed) == needed)
    owner, row = owner[kept], row[kept]
    same = owner[1:] == owner[:-1]
    return owner[1:][same], row[:-1][same], row[1:][same]


def _knowledge(snapshots: Snapshots, derived: Derived) -> Ints:
    """What each row knows, as bits: content, output, index, dyshaemoglobins, measured saturation, PO2, shifts."""
    rows = row_factors(snapshots, derived)
    known = (
        ~np.isnan(derived["cao2"]), ~np.isnan(derived["do2"]), ~np.isnan(derived["do2i"]), rows.dys_known,
        np.isin(rows.route, (Route.O2HB, Route.SO2)), ~np.isnan(rows.po2), ~np.isnan(rows.ph + rows.pco2),
        ~np.isnan(derived["extractable_o2"]),
    )  # fmt: skip
    bits = np.zeros(len(snapshots), dtype=np.int64)
    for place, where in enumerate(known):
        bits |= where.astype(np.int64) << place
    return bits
