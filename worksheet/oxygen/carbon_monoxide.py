"""Oxygen and carbon monoxide on one curve: Haldane's law.

Both ligands share the curve: the saturation with either, u, is the curve at P = PO2 u / (u's part of oxygen). With COHb
measured, its share of the binding sites is known and the Haldane constant cancels; it is only needed for the pressure
of carbon monoxide itself.

References
----------
.. [1] Douglas CG, Haldane JS, Haldane JBS. The laws of combination of haemoglobin with carbon monoxide and oxygen.
   J Physiol 1912;44:275-304.
.. [2] Siggaard-Andersen O, Siggaard-Andersen M, Fogh-Andersen N. The TANH-equation modified for the hemoglobin,
   oxygen, and carbon monoxide equilibrium. Scand J Clin Lab Invest 1993;53 Suppl 214:113-119.
   https://doi.org/10.1080/00365519309090687
.. [3] Roughton FJW, Darling RC. The effect of carbon monoxide on the oxyhemoglobin dissociation curve. Am J Physiol
   1944;141:17-31.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from .domain import Floats, floats, keep, quiet
from .tanh_model import (
    H0,
    P_REFERENCE,
    PER_KELVIN,
    Y0,
    K,
    abscissa,
    abscissa_of_odds,
    expit,
    in_range,
    odds_at,
)

# Up to this share of the sites one step of Halley's method stands for the root, within 0.01 points of it (tests);
# above, the bracketed root is solved.
SOLVED_FROM = 0.03
_NO_OXYGEN = -500.0  # ln-odds below which the saturation is 0 to the last digit, with or without carbon monoxide


@quiet
def co_share(cohb: ArrayLike, methb: ArrayLike = 0.0) -> Floats:
    """Share of the haemoglobin that can bind a ligand which carbon monoxide holds.

    Parameters
    ----------
    cohb, methb : array_like
        Carboxy- and methaemoglobin, share of total; small negative readings count as 0 [0-1].

    Returns
    -------
    ndarray
        COHb / (1 - MetHb) [0-1], NaN where the two leave no haemoglobin.
    """
    cohb, methb = floats(cohb, methb)
    cohb, methb = np.maximum(cohb, 0.0), np.maximum(methb, 0.0)
    return keep(cohb + methb < 1.0, cohb / (1.0 - methb))


@quiet
def carbon_monoxide_pressure(po2: ArrayLike, o2hb: ArrayLike, cohb: ArrayLike, haldane: float = 218.0) -> Floats:
    """Carbon monoxide pressure in balance with the blood: Haldane's law, COHb/O2Hb = M PCO/PO2.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    o2hb, cohb : array_like
        Oxy- and carboxyhaemoglobin, share of total [0-1].
    haldane : float
        Relative affinity M for CO over O2 (Roughton & Darling 1944, from memory) [1].

    Returns
    -------
    ndarray
        Carbon monoxide partial pressure [mmHg], NaN where any input is NaN or there is no oxyhaemoglobin.
    """
    po2, o2hb, cohb = floats(po2, o2hb, cohb)
    return keep((po2 >= 0.0) & (o2hb > 0.0) & (cohb >= 0.0), cohb / o2hb * po2 / haldane)


@quiet
def saturation_with_co(po2: ArrayLike, a: ArrayLike, temperature: ArrayLike, share: ArrayLike) -> Floats:
    """Saturation of blood that carries carbon monoxide, from PO2 and a known displacement.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    a : array_like
        Displacement without the part of carbon monoxide [1, natural log of PO2].
    temperature : array_like
        Temperature the pressure holds at [°C].
    share : array_like
        Share of the binding sites held by carbon monoxide, see :func:`co_share` [0-1].

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN where any input is NaN or out of domain.
    """
    po2, a, temperature, share = floats(po2, a, temperature, share)
    valid = (po2 >= 0.0) & in_range(a) & (share >= 0.0) & (share < 1.0)
    x = abscissa(po2, a, temperature)
    odds = odds_at(x, a)
    if np.any(share > 0.0):
        odds = _odds_beside_co(odds, x, a, share)
    return keep(valid, expit(odds))


@quiet
def po2_with_co(so2: ArrayLike, a: ArrayLike, temperature: ArrayLike = 37.0, share: ArrayLike = 0.0) -> Floats:
    """PO2 from saturation and a known displacement: the inverse of :func:`saturation_with_co`.

    Parameters
    ----------
    so2 : array_like
        Functional saturation, 0 to below 1 [0-1].
    a : array_like
        Displacement without the part of carbon monoxide [1, natural log of PO2].
    temperature : array_like
        Temperature the pressure holds at [°C].
    share : array_like
        Share of the binding sites held by carbon monoxide [0-1].

    Returns
    -------
    ndarray
        Oxygen partial pressure [mmHg], NaN where any input is NaN or out of domain.
    """
    so2, a, temperature, share = floats(so2, a, temperature, share)
    valid = (so2 >= 0.0) & (so2 < 1.0) & in_range(a) & (share >= 0.0) & (share < 1.0)
    oxygen = so2 * (1.0 - share)
    both = oxygen + share
    x = abscissa_of_odds(np.log(both / ((1.0 - so2) * (1.0 - share))), a)
    total = P_REFERENCE * np.exp(x + a + PER_KELVIN * (temperature - 37.0))
    return keep(valid, np.where(both > 0.0, total * oxygen / both, 0.0))


def _odds_beside_co(odds: Floats, x: Floats, a: Floats, share: Floats) -> Floats:
    """ln(S / (1 - S)) in blood with carbon monoxide: Haldane's law, one step of Halley's or the bracketed root."""
    odds, x, a, share = np.broadcast_arrays(odds, x, a, share)
    value, slope, curved = _haldane(odds, x, a, share)
    step = 2.0 * value * slope / (2.0 * slope * slope - value * curved)
    found = np.array(np.where((share > 0.0) & (odds > _NO_OXYGEN), odds - step, odds))
    rows = (share > SOLVED_FROM) & (share < 1.0) & (odds > _NO_OXYGEN) & (odds < np.inf) & in_range(a)
    if np.any(rows):
        found[rows] = _haldane_root(odds[rows], x[rows], a[rows], share[rows])
    return found


def _haldane(odds: Floats, x: Floats, a: Floats, share: Floats) -> tuple[Floats, Floats, Floats]:
    """Curve minus actual ln-odds of the saturation with O2 or CO, and two derivatives by the ln-odds of O2 alone.

    With both ligands at the sites, pressure and odds are higher by the same factor, (1 + w)/(1 - share).
    """
    w = share * np.exp(-odds)
    grown = np.log((1.0 + w) / (1.0 - share))
    t = np.tanh(K * (x + grown))
    value = Y0 + x + (H0 + a) * t - odds
    part = w / (1.0 + w)
    bend = (H0 + a) * K * (1.0 - t * t) * part
    curved = bend * (1.0 - part - 2.0 * K * t * part)
    return np.asarray(value), np.asarray(-1.0 - bend), np.asarray(curved)


def _haldane_root(odds: Floats, x: Floats, a: Floats, share: Floats) -> Floats:
    """The one root of Haldane's law, bracketed by the curve without carbon monoxide and a step above it."""
    from scipy.optimize import elementwise  # here: it takes a third of a second, and few tables need it

    found = elementwise.find_root(
        lambda at, *own: _haldane(at, *own)[0], (odds - 1e-9, odds + 40.0), args=(x, a, share)
    )
    return np.where(found.success, found.x, np.nan)
