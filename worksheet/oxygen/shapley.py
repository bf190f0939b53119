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

import numpy as np

from .constants import Constants
from .curve_split import curve_split, shapley_coefficients
from .domain import Floats, quiet
from .supply_factors import BOUND, CURVE, DL_PER_L, SHIFTS, Factors, Split

__all__ = [
    "BOUND", "CURVE", "GAUSS", "SHIFTS", "Factors", "Split", "bound_terms", "bound_values", "shapley_coefficients",
    "split",
]  # fmt: skip

# The integrand along the diagonal is a cubic for four factors: two Gauss-Legendre points are exact [4].
GAUSS = (0.5 - 0.5 / 3.0**0.5, 0.5 + 0.5 / 3.0**0.5)


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
    beyond = np.isnan(sum(parts.values()))  # outside the curve's domain: saturation counts for PO2 as a whole
    change = (end.saturation - end.bound) - (start.saturation - start.bound)
    parts["unloading"] = start.bound - end.bound
    if np.any(beyond):
        parts = {name: np.where(beyond, 0.0, part) for name, part in parts.items()}
        parts["po2"] = np.where(beyond, change, parts["po2"])
        slopes = {name: np.where(beyond, 0.0, slope) for name, slope in slopes.items()}
    parts["residual"] = change - sum(parts.values())
    both = start.measured | end.measured
    parts["residual"] = np.where(both, parts["residual"], 0.0 * parts["residual"])
    weights, steps = bound_terms(start, end, constants.hufner)
    terms = {name: weights * part for name, part in parts.items()}
    dissolved = DL_PER_L * constants.o2_solubility
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
    half = 0.5 * DL_PER_L * hufner
    return half * weight, {name: half * terms[name] * (b - a) for name, a, b in zip(BOUND[:3], low, high, strict=False)}
