"""The tanh model of the dissociation curve: equation, displacement terms, slope and roots.

The parts of :mod:`~worksheet.oxygen.curve` that the saturation, carbon monoxide and P50 share. Saturation is
functional, O2Hb/(O2Hb + HHb), everywhere.

References
----------
.. [1] Siggaard-Andersen O, Wimberley PD, Göthgen I, Siggaard-Andersen M. A mathematical model of the
   hemoglobin-oxygen dissociation curve of human blood and of the oxygen partial pressure as a function of
   temperature. Clin Chem 1984;30:1646-1651.
.. [2] Siggaard-Andersen O, Siggaard-Andersen M. The oxygen status algorithm: a computer program for calculating and
   displaying pH and blood gas data. Scand J Clin Lab Invest 1990;50 Suppl 203:29-45.
.. [3] Siggaard-Andersen O, Siggaard-Andersen M, Fogh-Andersen N. The TANH-equation modified for the hemoglobin,
   oxygen, and carbon monoxide equilibrium. Scand J Clin Lab Invest 1993;53 Suppl 214:113-119.
   https://doi.org/10.1080/00365519309090687
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import ArrayLike

from .domain import Bools, Floats, floats, keep, quiet
from .quantities import MMHG_PER_KPA

# [1]: y = Y0 + x + (H0 + a) tanh(K x), x = ln(PO2 / 7 kPa) - a - 0.055 (T - 37), y = ln(S / (1 - S)); digits of [2]
Y0, H0, K = 1.8747, 3.5, 0.5342857
P_REFERENCE = 7.0 * MMHG_PER_KPA
PER_KELVIN = 0.055
PCO2_STANDARD = 5.33 * MMHG_PER_KPA
DPG_STANDARD = 5.0
_ROOT = 1e-10  # what may be left of the equation, in ln-odds
A_RANGE = (-2.5, 2.5)  # the range that the displacement is sought in; no living blood is near its ends


@quiet
def displacement_terms(
    ph: ArrayLike, pco2: ArrayLike, methb: ArrayLike = 0.0, hbf: ArrayLike = 0.0, dpg: ArrayLike = DPG_STANDARD
) -> Mapping[str, Floats]:
    """Named parts of the displacement of the curve along ln PO2 (constants of 1993 [3]).

    ``a = -0.88 (pH - 7.40) + 0.048 ln(PCO2 / 5.33 kPa) - 0.7 MetHb + (0.3 - 0.1 HbF)(DPG/5 - 1) - 0.25 HbF``.
    Temperature enters beside the displacement, carbon monoxide through Haldane's law. The MetHb and COHb shifts
    depend on the model: two published sets of constants differ (P50 22.9 or 25.8 mmHg at MetHb 0.2).

    Parameters
    ----------
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    methb, hbf : array_like
        Methaemoglobin and fetal haemoglobin, share of total [0-1].
    dpg : array_like
        2,3-diphosphoglycerate in red cells [mmol/L].

    Returns
    -------
    mapping of str to ndarray
        ``ph``, ``pco2``, ``methb``, ``hbf``, ``dpg``: positive moves the curve to the right [1, natural log of PO2].
    """
    ph, pco2, methb, hbf, dpg = floats(ph, pco2, methb, hbf, dpg)
    return {
        "ph": -0.88 * (ph - 7.40),
        "pco2": _log(pco2 / PCO2_STANDARD) * 0.048,
        "methb": -0.7 * methb,
        "hbf": -0.25 * hbf,
        "dpg": (0.3 - 0.1 * hbf) * (dpg / DPG_STANDARD - 1.0),
    }


@quiet
def displacement(
    ph: ArrayLike, pco2: ArrayLike, methb: ArrayLike = 0.0, hbf: ArrayLike = 0.0, dpg: ArrayLike = DPG_STANDARD
) -> Floats:
    """Displacement of the curve: the sum of :func:`displacement_terms`.

    Parameters
    ----------
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    methb, hbf : array_like
        Methaemoglobin and fetal haemoglobin, share of total [0-1].
    dpg : array_like
        2,3-diphosphoglycerate in red cells [mmol/L].

    Returns
    -------
    ndarray
        Displacement [1, natural log of PO2], NaN where any input is NaN.
    """
    terms = displacement_terms(ph, pco2, methb, hbf, dpg)
    return np.asarray(terms["ph"] + terms["pco2"] + terms["methb"] + terms["hbf"] + terms["dpg"])


def saturation_from_displacement(po2: ArrayLike, a: ArrayLike, temperature: ArrayLike = 37.0) -> Floats:
    """Saturation of blood without carbon monoxide, from PO2 and a known displacement.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    a : array_like
        Displacement [1, natural log of PO2].
    temperature : array_like
        Temperature the pressure holds at [°C].

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN for negative PO2 or a displacement outside -2.5 to 2.5.
    """
    po2, a, temperature = floats(po2, a, temperature)
    valid = (po2 >= 0.0) & in_range(a)
    return keep(valid, expit(odds_at(abscissa(po2, a, temperature), a)))


def in_range(a: Floats) -> Bools:
    """Whether a displacement is one the model is used with.

    Parameters
    ----------
    a : ndarray
        Displacement [1, natural log of PO2].

    Returns
    -------
    ndarray of bool
        True from -2.5 to 2.5, False for NaN [bool].
    """
    return np.asarray((a >= A_RANGE[0]) & (a <= A_RANGE[1]))


def _log(value: Floats) -> Floats:
    return keep(value > 0.0, np.log(value))


@quiet
def abscissa(po2: Floats, a: Floats, temperature: Floats) -> Floats:
    """The x of the tanh model: ln(PO2 / 7 kPa) less displacement and temperature.

    Parameters
    ----------
    po2 : ndarray
        Oxygen partial pressure [mmHg].
    a : ndarray
        Displacement [1, natural log of PO2].
    temperature : ndarray
        Temperature the pressure holds at [°C].

    Returns
    -------
    ndarray
        x [1, natural log of PO2], minus infinity without oxygen.
    """
    return np.asarray(np.log(po2 / P_REFERENCE) - a - PER_KELVIN * (temperature - 37.0))


@quiet
def odds_at(x: Floats, a: Floats) -> Floats:
    """The y of the tanh model: ln(S / (1 - S)).

    Parameters
    ----------
    x : ndarray
        From :func:`abscissa` [1].
    a : ndarray
        Displacement [1, natural log of PO2].

    Returns
    -------
    ndarray
        ln-odds of the saturation [1].
    """
    return np.asarray(Y0 + x + (H0 + a) * np.tanh(K * x))


@quiet
def expit(odds: Floats) -> Floats:
    """The saturation that has these ln-odds.

    Parameters
    ----------
    odds : ndarray
        ln(S / (1 - S)) [1].

    Returns
    -------
    ndarray
        Saturation [0-1].
    """
    return np.asarray(1.0 / (1.0 + np.exp(-odds)))


def abscissa_of_odds(odds: Floats, a: Floats, steps: int = 5) -> Floats:
    """The x of the tanh model for ln(S / (1 - S)), by Newton: the slope is at least 1, five steps are exact anywhere.

    At half saturation three are.

    Parameters
    ----------
    odds : ndarray
        ln(S / (1 - S)) [1].
    a : ndarray
        Displacement [1, natural log of PO2].
    steps : int
        Steps of Newton's method [1].

    Returns
    -------
    ndarray
        x with y(x) = odds [1].
    """
    height = H0 + a
    rest = odds - Y0
    x = np.clip(rest / (1.0 + K * height), rest - height, rest + height)
    for _ in range(steps):
        t = np.tanh(K * x)
        x = x - (x + height * t - rest) / (1.0 + height * K * (1.0 - t * t))
    return np.asarray(x)


def displacement_root(x0: Floats, odds: Floats) -> tuple[Floats, Floats]:
    """Displacement with y(x0 - a) = odds, and what is left of the equation.

    Two steps of Halley's method are exact for living blood; rows that need more get them, each by itself.

    Parameters
    ----------
    x0 : ndarray
        x of the tanh model at no displacement [1].
    odds : ndarray
        ln(S / (1 - S)) that the curve is to pass through [1].

    Returns
    -------
    a : ndarray
        Displacement [1, natural log of PO2].
    left : ndarray
        y(x0 - a) less the odds asked for: near 0 where the root was found [1].
    """
    x0, odds = np.broadcast_arrays(x0, odds)
    a = _nearer(_nearer(_first_displacement(odds, x0), odds, x0), odds, x0)
    left = np.asarray(odds_at(x0 - a, a) - odds)
    for _ in range(4):
        rows = np.abs(left) > _ROOT
        if not np.any(rows):
            break
        a[rows] = _nearer(a[rows], odds[rows], x0[rows])
        left[rows] = odds_at(x0[rows] - a[rows], a[rows]) - odds[rows]
    return a, left


def _first_displacement(odds: Floats, x0: Floats) -> Floats:
    """First estimate: the standard curve read backwards, and how its height changes with the displacement."""
    rest = odds - Y0
    x = np.clip(rest / (1.0 + K * H0), rest - H0, rest + H0)
    t = np.tanh(K * x)
    low, high = A_RANGE
    return np.clip((x0 - x) / (1.0 - t / (1.0 + H0 * K * (1.0 - t * t))), low, high)


def _nearer(a: Floats, odds: Floats, x0: Floats) -> Floats:
    """One step of Halley's method."""
    t = np.tanh(K * (x0 - a))
    height = H0 + a
    bend = K * (1.0 - t * t)
    left = Y0 + x0 - a + height * t - odds
    slope = t - 1.0 - height * bend
    curved = -2.0 * bend * (1.0 + height * K * t)
    return np.asarray(a - 2.0 * left * slope / (2.0 * slope * slope - left * curved))
