"""P50: where the patient's own dissociation curve lies, from one measured pair.

References
----------
.. [1] Siggaard-Andersen O, Siggaard-Andersen M. The oxygen status algorithm: a computer program for calculating and
   displaying pH and blood gas data. Scand J Clin Lab Invest 1990;50 Suppl 203:29-45.
.. [2] Burnett RW et al. Recommendation on reporting the P50 of blood. Clin Chem 2002;48:567 (IFCC).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .carbon_monoxide import co_share, po2_with_co
from .domain import Floats, floats, keep, quiet
from .tanh_model import (
    P_REFERENCE,
    PER_KELVIN,
    abscissa,
    abscissa_of_odds,
    displacement,
    displacement_root,
    in_range,
)

P50_FULL = (0.30, 0.95)  # saturation for which P50 is reported without reserve
P50_WITH_INTERVAL = 0.97  # up to here only with its interval; limit recommended in [1]


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
    a, residual = displacement_root(abscissa(total, np.asarray(0.0), temperature), odds)
    return keep(valid & in_range(a) & (np.abs(residual) < 1e-9), a)


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
    x = abscissa_of_odds(np.asarray(0.0), a, steps=3)
    return keep(in_range(a), P_REFERENCE * np.exp(x + a + PER_KELVIN * (temperature - 37.0)))


@quiet
def p50_in_vivo(
    po2: ArrayLike,
    so2: ArrayLike,
    temperature: ArrayLike = 37.0,
    cohb: ArrayLike = 0.0,
    methb: ArrayLike = 0.0,
) -> Floats:
    """P50 of the blood as it is, from one measured pair of PO2 and saturation.

    The displacement is solved exactly and holds every shift of this blood: pH, PCO2, DPG, MetHb, variants. With COHb
    given, Haldane's law carries it from the measured pair to half saturation; without, its shift is taken as part of
    the displacement. By the tanh model, whichever curve a site chose. Relative SD for 0.5 points of saturation and 3 %
    of PO2: 3 % at 0.50, 4.7 % at 0.95, 6.5 % at 0.97.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    so2 : array_like
        Functional saturation by co-oximetry, never a calculated one [0-1].
    temperature : array_like
        Temperature the pressure holds at; 37 for what an analyser reports [°C].
    cohb, methb : array_like
        Carboxy- and methaemoglobin, share of total; 0 where not known [0-1].

    Returns
    -------
    ndarray
        P50 [mmHg], NaN outside a saturation of 0.30 to 0.97; see :func:`p50_grade` for what to show with an interval.
    """
    share = co_share(cohb, methb)
    po2, so2, temperature, share = np.broadcast_arrays(*floats(po2, so2, temperature), share)
    rows = p50_grade(so2) > 0
    result = np.full(so2.shape, np.nan)
    po2, so2, temperature, share = po2[rows], so2[rows], temperature[rows], share[rows]
    a = displacement_from_pair(po2, so2, temperature, share)
    free = not np.any(share > 0.0)
    result[rows] = p50_of_displacement(a, temperature) if free else po2_with_co(0.5, a, temperature, share)
    return result


@quiet
def p50_standard(
    po2: ArrayLike,
    so2: ArrayLike,
    ph: ArrayLike,
    pco2: ArrayLike,
    temperature: ArrayLike = 37.0,
    cohb: ArrayLike = 0.0,
    methb: ArrayLike = 0.0,
    hbf: ArrayLike = 0.0,
) -> Floats:
    """P50 that the blood would have at pH 7.40, PCO2 5.33 kPa, 37 °C, without COHb, MetHb and HbF.

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
    cohb, methb, hbf : array_like
        Carboxy-, met- and fetal haemoglobin, share of total; 0 where not known [0-1].

    Returns
    -------
    ndarray
        Standard P50 [mmHg]; what is left of a shift (DPG, variants, error) stays in it. NaN outside a saturation of
        0.30 to 0.97.
    """
    a = displacement_from_pair(po2, so2, temperature, co_share(cohb, methb))
    return keep(p50_grade(so2) > 0, p50_of_displacement(a - displacement(ph, pco2, methb, hbf)))


def p50_grade(so2: ArrayLike) -> NDArray[np.int8]:
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
