"""Straight lines through few points: least squares with a floor on its variance, and Theil-Sen with Kendall's interval.

References
----------
.. [1] Theil H. A rank-invariant method of linear and polynomial regression analysis. Proc K Ned Akad Wet 1950;53.
.. [2] Sen PK. Estimates of the regression coefficient based on Kendall's tau. J Am Stat Assoc 1968;63:1379-1389.
.. [3] Hollander M, Wolfe DA. Nonparametric statistical methods. Wiley (the interval by Kendall's exact distribution).
.. [4] Hudson DJ. Fitting segmented curves whose join points have to be estimated. J Am Stat Assoc 1966;61:1097-1129
   (from memory).
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np

from .domain import Floats

Z95 = 1.959963984540054
_MOST_EXACT = 60  # points
FEWEST_FOR_A_TURN = 6  # points: three to each side of the turn, and two left over to judge by
FEWEST_FOR_RANKS = 5  # below, no ranking of the points has a two-sided probability under 5 %


class Line(NamedTuple):
    """A fitted line.

    Attributes
    ----------
    slope, intercept : float
        Of ``value = intercept + slope time`` [value per h, value].
    low, high : float
        95 % interval of the slope; NaN where the points allow none [value per h].
    """

    slope: float
    intercept: float
    low: float
    high: float

    @property
    def has_direction(self) -> bool:
        """Whether the interval excludes a level course."""
        return self.low > 0.0 or self.high < 0.0


def least_squares(times: Floats, values: Floats, floor: float = 0.0) -> Line:
    """Least squares with a variance of at least ``floor``: three points on a line by chance are not certainty.

    Parameters
    ----------
    times : ndarray
        Distinct times, at least three [h].
    values : ndarray
        Values [any unit].
    floor : float
        Least variance of a value, from its measurement [unit squared].

    Returns
    -------
    Line
        Interval by Student's t for n - 2, or by the normal distribution and the floor where that is wider.
    """
    n = len(times)
    centred = times - times.mean()
    spread = float(centred @ centred)
    slope = float(centred @ values) / spread
    intercept = float(values.mean() - slope * times.mean())
    left = values - intercept - slope * times
    residual = float(left @ left) / (n - 2)
    # the wider of the two: by what the points show (Student's t) and by what is known of the measurement (normal)
    from scipy.special import stdtrit  # here: importing it is a third of the start-up of a command that needs none

    reach = max(float(stdtrit(n - 2, 0.975)) * np.sqrt(residual), Z95 * np.sqrt(floor))
    half = float(reach / np.sqrt(spread))
    return Line(slope, intercept, slope - half, slope + half)


def robust_slope(times: Floats, values: Floats) -> Line:
    """Theil-Sen: the median of the slopes of all pairs [1]_ [2]_, interval by Kendall's exact distribution [3]_.

    Parameters
    ----------
    times : ndarray
        Times, at least two distinct [h].
    values : ndarray
        Values [any unit].

    Returns
    -------
    Line
        Without an interval (NaN) below five distinct times; one wild value in eight moves it little.
    """
    low, high = np.triu_indices(len(times), 1)
    apart = times[high] - times[low]
    slopes = np.sort((values[high] - values[low])[apart != 0.0] / apart[apart != 0.0])
    slope = float(np.median(slopes))
    intercept = float(np.median(values - slope * times))
    margin = kendall_margin(len(times))
    if margin < 0 or len(slopes) != len(apart):
        return Line(slope, intercept, np.nan, np.nan)
    first = (len(slopes) - margin) // 2
    return Line(slope, intercept, float(slopes[first - 1]), float(slopes[len(slopes) - first]))


@lru_cache(maxsize=256)
def kendall_margin(n: int) -> int:
    """How far from the middle the limits of the 95 % interval lie among the ordered slopes of all pairs.

    Parameters
    ----------
    n : int
        Number of points [1].

    Returns
    -------
    int
        Kendall's score k - 2 with P(score >= k) <= 2.5 % under no trend, -1 where there is none [pairs].
    """
    pairs = n * (n - 1) // 2
    if n < FEWEST_FOR_RANKS:
        return -1
    if n > _MOST_EXACT:
        # Kendall's normal approximation, with correction for continuity [3]_; exact counts take n^4 steps
        sd = np.sqrt(n * (n - 1) * (2 * n + 5) / 18.0)
        least = int(np.ceil(Z95 * sd + 1.0))
        return least + (least - pairs) % 2 - 2
    ways = np.ones(1)
    for more in range(2, n + 1):
        ways = np.convolve(ways, np.ones(more)) / more
    scores = pairs - 2 * np.arange(len(ways))
    tail = np.cumsum(ways)
    return int(scores[tail <= 0.025][-1]) - 2


def turn(times: Floats, values: Floats, floor: float = 0.0) -> int:
    """Where a course turned: the point at which two joined lines fit better than one, by more than chance [4]_.

    The joint is tried at every point that leaves three to either side, itself included; the gain of the best is judged
    by F with two more parameters, at 5 % divided by the number of points tried (Bonferroni: fewer false turns).

    Parameters
    ----------
    times : ndarray
        Distinct times in order [h].
    values : ndarray
        Values [any unit].
    floor : float
        Least variance of a value, from its measurement [unit squared].

    Returns
    -------
    int
        The point at which the last line begins, 0 for no turn or fewer than six points [point].
    """
    n = len(times)
    if n < FEWEST_FOR_A_TURN:
        return 0
    joints = np.arange(2, n - 2)
    straight, _ = np.linalg.qr(np.column_stack([np.ones(n), times - times.mean()]))
    bent = np.maximum(times[:, None] - times[joints], 0.0)
    bent = bent - straight @ (straight.T @ bent)
    left = values - straight @ (straight.T @ values)
    gains = (bent.T @ left) ** 2 / np.sum(bent**2, axis=0)
    best = int(np.argmax(gains))
    variance = max(float(left @ left - gains[best]) / (n - 4), floor)
    from scipy.special import fdtri  # here, as above: only who fits a course waits for it

    limit = float(fdtri(2, n - 4, 1.0 - 0.05 / len(joints)))
    return int(joints[best]) if gains[best] > 2.0 * limit * variance else 0
