"""The exact split of a change in supply over its factors: nested (Owen) Shapley values, pure arrays.

``supply = 10 Q [k Hb A U + alpha (PO2 - held)]``: Q flow, A the active share of haemoglobin, U the saturation in use
less what stays bound (0 for content). First level: the bound term over Q, Hb, A and U, the dissolved term over Q and
PO2. Second level: the change in saturation over PO2 and each displacement of the curve, and the change of the residual
(measured minus curve). It adds up, reverses sign with its ends, is safe at zero and needs no logarithm of a factor.

References
----------
.. [1] Shapley LS. A value for n-person games. Ann Math Stud 1953;28:307-317.
.. [2] Owen G. Values of games with a priori unions. Lect Notes Econ Math Syst 1977;141:76-88.
.. [3] Shorrocks AF. Decomposition procedures for distributional analysis: a unified framework based on the Shapley
   value. J Econ Inequal 2013;11:99-126. https://doi.org/10.1007/s10888-011-9214-z
.. [4] Owen G. Multilinear extensions of games. Management Science 1972;18:64-79 (the integral along the diagonal).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import lru_cache
from math import factorial

import numpy as np
from numpy.typing import ArrayLike

from .constants import Constants
from .curve import co_share, displacement_terms, saturation_from_displacement, saturation_with_co
from .domain import Bools, Floats, quiet
from .readings import Ints
from .severinghaus import kelman_equivalent_po2, saturation_severinghaus

_DL_PER_L = 10.0
# The integrand along the diagonal is a cubic for four factors: two Gauss-Legendre points are exact [4].
GAUSS = (0.5 - 0.5 / 3.0**0.5, 0.5 + 0.5 / 3.0**0.5)
_BLOCK = 4096  # rows at a time: the table of all subsets stays in the processor's cache
_LN_STEP, _PH_STEP = 1e-4, 1e-4  # steps in ln PO2 and pH for the slopes of the curve
PER_PH, PER_METHB = 0.88, 0.7  # displacement for pH and MetHb, COHb much the same: Siggaard-Andersen 1993
SLOPES = ("start", "end", "po2_start", "po2_end", "shift_start", "shift_end", "bend")
BOUND = ("flow", "hb", "active", "unloading")
SHIFTS = ("ph", "pco2", "methb", "cohb", "temperature")
CURVE = ("po2", *SHIFTS)

Ends = tuple[Floats, Floats]
Convert = Callable[[Floats], Floats]


@dataclass(frozen=True)
class Factors:
    """What supply is made of at one end of a comparison; arrays of one shape, NaN where not known.

    Attributes
    ----------
    flow : ndarray
        Cardiac index [L/min/m²], cardiac output [L/min], or 0.1 for the ledger of content alone.
    hb : ndarray
        Haemoglobin [g/dL].
    active : ndarray
        Active share of haemoglobin [0-1].
    saturation : ndarray
        Functional saturation in use [0-1].
    measured : ndarray of bool
        Whether it was measured; False: it is the curve's, and the residual is 0.
    po2, pco2 : ndarray
        Partial pressures at 37 °C [mmHg].
    ph : ndarray
        pH at 37 °C [1].
    cohb, methb : ndarray
        Dyshaemoglobins for the curve, 0 where not known [0-1].
    temperature : ndarray
        Temperature the pressures hold at: 37 for what an analyser reports [°C].
    bound, held : ndarray
        Saturation and oxygen pressure that stay behind (extractable ledger); 0 for content [0-1, mmHg].
    """

    flow: Floats
    hb: Floats
    active: Floats
    saturation: Floats
    measured: Bools
    po2: Floats
    ph: Floats
    pco2: Floats
    cohb: Floats
    methb: Floats
    temperature: Floats
    bound: Floats
    held: Floats

    @classmethod
    def of(
        cls, flow: ArrayLike, hb: ArrayLike, active: ArrayLike, saturation: ArrayLike, po2: ArrayLike, ph: ArrayLike,
        pco2: ArrayLike, cohb: ArrayLike = 0.0, methb: ArrayLike = 0.0, temperature: ArrayLike = 37.0,
        measured: ArrayLike = True,
    ) -> Factors:  # fmt: skip
        """Factors from numbers or arrays, broadcast to one shape [units of the attributes]; nothing held back."""
        given = (flow, hb, active, saturation, po2, ph, pco2, cohb, methb, temperature, measured)
        numbers = np.broadcast_arrays(*(np.asarray(value, dtype=np.float64) for value in given))
        names = ("flow", "hb", "active", "saturation", "po2", "ph", "pco2", "cohb", "methb", "temperature")
        zero = np.zeros(numbers[0].shape)
        columns = dict(zip(names, numbers, strict=False))
        return cls(measured=numbers[-1] != 0.0, bound=zero, held=zero, **columns)

    def take(self, rows: slice | Ints) -> Factors:
        """The factors of some rows."""
        return Factors(**{name: value[rows] for name, value in vars(self).items()})

    def supply(self, constants: Constants) -> Floats:
        """Supply at this end [mL/dL times 10 flow]."""
        bound = constants.hufner * self.hb * self.active * (self.saturation - self.bound)
        return np.asarray(_DL_PER_L * self.flow * (bound + constants.o2_solubility * (self.po2 - self.held)))


@dataclass(frozen=True)
class Split:
    """Terms of one change, and what the uncertainty of each needs.

    Attributes
    ----------
    terms : mapping of str to ndarray
        ``flow``, ``hb``, ``active``, ``po2`` (through saturation), ``dissolved``, each of :data:`SHIFTS`,
        ``residual`` and ``unloading`` (what stays bound) [unit of supply].
    total : ndarray
        Their sum [unit of supply].
    saturation_parts : mapping of str to ndarray
        The same second-level terms before their weight [0-1].
    slopes : mapping of str to ndarray
        ``start``, ``end``: slope of the curve at the two ends; ``po2_start``, ``po2_end``: of the part that PO2
        explains [saturation per ln PO2]; ``shift_start``, ``shift_end``: by a displacement to the left, ``bend``:
        of the part that PO2 explains by a displacement at either end [saturation per unit of displacement].
    """

    terms: Mapping[str, Floats]
    total: Floats
    saturation_parts: Mapping[str, Floats]
    slopes: Mapping[str, Floats]


@quiet
def split(start: Factors, end: Factors, constants: Constants) -> Split:
    """Split the change of supply from ``start`` to ``end`` over everything that supply is made of.

    Parameters
    ----------
    start, end : Factors
        The two ends [units of :class:`Factors`].
    constants : Constants
        Constants in force, the same at both ends.

    Returns
    -------
    Split
        Terms that add up to the change [unit of supply]; NaN where either end is NaN.
    """
    parts, slopes = curve_split(start, end, constants)
    change = (end.saturation - end.bound) - (start.saturation - start.bound)
    parts["unloading"] = start.bound - end.bound
    parts["residual"] = change - sum(parts.values())
    both = start.measured | end.measured
    parts["residual"] = np.where(both, parts["residual"], 0.0 * parts["residual"])
    weights, steps = bound_terms(start, end, constants.hufner)
    terms = {name: weights * part for name, part in parts.items()}
    dissolved = _DL_PER_L * constants.o2_solubility
    pressure = (start.po2 - start.held, end.po2 - end.held)
    terms["flow"] = steps["flow"] + dissolved * (end.flow - start.flow) * 0.5 * (pressure[0] + pressure[1])
    terms["hb"], terms["active"] = steps["hb"], steps["active"]
    terms["dissolved"] = dissolved * 0.5 * (start.flow + end.flow) * (pressure[1] - pressure[0])
    return Split(terms, np.asarray(sum(terms.values())), parts, slopes)


def bound_values(one: Factors) -> tuple[Floats, ...]:
    """The four factors of the bound term, in the order of :data:`BOUND`."""
    return one.flow, one.hb, one.active, one.saturation - one.bound


def bound_terms(start: Factors, end: Factors, hufner: float) -> tuple[Floats, dict[str, Floats]]:
    """First level of the bound term: the weight of a change in saturation, and flow, Hb and active share.

    Parameters
    ----------
    start, end : Factors
        The two ends [units of :class:`Factors`].
    hufner : float
        Oxygen bound per gram of active haemoglobin [mL/g].

    Returns
    -------
    weight : ndarray
        Supply per unit of saturation [unit of supply].
    terms : dict of str to ndarray
        ``flow``, ``hb``, ``active`` [unit of supply].
    """
    low, high = bound_values(start), bound_values(end)
    weight, terms = np.zeros_like(low[0]), {name: np.zeros_like(low[0]) for name in BOUND[:3]}
    for t in GAUSS:
        flow, hb, active, unloading = (a + t * (b - a) for a, b in zip(low, high, strict=True))
        content, flow_hb = hb * active, flow * hb
        weight += flow * content
        terms["flow"] += content * unloading
        terms["hb"] += flow * active * unloading
        terms["active"] += flow_hb * unloading
    half = 0.5 * _DL_PER_L * hufner
    return half * weight, {name: half * terms[name] * (b - a) for name, a, b in zip(BOUND[:3], low, high, strict=False)}


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
