"""Small helpers of the equations: arrays in, NaN where an equation does not hold, nothing on the console."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]
Bools = NDArray[np.bool_]

_LN_10 = float(np.log(10.0))

quiet = np.errstate(all="ignore")  # decorator: 0/0 and the like end as NaN, by intent


def floats(*values: ArrayLike) -> tuple[Floats, ...]:
    """Each value as a float64 array, without a copy where it is one.

    Parameters
    ----------
    *values : array_like
        Numbers [any unit].

    Returns
    -------
    tuple of ndarray
        The same values [unchanged].
    """
    return tuple(np.asarray(value, dtype=np.float64) for value in values)


def keep(valid: ArrayLike, result: ArrayLike) -> Floats:
    """The result where an equation is valid, NaN elsewhere.

    Parameters
    ----------
    valid : array_like of bool
        Where the equation holds; comparisons with NaN are False, so NaN in gives NaN out [bool].
    result : array_like
        The equation's value [any unit].

    Returns
    -------
    ndarray
        The result, NaN where not valid [unchanged].
    """
    return np.where(np.asarray(valid, dtype=np.bool_), np.asarray(result, dtype=np.float64), np.nan)


def power_of_ten(exponent: Floats) -> Floats:
    """Ten to a power; several times as fast as numpy's general power.

    Parameters
    ----------
    exponent : ndarray
        Exponent [1].

    Returns
    -------
    ndarray
        10^exponent [1].
    """
    return np.asarray(np.exp(_LN_10 * exponent))
