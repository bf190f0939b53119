"""The oxyhaemoglobin dissociation curve: saturation from PO2, its inverse, its shifts and P50.

Default: the tanh model of Siggaard-Andersen, with the displacement as a sum of named terms. Site choice and
cross-check: Severinghaus 1979 with Kelman's shifts. Saturation is functional, O2Hb/(O2Hb + HHb), everywhere here.

References
----------
.. [1] Siggaard-Andersen O, Wimberley PD, Göthgen I, Siggaard-Andersen M. A mathematical model of the
   hemoglobin-oxygen dissociation curve of human blood and of the oxygen partial pressure as a function of
   temperature. Clin Chem 1984;30:1646-1651.
.. [2] Siggaard-Andersen O, Siggaard-Andersen M. The oxygen status algorithm: a computer program for calculating and
   displaying pH and blood gas data. Scand J Clin Lab Invest 1990;50 Suppl 203:29-45.
.. [3] Siggaard-Andersen M, Siggaard-Andersen O. Oxygen status algorithm, version 3, with some applications. Acta
   Anaesthesiol Scand 1995;39 Suppl 107:13-20; constants as in Scand J Clin Lab Invest 1993;53 Suppl 214:113-119.
.. [4] Severinghaus JW. Simple, accurate equations for human blood O2 dissociation computations. J Appl Physiol
   1979;46:599-602. https://doi.org/10.1152/jappl.1979.46.3.599
.. [5] Ellis RK. Determination of PO2 from saturation. J Appl Physiol 1989;67:902.
   https://doi.org/10.1152/jappl.1989.67.2.902
.. [6] Kelman GR. Digital computer subroutine for the conversion of oxygen tension into saturation. J Appl Physiol
   1966;21:1375-1376. https://doi.org/10.1152/jappl.1966.21.4.1375
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import ArrayLike
from scipy.optimize import elementwise

from .constants import Constants
from .domain import Bools, Floats, floats, keep, quiet
from .quantities import MMHG_PER_KPA

# Siggaard-Andersen 1984 [1]: y = Y0 + x + (H0 + a) tanh(K x), x = ln(PO2 / 7 kPa) - a - 0.055 (T - 37)
_Y0, _H0, _K = 1.8747, 3.5, 0.5342857
_P0 = 7.0 * MMHG_PER_KPA
_PER_KELVIN = 0.055
_PCO2_STANDARD = 5.33 * MMHG_PER_KPA
_DPG_STANDARD = 5.0
_A_RANGE = (-2.5, 2.5)  # outside, the published fit was never tested
# Below this COHb two Newton steps stand for the root; they differ from it by < 0.005 points (tests), above it the
# bracketed root is solved. No COHb at all costs nothing.
COHB_SOLVED_FROM = 0.03

P50_FULL = (0.30, 0.95)  # saturation for which P50 is reported without reserve
P50_WITH_INTERVAL = 0.97  # up to here only with its interval; limit recommended in [2]


def displacement_terms(
    ph: ArrayLike, pco2: ArrayLike, methb: ArrayLike = 0.0, hbf: ArrayLike = 0.0, dpg: ArrayLike = _DPG_STANDARD
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
        "pco2": _log(pco2 / _PCO2_STANDARD) * 0.048,
        "methb": -0.7 * methb,
        "hbf": -0.25 * hbf,
        "dpg": (0.3 - 0.1 * hbf) * (dpg / _DPG_STANDARD - 1.0),
    }


def displacement(
    ph: ArrayLike, pco2: ArrayLike, methb: ArrayLike = 0.0, hbf: ArrayLike = 0.0, dpg: ArrayLike = _DPG_STANDARD
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
    valid = (po2 >= 0.0) & _in_range(a)
    return keep(valid, _expit(_odds(_abscissa(po2, a, temperature), a)))


@quiet
def saturation_tanh(
    po2: ArrayLike,
    ph: ArrayLike = 7.4,
    pco2: ArrayLike = 40.0,
    temperature: ArrayLike = 37.0,
    cohb: ArrayLike = 0.0,
    methb: ArrayLike = 0.0,
    hbf: ArrayLike = 0.0,
    dpg: ArrayLike = _DPG_STANDARD,
) -> Floats:
    """Saturation from PO2, Siggaard-Andersen's tanh model [1]_ with Haldane's law for carbon monoxide.

    Carbon monoxide and oxygen share the curve: the saturation with either, ``u``, is the curve at
    ``PO2 u / O2 share``. With COHb measured the Haldane constant cancels (see :func:`carbon_monoxide_pressure`).

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    temperature : array_like
        Temperature all pressures hold at; 37 for what an analyser reports [°C].
    cohb, methb, hbf : array_like
        Carboxy-, met- and fetal haemoglobin, share of total; small negative readings count as 0 [0-1].
    dpg : array_like
        2,3-diphosphoglycerate in red cells [mmol/L].

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN where any input is NaN or out of domain.
    """
    po2, temperature, cohb, methb = floats(po2, temperature, cohb, methb)
    methb = np.maximum(methb, 0.0)
    a = displacement(ph, pco2, methb, hbf, dpg)
    return saturation_with_co(po2, a, temperature, co_share(cohb, methb))


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
    valid = (po2 >= 0.0) & _in_range(a) & (share >= 0.0) & (share < 1.0)
    x = _abscissa(po2, a, temperature)
    odds = _odds(x, a)
    if np.any(share > 0.0):
        odds = _odds_beside_co(odds, x, a, share)
    return keep(valid, _expit(odds))


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
def po2_tanh(
    so2: ArrayLike,
    ph: ArrayLike = 7.4,
    pco2: ArrayLike = 40.0,
    temperature: ArrayLike = 37.0,
    cohb: ArrayLike = 0.0,
    methb: ArrayLike = 0.0,
    hbf: ArrayLike = 0.0,
    dpg: ArrayLike = _DPG_STANDARD,
) -> Floats:
    """PO2 from saturation: the inverse of :func:`saturation_tanh`.

    Parameters
    ----------
    so2 : array_like
        Functional saturation, 0 to below 1 [0-1].
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    temperature : array_like
        Temperature all pressures hold at [°C].
    cohb, methb, hbf : array_like
        Carboxy-, met- and fetal haemoglobin, share of total [0-1].
    dpg : array_like
        2,3-diphosphoglycerate in red cells [mmol/L].

    Returns
    -------
    ndarray
        Oxygen partial pressure [mmHg], NaN where any input is NaN or out of domain.
    """
    so2, temperature, cohb, methb = floats(so2, temperature, cohb, methb)
    methb = np.maximum(methb, 0.0)
    a = displacement(ph, pco2, methb, hbf, dpg)
    return po2_with_co(so2, a, temperature, co_share(cohb, methb))


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
    valid = (so2 >= 0.0) & (so2 < 1.0) & _in_range(a) & (share >= 0.0) & (share < 1.0)
    oxygen = so2 * (1.0 - share)
    both = oxygen + share
    x = _abscissa_of_odds(np.log(both / ((1.0 - so2) * (1.0 - share))), a)
    total = _P0 * np.exp(x + a + _PER_KELVIN * (temperature - 37.0))
    return keep(valid, np.where(both > 0.0, total * oxygen / both, 0.0))


@quiet
def displacement_from_pair(
    po2: ArrayLike, so2: ArrayLike, temperature: ArrayLike = 37.0, share: ArrayLike = 0.0
) -> Floats:
    """Displacement that makes the curve pass exactly through one measured pair.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    so2 : array_like
        Functional saturation, measured (a calculated one would be circular) [0-1].
    temperature : array_like
        Temperature the pressure holds at [°C].
    share : array_like
        Share of the binding sites held by carbon monoxide; 0 leaves its shift inside the result [0-1].

    Returns
    -------
    ndarray
        Displacement [1, natural log of PO2], NaN where there is none in -2.5 to 2.5.
    """
    po2, so2, temperature, share = floats(po2, so2, temperature, share)
    valid = (po2 > 0.0) & (so2 > 0.0) & (so2 < 1.0) & (share >= 0.0) & (share < 1.0)
    both = so2 + (1.0 - so2) * share
    total = po2 * both / (so2 * (1.0 - share))
    odds = np.log(both / ((1.0 - so2) * (1.0 - share)))
    a, residual = _displacement_root(_abscissa(total, np.asarray(0.0), temperature), odds)
    return keep(valid & _in_range(a) & (np.abs(residual) < 1e-9), a)


@quiet
def p50_of_displacement(a: ArrayLike, temperature: ArrayLike = 37.0) -> Floats:
    """Half-saturation pressure of a curve with a known displacement.

    Parameters
    ----------
    a : array_like
        Displacement [1, natural log of PO2].
    temperature : array_like
        Temperature [°C].

    Returns
    -------
    ndarray
        P50 [mmHg], NaN where any input is NaN or the displacement outside -2.5 to 2.5.
    """
    a, temperature = floats(a, temperature)
    x = _abscissa_of_odds(np.asarray(0.0), a)
    return keep(_in_range(a), _P0 * np.exp(x + a + _PER_KELVIN * (temperature - 37.0)))


@quiet
def p50_in_vivo(po2: ArrayLike, so2: ArrayLike, temperature: ArrayLike = 37.0) -> Floats:
    """P50 of the blood as it is, from one measured pair of PO2 and saturation.

    The displacement is solved exactly and holds every shift of this blood: pH, PCO2, DPG, dyshaemoglobins, variants.
    Relative SD for 0.5 points of saturation and 3 % of PO2: 3 % at 0.50, 4.7 % at 0.95, 6.5 % at 0.97.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    so2 : array_like
        Functional saturation by co-oximetry, never a calculated one [0-1].
    temperature : array_like
        Temperature the pressure holds at; 37 for what an analyser reports [°C].

    Returns
    -------
    ndarray
        P50 [mmHg], NaN outside a saturation of 0.30 to 0.97; see :func:`p50_grade` for what to show with an interval.
    """
    po2, so2, temperature = np.broadcast_arrays(*floats(po2, so2, temperature))
    rows = p50_grade(so2) > 0
    result = np.full(so2.shape, np.nan)
    a = displacement_from_pair(po2[rows], so2[rows], temperature[rows])
    result[rows] = p50_of_displacement(a, temperature[rows])
    return result


@quiet
def p50_standard(
    po2: ArrayLike,
    so2: ArrayLike,
    ph: ArrayLike,
    pco2: ArrayLike,
    temperature: ArrayLike = 37.0,
    methb: ArrayLike = 0.0,
    hbf: ArrayLike = 0.0,
) -> Floats:
    """P50 that the blood would have at pH 7.40, PCO2 5.33 kPa, 37 °C, without MetHb and HbF.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    so2 : array_like
        Functional saturation by co-oximetry [0-1].
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    temperature : array_like
        Temperature all pressures hold at [°C].
    methb, hbf : array_like
        Met- and fetal haemoglobin, share of total [0-1].

    Returns
    -------
    ndarray
        Standard P50 [mmHg]; what is left of a shift (DPG, COHb, variants, error) stays in it. NaN outside 0.30 to 0.97.
    """
    a = displacement_from_pair(po2, so2, temperature) - displacement(ph, pco2, methb, hbf)
    return keep(p50_grade(so2) > 0, p50_of_displacement(a))


def p50_grade(so2: ArrayLike) -> np.ndarray:
    """How far a P50 from this saturation can be trusted.

    Parameters
    ----------
    so2 : array_like
        Functional saturation [0-1].

    Returns
    -------
    ndarray of int8
        2 full (0.30-0.95), 1 only with its interval (above 0.95, to 0.97), 0 not reported [code].
    """
    so2 = np.asarray(so2, dtype=np.float64)
    low, full = P50_FULL
    reported = (so2 >= low) & (so2 <= P50_WITH_INTERVAL)
    return np.where(reported, np.where(so2 <= full, 2, 1), 0).astype(np.int8)


@quiet
def saturation_severinghaus(po2: ArrayLike) -> Floats:
    """Saturation of standard blood, Severinghaus 1979 [4]_: S = c/(c + 23400), c = P^3 + 150 P.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure at pH 7.40 and 37 °C [mmHg].

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN where PO2 is NaN or negative. Published error bound 0.0055.
    """
    (po2,) = floats(po2)
    c = po2 * (po2 * po2 + 150.0)
    return keep(po2 >= 0.0, 1.0 / (1.0 + 23400.0 / c))


@quiet
def po2_ellis(so2: ArrayLike) -> Floats:
    """PO2 of standard blood from saturation: Ellis 1989 [5]_, the exact inverse of Severinghaus 1979.

    Written without the difference of two cube roots, which cancels at small saturation.

    Parameters
    ----------
    so2 : array_like
        Functional saturation, 0 to below 1 [0-1].

    Returns
    -------
    ndarray
        Oxygen partial pressure at pH 7.40 and 37 °C [mmHg], NaN out of domain.
    """
    (so2,) = floats(so2)
    q = 11700.0 * so2 / (1.0 - so2)
    u = np.cbrt(q + np.sqrt(q * q + 125000.0))
    v = 50.0 / u
    return keep((so2 >= 0.0) & (so2 < 1.0), 2.0 * q / (u * u + 50.0 + v * v))


@quiet
def kelman_equivalent_po2(
    po2: ArrayLike, ph: ArrayLike = 7.4, pco2: ArrayLike = 40.0, temperature: ArrayLike = 37.0
) -> Floats:
    """PO2 of standard blood with the same saturation: Kelman's shifts [6]_.

    ``P 10^(0.024 (37 - T) + 0.40 (pH - 7.40) + 0.06 log10(40 / PCO2))``: pH at constant PCO2.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    temperature : array_like
        Temperature all pressures hold at [°C].

    Returns
    -------
    ndarray
        Equivalent oxygen partial pressure [mmHg], NaN out of domain.
    """
    po2, ph, pco2, temperature = floats(po2, ph, pco2, temperature)
    shift = 0.024 * (37.0 - temperature) + 0.40 * (ph - 7.40) - 0.06 * np.log10(pco2 / 40.0)
    return keep((po2 >= 0.0) & (pco2 > 0.0), po2 * np.power(10.0, shift))


def saturation_severinghaus_kelman(
    po2: ArrayLike, ph: ArrayLike = 7.4, pco2: ArrayLike = 40.0, temperature: ArrayLike = 37.0
) -> Floats:
    """Saturation by Severinghaus 1979 at the PO2 that Kelman's shifts make equivalent.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    temperature : array_like
        Temperature all pressures hold at [°C].

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN out of domain.
    """
    return saturation_severinghaus(kelman_equivalent_po2(po2, ph, pco2, temperature))


@quiet
def severinghaus_ph_coefficient(po2: ArrayLike) -> Floats:
    """Severinghaus's own Bohr coefficient [4]_, eq 4: d ln P / d pH = (P/26.6)^0.184 - 2.2.

    It already contains the effect of CO2: never add a PCO2 term to it. For tests and comparison.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].

    Returns
    -------
    ndarray
        Change of ln PO2 for one pH unit at constant saturation [1].
    """
    (po2,) = floats(po2)
    return keep(po2 >= 0.0, np.power(po2 / 26.6, 0.184) - 2.2)


def saturation(
    po2: ArrayLike,
    ph: ArrayLike,
    pco2: ArrayLike,
    temperature: ArrayLike,
    cohb: ArrayLike,
    methb: ArrayLike,
    constants: Constants,
) -> Floats:
    """Saturation by the curve that the site chose.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    temperature : array_like
        Temperature all pressures hold at; 37 for what an analyser reports [°C].
    cohb, methb : array_like
        Carboxy- and methaemoglobin, share of total; 0 where not known. Severinghaus's curve has no term for them [0-1].
    constants : Constants
        Of which ``curve`` chooses.

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN where any input is NaN or out of domain.
    """
    if constants.curve == "severinghaus":
        result = saturation_severinghaus_kelman(po2, ph, pco2, temperature)
        return keep(~np.isnan(np.add(cohb, methb)), result)
    return saturation_tanh(po2, ph, pco2, temperature, cohb, methb)


def _in_range(a: Floats) -> Bools:
    return np.asarray((a >= _A_RANGE[0]) & (a <= _A_RANGE[1]))


@quiet
def _log(value: Floats) -> Floats:
    return keep(value > 0.0, np.log(value))


@quiet
def _abscissa(po2: Floats, a: Floats, temperature: Floats) -> Floats:
    """The x of the tanh model: ln(PO2 / 7 kPa) less displacement and temperature."""
    return np.asarray(np.log(po2 / _P0) - a - _PER_KELVIN * (temperature - 37.0))


@quiet
def _odds(x: Floats, a: Floats) -> Floats:
    """The y of the tanh model: ln(S / (1 - S))."""
    return np.asarray(_Y0 + x + (_H0 + a) * np.tanh(_K * x))


@quiet
def _expit(odds: Floats) -> Floats:
    return np.asarray(1.0 / (1.0 + np.exp(-odds)))


def _abscissa_of_odds(odds: Floats, a: Floats) -> Floats:
    """The x of the tanh model for ln(S / (1 - S)), by Newton: the slope is at least 1 and the start close."""
    height = _H0 + a
    rest = odds - _Y0
    x = np.clip(rest / (1.0 + _K * height), rest - height, rest + height)
    for _ in range(8):
        t = np.tanh(_K * x)
        x = x - (x + height * t - rest) / (1.0 + height * _K * (1.0 - t * t))
    return np.asarray(x)


def _displacement_root(x0: Floats, odds: Floats) -> tuple[Floats, Floats]:
    """Displacement with y(x0 - a) = odds by Newton from Hill's estimate, and what is left of the equation."""
    low, high = _A_RANGE
    a = np.clip((x0 - odds / 2.7 + 0.6710) / 1.12, low, high)
    for _ in range(8):
        t = np.tanh(_K * (x0 - a))
        left = _Y0 + x0 - a + (_H0 + a) * t - odds
        a = a + left / (1.0 - t + (_H0 + a) * _K * (1.0 - t * t))
    return np.asarray(a), _odds(x0 - a, a) - odds


def _odds_beside_co(odds: Floats, x: Floats, a: Floats, share: Floats) -> Floats:
    """ln(S / (1 - S)) in blood with carbon monoxide: Haldane's law, two Newton steps or the bracketed root."""
    odds, x, a, share = (np.array(part) for part in np.broadcast_arrays(odds, x, a, share))
    usable = np.isfinite(odds) & np.isfinite(a) & (share > 0.0) & (share < 1.0)
    few = usable & (share <= COHB_SOLVED_FROM)
    many = usable & ~few
    if np.any(few):
        at, own = odds[few], (x[few], a[few], share[few])
        for _ in range(2):
            value, slope = _haldane(at, *own)
            at = at - value / slope
        odds[few] = at
    if np.any(many):
        odds[many] = _haldane_root(odds[many], x[many], a[many], share[many])
    return odds


def _haldane(odds: Floats, x: Floats, a: Floats, share: Floats) -> tuple[Floats, Floats]:
    """Curve minus actual ln-odds of the saturation with O2 or CO, and its derivative by the ln-odds of O2 alone."""
    s = _expit(odds)
    both = s + (1.0 - s) * share
    ratio = both / (s * (1.0 - share))
    at = x + np.log(ratio)
    t = np.tanh(_K * at)
    value = _Y0 + at + (_H0 + a) * t - odds - np.log(ratio)
    grown = s * (1.0 - s) * (1.0 - share) / both
    slope = (1.0 + (_H0 + a) * _K * (1.0 - t * t)) * (grown - (1.0 - s)) - (grown + s)
    return value, slope


def _haldane_root(odds: Floats, x: Floats, a: Floats, share: Floats) -> Floats:
    """The one root of Haldane's law, bracketed by the curve without carbon monoxide and a step above it."""
    found = elementwise.find_root(
        lambda at, *own: _haldane(at, *own)[0], (odds - 1e-9, odds + 40.0), args=(x, a, share)
    )
    return np.where(found.success, found.x, np.nan)
