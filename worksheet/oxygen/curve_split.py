"""The change of the curve's saturation over PO2 and each displacement: exact Shapley values over all subsets.

References
----------
.. [1] Shapley LS. A value for n-person games. Ann Math Stud 1953;28:307-317.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from functools import lru_cache
from math import factorial

import numpy as np

from .constants import Constants
from .curve import co_share, displacement_terms, saturation_from_displacement, saturation_with_co
from .domain import Floats, quiet
from .readings import Ints
from .severinghaus import kelman_equivalent_po2, saturation_severinghaus
from .supply_factors import CURVE, Factors

_BLOCK = 4096  # rows at a time: the table of all subsets stays in the processor's cache
_LN_STEP, _PH_STEP = 1e-4, 1e-4  # steps in ln PO2 and pH for the slopes of the curve
PER_PH, PER_METHB = 0.88, 0.7  # displacement for pH and MetHb, COHb much the same: Siggaard-Andersen 1993
SLOPES = ("start", "end", "po2_start", "po2_end", "shift_start", "shift_end", "bend")

Ends = tuple[Floats, Floats]
Convert = Callable[[Floats], Floats]


@quiet
def curve_split(start: Factors, end: Factors, constants: Constants) -> tuple[dict[str, Floats], dict[str, Floats]]:
    """Second level: the change of the curve's saturation over PO2 and each displacement, by Shapley.

    Parameters
    ----------
    start, end : Factors
        The two ends [units of :class:`Factors`].
    constants : Constants
        Of which ``curve`` chooses the curve.

    Returns
    -------
    parts : dict of str to ndarray
        One for each of :data:`CURVE` [0-1].
    slopes : dict of str to ndarray
        See :class:`Split` [saturation per ln PO2].
    """
    n = start.po2.size
    parts = {name: np.zeros(n) for name in CURVE}
    slopes = {name: np.full(n, np.nan) for name in SLOPES}
    with_co = np.asarray((start.cohb > 0.0) | (end.cohb > 0.0)) & (constants.curve != "severinghaus")
    for rows in (*_blocks(np.flatnonzero(~with_co)), *_blocks(np.flatnonzero(with_co))):
        _split_block(start.take(rows), end.take(rows), constants, rows, parts, slopes)
    return parts, slopes


def _blocks(rows: Ints) -> list[Ints]:
    return [rows[i : i + _BLOCK] for i in range(0, len(rows), _BLOCK)]


def _split_block(
    start: Factors,
    end: Factors,
    constants: Constants,
    rows: Ints,
    parts: dict[str, Floats],
    slopes: dict[str, Floats],
) -> None:
    """Values of the curve for every subset of the inputs that changed, and their Shapley values."""
    shown = SEVERINGHAUS_INPUTS if constants.curve == "severinghaus" else CURVE
    changed = [name for name in shown if name == "po2" or _differs(getattr(start, name), getattr(end, name))]
    ends = {name: (getattr(start, name), getattr(end, name)) for name in shown}
    curve = _severinghaus if constants.curve == "severinghaus" else _tanh
    full = 2 ** len(changed) - 1
    values = curve(ends, changed, np.arange(full + 1), 1.0)
    coefficients = shapley_coefficients(len(changed))
    shares = coefficients @ values
    for name, share in zip(changed, shares, strict=True):
        parts[name][rows] = share
    # PO2 is the first input (bit 0): with and without the shifts, at either pressure
    corner = np.array([0, full & ~1, 1, full])
    slope = (curve(ends, changed, corner, 1.0 + _LN_STEP) - values[corner]) / _LN_STEP
    slopes["start"][rows], slopes["end"][rows] = slope[0], slope[3]
    slopes["po2_start"][rows] = 0.5 * (slope[0] + slope[1])
    slopes["po2_end"][rows] = 0.5 * (slope[2] + slope[3])
    moved = ends | {"ph": (start.ph + _PH_STEP, end.ph + _PH_STEP)}
    left = (curve(moved, changed, corner, 1.0) - values[corner]) / (PER_PH * _PH_STEP)
    slopes["shift_start"][rows], slopes["shift_end"][rows] = left[0], left[3]
    # a displacement at one end is in half of the orderings when PO2 moves
    slopes["bend"][rows] = 0.25 * (left[2] + left[3] - left[0] - left[1])


def _differs(a: Floats, b: Floats) -> bool:
    return bool(np.any(a != b))


@lru_cache(maxsize=16)
def shapley_coefficients(players: int) -> Floats:
    """Matrix that turns the values of all subsets into Shapley values.

    Parameters
    ----------
    players : int
        Number of inputs [1].

    Returns
    -------
    ndarray, shape (players, 2**players)
        Coefficients; the subset of a column is the binary pattern of its number [1].
    """
    matrix = np.zeros((players, 2**players))
    for subset in range(2**players):
        size = subset.bit_count()
        for player in range(players):
            others = size - (subset >> player & 1)
            weight = factorial(others) * factorial(players - others - 1) / factorial(players)
            matrix[player, subset] = weight if subset >> player & 1 else -weight
    return matrix


def _choose(
    ends: Mapping[str, Ends], changed: list[str], subsets: np.ndarray
) -> Callable[[str, Callable[..., Floats]], Floats]:
    """For an input: its value at the end that each subset says, rows of the table of subsets."""

    def of(name: str, convert: Convert) -> Floats:
        if name not in changed:
            return np.asarray(convert(ends[name][0])[np.newaxis, :])
        pair = np.stack([convert(ends[name][0]), convert(ends[name][1])])
        return np.asarray(pair[subsets >> changed.index(name) & 1])

    return of


def _tanh(ends: Mapping[str, Ends], changed: list[str], subsets: Ints, factor: float) -> Floats:
    """Saturation by the tanh model for each subset [0-1]."""
    of = _choose(ends, changed, subsets)
    a = (
        of("ph", lambda v: displacement_terms(v, 40.0)["ph"])
        + of("pco2", lambda v: displacement_terms(7.4, v)["pco2"])
        + of("methb", lambda v: displacement_terms(7.4, 40.0, np.maximum(v, 0.0))["methb"])
    )
    po2, temperature = of("po2", lambda v: v * factor), of("temperature", lambda v: v)
    if not any(np.any(end > 0.0) for end in ends["cohb"]):
        return _whole(saturation_from_displacement(po2, a, temperature), subsets)
    share = co_share(of("cohb", lambda v: v), of("methb", lambda v: v))
    return _whole(saturation_with_co(po2, a, temperature, share), subsets)


SEVERINGHAUS_INPUTS = ("po2", "ph", "pco2", "temperature")


def _severinghaus(ends: Mapping[str, Ends], changed: list[str], subsets: Ints, factor: float) -> Floats:
    """Saturation by Severinghaus with Kelman's shifts for each subset [0-1]."""
    of = _choose(ends, changed, subsets)
    same = [of(name, lambda v: v) for name in ("ph", "pco2", "temperature")]
    return _whole(saturation_severinghaus(kelman_equivalent_po2(of("po2", lambda v: v * factor), *same)), subsets)


def _whole(values: Floats, subsets: Ints) -> Floats:
    return np.ascontiguousarray(np.broadcast_to(values, (len(subsets), values.shape[-1])))
