"""Whether a change is larger than the noise of its measurements.

References
----------
.. [1] JCGM 100:2008. Guide to the expression of uncertainty in measurement.
.. [2] Harris EK, Yasaka T. On the calculation of a "reference change" for comparing two consecutive measurements.
   Clin Chem 1983;29:25-30.
.. [3] Fokkema MR et al. Reference change values for brain natriuretic peptides revisited. Clin Chem 2006;52:1602-1603
   (the logarithmic form).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from .domain import Bools, Floats, floats, quiet

Z95 = 1.959963984540054


class RealChange(NamedTuple):
    """A change and how sure it is.

    Attributes
    ----------
    change, sd : ndarray
        Change and its standard uncertainty, both ends and what they share considered [unit of the quantity].
    low, high : ndarray
        Limits of the 95 % interval of the true change [unit of the quantity].
    p_fall : ndarray
        Probability that the true value fell [0-1].
    beyond_noise : ndarray of bool
        Whether the interval excludes no change [bool].
    """

    change: Floats
    sd: Floats
    low: Floats
    high: Floats
    p_fall: Floats
    beyond_noise: Bools


def real_change(change: ArrayLike, sd: ArrayLike) -> RealChange:
    """Interval and probability of a change [1]_.

    Parameters
    ----------
    change, sd : array_like
        Change and its standard uncertainty [unit of the quantity].

    Returns
    -------
    RealChange
        NaN and False where either is NaN.
    """
    change, sd = floats(change, sd)
    low, high = change - Z95 * sd, change + Z95 * sd
    return RealChange(change, sd, low, high, probability_of_fall(change, sd), np.asarray((low > 0.0) | (high < 0.0)))


@quiet
def probability_of_fall(change: ArrayLike, sd: ArrayLike, more_than: ArrayLike = 0.0) -> Floats:
    """Probability that the true value fell by more than a given amount.

    Parameters
    ----------
    change, sd : array_like
        Change and its standard uncertainty [unit of the quantity].
    more_than : array_like
        The amount, 0 for any fall [unit of the quantity].

    Returns
    -------
    ndarray
        Probability [0-1]; 0 or 1 for a change that is known exactly, NaN where any input is NaN.
    """
    change, sd, more_than = floats(change, sd, more_than)
    fall = -change - more_than
    exact = np.where(fall > 0.0, 1.0, 0.0) + 0.0 * fall
    from scipy.special import ndtr  # here: importing it is a third of the start-up of a command that needs none

    return np.asarray(np.where(sd > 0.0, ndtr(fall / sd), np.where(sd == 0.0, exact, np.nan)))


def reference_change_value(cv_analytic: float, cv_within: float, z: float = Z95) -> float:
    """Relative change that noise and usual variation exceed with the probability of ``z`` [2]_.

    Parameters
    ----------
    cv_analytic, cv_within : float
        Coefficient of variation of the analysis and within the person [1].
    z : float
        Quantile of the normal distribution: 1.96 for either direction, 1.645 for one [1].

    Returns
    -------
    float
        Relative change, the same up and down; for coefficients up to about 10 % [1].
    """
    return float(z * np.sqrt(2.0 * (cv_analytic**2 + cv_within**2)))


def reference_change_value_log(cv_analytic: float, cv_within: float, z: float = Z95) -> tuple[float, float]:
    """Relative changes down and up in logarithmic form, for larger coefficients of variation [3]_.

    Parameters
    ----------
    cv_analytic, cv_within : float
        Coefficient of variation of the analysis and within the person [1].
    z : float
        Quantile of the normal distribution [1].

    Returns
    -------
    down, up : float
        Relative change, negative and positive [1].
    """
    step = z * np.sqrt(2.0 * np.log(1.0 + cv_analytic**2 + cv_within**2))
    return float(np.expm1(-step)), float(np.expm1(step))
