"""All entries on one line, by stay and then time: what came last, next, nearest, without a loop over rows."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from .quantities import MEASURED
from .readings import Bools, Floats, Ints, Readings

_ROUNDING = 1e-6  # h: 3.6 ms, so that exactly 30 min still counts as 30 min


def earlier(column: Floats, line: Line) -> Ints:
    """The stay's previous entry that has a value, not the entry itself.

    Parameters
    ----------
    column : ndarray of float64
        Values by row, NaN where there is none [any unit].
    line : Line
        The entries in order of stay and time.

    Returns
    -------
    ndarray of int64
        Row of the nearest earlier entry in that order, -1 for none [row number].
    """
    n = len(column)
    seen = np.maximum.accumulate(np.where(np.isnan(column)[line.order], -1, np.arange(n)))
    before = np.append(-1, seen[:-1])[:n]
    return line.back(np.where(before >= line.start, before, -1))


@dataclass(frozen=True)
class Line:
    """All entries on one line: by stay, then time. Positions on the line, not row numbers, unless said."""

    order: Ints  # row number at each position
    time: Floats
    start: Ints  # first position of the stay
    stop: Ints  # last position of the stay
    upto: Ints  # last position of the same stay and time

    @classmethod
    def of(cls, readings: Readings) -> Line:
        """The line of some readings."""
        order = _order(readings)
        stay, time = readings.stay[order], readings.time[order]
        n, same = len(stay), stay[1:] == stay[:-1]
        tied = same & (time[1:] == time[:-1])
        return cls(order, time, _starts(same, n), _stops(same, n), _stops(tied, n))

    def last_position(self, valid: Bools) -> Ints:
        """Position of the last valid entry of the stay that is not later than each; -1 for none."""
        seen = np.maximum.accumulate(np.where(valid[self.order], np.arange(len(self.order)), -1))[self.upto]
        return np.where(seen >= self.start, seen, -1)

    def next_position(self, valid: Bools) -> Ints:
        """Position of the first valid entry of the stay that is later than each; -1 for none."""
        n = len(self.order)
        places = np.append(np.where(valid[self.order], np.arange(n), n), n)
        ahead = np.minimum.accumulate(places[::-1])[::-1][self.upto + 1]
        return np.where(ahead <= self.stop, ahead, -1)

    def within(self, positions: Ints, most: float) -> Ints:
        """The positions that are at most so many hours away, -1 for the others."""
        away = np.abs(self.time - self.time[positions])
        return np.where((positions >= 0) & (away <= most + _ROUNDING), positions, -1)

    def nearest(self, valid: Bools, before: float, after: float) -> Ints:
        """Nearest valid position; of two equally near the earlier one."""
        old, new = self.within(self.last_position(valid), before), self.within(self.next_position(valid), after)
        nearer = self.time - self.time[old] - (self.time[new] - self.time) > _ROUNDING
        newer = (old < 0) | ((new >= 0) & nearer)
        return np.where(newer, new, old)

    def nearest_known(self, valid: Bools) -> Ints:
        """The last valid position whatever its age, else the first later one."""
        old = self.last_position(valid)
        return np.where(old >= 0, old, self.next_position(valid))

    def since(self, happened: Bools) -> Floats:
        """Hours since the stay's last such event, in row order; NaN for none."""
        at = self.last_position(happened)
        hours = np.empty_like(self.time)
        hours[self.order] = np.where(at >= 0, self.time - self.time[at], np.nan) if len(at) else self.time
        return hours

    def back(self, positions: Ints) -> Ints:
        """Positions as row numbers, in row order."""
        rows = np.empty_like(self.order)
        rows[self.order] = np.where(positions >= 0, self.order[positions], -1)
        return rows


def _order(readings: Readings) -> Ints:
    """Row numbers by stay and time; entries of one stay and time by what they hold."""
    stay, time = readings.stay, readings.time
    n = len(stay)
    ahead = (stay[1:] > stay[:-1]) | ((stay[1:] == stay[:-1]) & (time[1:] >= time[:-1]))
    order = np.arange(n) if bool(np.all(ahead)) else np.lexsort((time, stay))
    few = [codes for codes in (readings.flow_method, readings.device, readings.event, readings.site) if np.any(codes)]
    order = _ranked(order, [stay, time], few)
    rest = [readings[name] for name in MEASURED if not empty(readings[name])]
    return _ranked(order, [stay, time, *few], rest)


def _ranked(order: Ints, same_by: Sequence[NDArray[Any]], keys: Sequence[NDArray[Any]]) -> Ints:
    """Rows that agree in ``same_by`` ranked by ``keys``; the others keep their place."""
    same = np.ones(max(len(order) - 1, 0), dtype=np.bool_)
    for column in same_by:
        sorted_column = column[order]
        same &= sorted_column[1:] == sorted_column[:-1]
    if keys and np.any(same):
        tied = np.append(same, False) | np.append(False, same)
        rows, group = order[tied], _starts(same, len(order))[tied]
        order[tied] = rows[np.lexsort((*(key[rows] for key in keys), group))]
    return order


def _starts(same: Bools, n: int) -> Ints:
    """First position of each run of positions that are the same as the one before."""
    fresh = np.append(True, ~same)[:n]
    return np.maximum.accumulate(np.where(fresh, np.arange(n), 0))


def _stops(same: Bools, n: int) -> Ints:
    """Last position of each run."""
    closed = np.append(~same, True)[:n]
    return np.minimum.accumulate(np.where(closed, np.arange(n), n)[::-1])[::-1]


def empty(column: Floats) -> bool:
    """Whether a column holds nothing.

    Parameters
    ----------
    column : ndarray
        Values [any unit].

    Returns
    -------
    bool
        True if every value is NaN [bool].
    """
    return bool(np.all(np.isnan(column)))
