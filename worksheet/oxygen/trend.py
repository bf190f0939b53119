"""The course of lactate: half-time or doubling time with an interval, or the reason why there is none.

References
----------
.. [1] Nguyen HB et al. Early lactate clearance is associated with improved outcome in severe sepsis and septic shock.
   Crit Care Med 2004;32:1637-1642: decrease of at least 10 % in 6 h. A decrease, not a clearance.
.. [2] Hernandez G, Bellomo R, Bakker J. The ten pitfalls of lactate clearance in sepsis. Intensive Care Med
   2019;45:82-85.
.. [3] Puskarich MA et al. Whole blood lactate kinetics in patients undergoing quantitative resuscitation for severe
   sepsis and septic shock. Chest 2013;143:1548-1553 (return below 2 mmol/L).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from .change import Z95, real_change
from .domain import Floats, floats
from .measurement import DEFAULT, Uncertainties
from .readings import Site
from .slopes import FEWEST_FOR_RANKS, Line, least_squares, robust_slope, turn

__all__ = ["LactateTrend", "lactate_trend", "robust_slope"]

NORMAL = 2.0  # mmol/L, common practice; Puskarich 2013 [3]
SHORTEST = 2.0  # h between first and last sample, working value
LONGEST_GAP = 12.0  # h between neighbours, working value
_VENOUS = (Site.MIXED_VENOUS, Site.CENTRAL_VENOUS, Site.VENOUS)


@dataclass(frozen=True)
class LactateTrend:
    """What can be said of the course of lactate.

    Attributes
    ----------
    kind : str
        ``falling`` or ``rising`` (a half-time or doubling time with its interval), ``unclear`` (the interval contains
        a level course), ``change`` (two samples), ``normal`` (all below 2 mmol/L) or ``refused``.
    reason : str
        Why there is no more to say; empty for ``falling`` and ``rising``.
    n : int
        Samples used [1].
    hours : float
        From the first to the last sample used [h].
    first, last : float
        Lactate at these [mmol/L].
    decrease : float
        Share by which it fell over ``hours``, negative when it rose [1].
    beyond_noise : bool
        Whether first and last differ by more than the measurement's noise.
    line : Line or None
        Fit of ln lactate [1/h]; times count from the epoch.
    time, time_low, time_high : float
        Half-time or doubling time and its 95 % interval [h]; NaN where there is none.
    method : str
        ``least squares``, ``Theil-Sen`` or empty.
    mixed : bool
        Arterial and venous samples were taken together.
    after_peak : bool
        Only samples from the peak on were fitted.
    turned : bool
        The course turned, and only samples from the last turn on were fitted.
    """

    kind: str
    reason: str = ""
    n: int = 0
    hours: float = np.nan
    first: float = np.nan
    last: float = np.nan
    decrease: float = np.nan
    beyond_noise: bool = False
    line: Line | None = None
    time: float = np.nan
    time_low: float = np.nan
    time_high: float = np.nan
    method: str = ""
    mixed: bool = False
    after_peak: bool = False
    turned: bool = False

    def fitted(self, times: ArrayLike) -> Floats:
        """The fitted course.

        Parameters
        ----------
        times : array_like
            Times [h since the epoch].

        Returns
        -------
        ndarray
            Lactate [mmol/L], NaN without a fit.
        """
        (times,) = floats(times)
        if self.line is None:
            return np.full(times.shape, np.nan)
        return np.asarray(np.exp(self.line.intercept + self.line.slope * times))


def lactate_trend(
    times: ArrayLike, values: ArrayLike, sites: ArrayLike | None = None, settings: Uncertainties = DEFAULT
) -> LactateTrend:
    """The course of lactate in one stay.

    Two samples: their change only. Three or four: least squares on ln lactate with a floor on the variance. Five or
    more: Theil-Sen on ln lactate. Where the course turned, only what came after the last turn is fitted: a rise that
    begins late would else be lost in the level course before. A half-time is given only where the interval of the slope
    excludes a level course.

    Parameters
    ----------
    times : array_like
        Times, any order [h since the epoch].
    values : array_like
        Lactate, NaN where not measured [mmol/L].
    sites : array_like of int, optional
        Codes of :class:`~worksheet.oxygen.readings.Site`; venous samples are used only where there are fewer than
        two others, and then flagged.
    settings : Uncertainties
        Standard uncertainties in force.

    Returns
    -------
    LactateTrend
        Kind, numbers with intervals, or the reason for refusing.
    """
    given = floats(times, values)
    time, value, mixed = _samples(given[0], given[1], sites)
    if not len(value):
        return LactateTrend("refused", "no lactate")
    if np.any(value <= 0.0):
        return LactateTrend("refused", "a lactate of 0 or less", len(value))
    found = replace(_outline(time, value, settings), mixed=mixed)
    if len(value) == 1:
        return replace(found, kind="refused", reason="a single lactate")
    if np.all(value < NORMAL):
        return replace(found, kind="normal", reason="all below 2 mmol/L")
    if len(value) == 2:
        return replace(found, kind="change", reason="two samples: their change, no half-time")
    return _course(time, value, found, settings)


def _samples(time: Floats, value: Floats, sites: ArrayLike | None) -> tuple[Floats, Floats, bool]:
    """Samples in time order, one for each time; venous ones only if there is not enough else."""
    there = ~np.isnan(value) & ~np.isnan(time)
    venous = np.zeros(len(value), dtype=np.bool_) if sites is None else np.isin(np.asarray(sites), _VENOUS)
    apart = there & ~venous
    mixed = bool(np.sum(apart) < 2 and np.any(there & venous) and np.sum(there) >= 2)
    kept = there if mixed or not np.any(apart) else apart
    unique, index = np.unique(time[kept], return_inverse=True)
    counts = np.bincount(index, minlength=len(unique))
    return unique, np.bincount(index, value[kept], minlength=len(unique)) / np.maximum(counts, 1), mixed


def _outline(time: Floats, value: Floats, settings: Uncertainties) -> LactateTrend:
    """First and last sample and what they say by themselves [1]."""
    ends = value[[0, -1]]
    sd = float(np.hypot(*settings.sd("lactate", ends)))
    beyond = bool(real_change(ends[1] - ends[0], sd).beyond_noise) and len(value) > 1
    hours = float(time[-1] - time[0])
    decrease = float(1.0 - ends[1] / ends[0]) if len(value) > 1 else np.nan
    return LactateTrend("", "", len(value), hours, float(ends[0]), float(ends[1]), decrease, beyond)


def _course(time: Floats, value: Floats, found: LactateTrend, settings: Uncertainties) -> LactateTrend:
    """Three samples or more: the fit, or why there is none."""
    peak = _peak(value, settings)
    if peak:
        time, value = time[peak:], value[peak:]
        if len(value) < 3:
            return replace(found, kind="refused", reason="a peak inside, fewer than three samples after it")
        found = replace(_outline(time, value, settings), mixed=found.mixed, after_peak=True)
    last = _last_turn(time, value, settings)
    if last:
        time, value = time[last:], value[last:]
        found = replace(_outline(time, value, settings), mixed=found.mixed, after_peak=found.after_peak, turned=True)
        if np.all(value < NORMAL):
            return replace(found, kind="normal", reason="all below 2 mmol/L since the course turned")
    if found.hours < SHORTEST:
        return replace(found, kind="refused", reason="samples span less than 2 h")
    if np.max(np.diff(time)) > LONGEST_GAP:
        return replace(found, kind="refused", reason="more than 12 h between neighbouring samples")
    return _fitted(time, value, found, settings)


def _fitted(time: Floats, value: Floats, found: LactateTrend, settings: Uncertainties) -> LactateTrend:
    logs = np.log(value)
    if len(value) >= FEWEST_FOR_RANKS:
        line, method = robust_slope(time, logs), "Theil-Sen"
    else:
        line, method = least_squares(time, logs, _log_variance(value, settings)), "least squares"
    found = replace(found, line=line, method=method)
    if not line.has_direction:
        return replace(found, kind="unclear", reason="the slope cannot be told from a level course")
    fastest, slowest = sorted((abs(line.low), abs(line.high)), reverse=True)
    ln2 = float(np.log(2.0))
    kind = "falling" if line.slope < 0.0 else "rising"
    return replace(found, kind=kind, time=ln2 / abs(line.slope), time_low=ln2 / fastest, time_high=ln2 / slowest)


def _log_variance(value: Floats, settings: Uncertainties) -> float:
    """Variance of ln lactate from the measurement alone, ln(1 + CV^2) [1]."""
    return float(np.mean(np.log1p((settings.sd("lactate", value) / value) ** 2)))


def _last_turn(time: Floats, value: Floats, settings: Uncertainties) -> int:
    """Point from which on the course did not turn again; 0 where it never did."""
    first = 0
    while found := turn(time[first:], np.log(value[first:]), _log_variance(value[first:], settings)):
        first += found
    return first


def _peak(value: Floats, settings: Uncertainties) -> int:
    """Place of the highest value if it stands out on both sides beyond noise, else 0."""
    top = int(np.argmax(value))
    sd = settings.sd("lactate", value)
    rise = value[top] - value[0] > Z95 * np.hypot(sd[top], sd[0])
    fall = value[top] - value[-1] > Z95 * np.hypot(sd[top], sd[-1])
    return top if 0 < top < len(value) - 1 and rise and fall else 0
