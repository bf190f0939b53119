"""Oxygen and carbon dioxide content of blood, and how much of the oxygen can be unloaded.

References
----------
.. [1] Domínguez de Villota ED et al. Oxygen-binding capacity of human haemoglobin. Br J Anaesth 1981;53:1325-1328.
.. [2] Christoforides C, Hedley-Whyte J. Effect of temperature and hemoglobin concentration on solubility of O2 in
   blood. J Appl Physiol 1969;27:592-596.
.. [3] Siggaard-Andersen O, Gøthgen IH. Oxygen and acid-base parameters of arterial and mixed venous blood, relevant
   versus redundant. Acta Anaesthesiol Scand 1995;39 Suppl 107:21-27 and 41-45.
.. [4] Douglas AR, Jones NL, Reed JW. Calculation of whole blood CO2 content. J Appl Physiol 1988;65:473-477.
   https://doi.org/10.1152/jappl.1988.65.1.473
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from .acidbase import pco2_at, ph_at, po2_at
from .constants import Constants
from .curve import (
    P50_FULL,
    P50_WITH_INTERVAL,
    co_share,
    displacement,
    displacement_from_pair,
    kelman_equivalent_po2,
    po2_ellis,
    saturation_severinghaus,
    saturation_with_co,
)
from .domain import Floats, floats, keep, power_of_ten, quiet

# Displacement that the model does not explain. DPG of 0 to 10 mmol/L is -0.3 to 0.3; the margin is for variants.
_MOST_REST = 0.4
_SOLUBILITY_PER_KELVIN = -0.012  # [2]; the same in Siggaard-Andersen 1984


@quiet
def functional_to_fractional(so2: ArrayLike, inactive: ArrayLike) -> Floats:
    """Oxyhaemoglobin as a share of all haemoglobin: sO2 (1 - inactive).

    Parameters
    ----------
    so2 : array_like
        Functional saturation, O2Hb/(O2Hb + HHb) [0-1].
    inactive : array_like
        Share of haemoglobin that cannot carry oxygen: COHb + MetHb + SulfHb [0-1].

    Returns
    -------
    ndarray
        FO2Hb [0-1], NaN where any input is NaN or out of 0-1.
    """
    so2, inactive = floats(so2, inactive)
    valid = (so2 >= 0.0) & (so2 <= 1.0) & (inactive >= 0.0) & (inactive <= 1.0)
    return keep(valid, so2 * (1.0 - inactive))


@quiet
def capacity(hb: ArrayLike, inactive: ArrayLike, constants: Constants) -> Floats:
    """Oxygen capacity of the working haemoglobin: k Hb (1 - inactive), k = 1.39 mL/g of active haemoglobin [1]_.

    Parameters
    ----------
    hb : array_like
        Total haemoglobin [g/dL].
    inactive : array_like
        Share of haemoglobin that cannot carry oxygen [0-1].
    constants : Constants
        Of which ``hufner`` [mL/g].

    Returns
    -------
    ndarray
        Capacity [mL/dL, STPD], NaN where any input is NaN or out of domain.
    """
    hb, inactive = floats(hb, inactive)
    return keep((hb >= 0.0) & (inactive >= 0.0) & (inactive <= 1.0), constants.hufner * hb * (1.0 - inactive))


@quiet
def dissolved_oxygen(po2: ArrayLike, constants: Constants, temperature: ArrayLike = 37.0) -> Floats:
    """Oxygen in solution: alpha PO2, alpha falling by 1.2 % per kelvin [2]_.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure at ``temperature`` [mmHg].
    constants : Constants
        Of which ``o2_solubility``, at 37 °C [mL/dL/mmHg].
    temperature : array_like
        Temperature [°C].

    Returns
    -------
    ndarray
        Dissolved oxygen [mL/dL, STPD], NaN where any input is NaN or PO2 negative.
    """
    po2, temperature = floats(po2, temperature)
    alpha = constants.o2_solubility * np.exp(_SOLUBILITY_PER_KELVIN * (temperature - 37.0))
    return keep(po2 >= 0.0, alpha * po2)


@quiet
def oxygen_content(hb: ArrayLike, o2hb: ArrayLike, po2: ArrayLike, constants: Constants) -> Floats:
    """Oxygen content of blood: k Hb FO2Hb + alpha PO2.

    k is per gram of active haemoglobin [1]_, so the saturation must be the fractional one.

    Parameters
    ----------
    hb : array_like
        Total haemoglobin concentration [g/dL].
    o2hb : array_like
        Oxyhaemoglobin, as a fraction of total haemoglobin [0-1].
    po2 : array_like
        Oxygen partial pressure at 37 °C [mmHg].
    constants : Constants
        Of which ``hufner`` [mL/g] and ``o2_solubility`` [mL/dL/mmHg].

    Returns
    -------
    ndarray
        Oxygen content [mL/dL, STPD], NaN where any input is NaN or out of domain.
    """
    hb, o2hb, po2 = floats(hb, o2hb, po2)
    valid = (hb >= 0.0) & (o2hb >= 0.0) & (o2hb <= 1.0) & (po2 >= 0.0)
    return keep(valid, constants.hufner * hb * o2hb + constants.o2_solubility * po2)


@quiet
def extractable_oxygen(
    hb: ArrayLike,
    inactive: ArrayLike,
    so2: ArrayLike,
    po2: ArrayLike,
    ph: ArrayLike,
    pco2: ArrayLike,
    temperature: ArrayLike,
    cohb: ArrayLike,
    methb: ArrayLike,
    constants: Constants,
) -> Floats:
    """Oxygen that the blood in the body can give up until its PO2 has fallen to the end-capillary one [3]_.

    CaO2 less the content of the same blood at ``constants.end_capillary_po2`` and body temperature. The gases are
    first corrected to body temperature. The curve is the patient's own: see :func:`end_capillary_saturation`.
    pH and PCO2 stay the arterial ones, so the Bohr shift on the way through the tissue is left out.

    Parameters
    ----------
    hb : array_like
        Total haemoglobin [g/dL].
    inactive : array_like
        Share of haemoglobin that cannot carry oxygen [0-1].
    so2 : array_like
        Functional saturation that goes into content [0-1].
    po2, pco2 : array_like
        Oxygen and carbon dioxide partial pressure at 37 °C [mmHg].
    ph : array_like
        pH at 37 °C [1].
    temperature : array_like
        Body temperature [°C].
    cohb, methb : array_like
        Carboxy- and methaemoglobin, share of total; 0 where not known [0-1].
    constants : Constants
        Constants in force.

    Returns
    -------
    ndarray
        Extractable oxygen [mL/dL, STPD], 0 where the arterial PO2 is no higher than the end-capillary one, NaN where
        any input is NaN or out of domain.
    """
    (so2,) = floats(so2)
    held = capacity(hb, inactive, constants)
    left = end_capillary_saturation(so2, po2, ph, pco2, temperature, cohb, methb, constants)
    dissolved = dissolved_oxygen(po2, constants) - dissolved_oxygen(constants.end_capillary_po2, constants, temperature)
    return np.asarray(np.maximum(held * (so2 - left) + dissolved, 0.0))


@quiet
def end_capillary_saturation(
    so2: ArrayLike,
    po2: ArrayLike,
    ph: ArrayLike,
    pco2: ArrayLike,
    temperature: ArrayLike,
    cohb: ArrayLike,
    methb: ArrayLike,
    constants: Constants,
) -> Floats:
    """Saturation of the same blood at the end-capillary PO2 and body temperature, on the patient's own curve.

    The curve's displacement is the modelled one plus what is needed to pass through the saturation in use. That rest
    counts fully for saturations of 0.30 to 0.95 and fades out by 0.97, as P50 does: above, a pair says nothing of it.
    It counts for no more than 0.4, a P50 a third lower or half higher: beyond, the pair contradicts itself.

    Parameters
    ----------
    so2 : array_like
        Functional saturation that goes into content [0-1].
    po2, pco2 : array_like
        Oxygen and carbon dioxide partial pressure at 37 °C [mmHg].
    ph : array_like
        pH at 37 °C [1].
    temperature : array_like
        Body temperature [°C].
    cohb, methb : array_like
        Carboxy- and methaemoglobin, share of total; 0 where not known [0-1].
    constants : Constants
        Constants in force.

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN where any input is NaN or out of domain.
    """
    so2, temperature, cohb, methb = floats(so2, temperature, cohb, methb)
    po2, ph, pco2 = po2_at(po2, temperature), ph_at(ph, temperature), pco2_at(pco2, temperature)
    valid = (so2 >= 0.0) & (so2 <= 1.0) & ~np.isnan(po2 + cohb + methb)
    end, trust = constants.end_capillary_po2, _trust_of_pair(so2)
    if constants.curve == "severinghaus":
        scale = np.log(po2_ellis(so2) / kelman_equivalent_po2(po2, ph, pco2, temperature))
        at_end = kelman_equivalent_po2(end, ph, pco2, temperature) * np.exp(_trusted(trust, scale))
        return keep(valid, saturation_severinghaus(at_end))
    share = co_share(cohb, methb)
    modelled = displacement(ph, pco2, np.maximum(methb, 0.0))
    rest = displacement_from_pair(po2, so2, temperature, share) - modelled
    return keep(valid, saturation_with_co(end, modelled + _trusted(trust, rest), temperature, share))


def _trusted(trust: Floats, rest: Floats) -> Floats:
    """What a pair adds to the modelled curve, within reason; nothing where no curve passes through it."""
    return np.where(np.isfinite(rest), trust * np.clip(rest, -_MOST_REST, _MOST_REST), 0.0)


def _trust_of_pair(so2: Floats) -> Floats:
    """Weight of what a pair says of the curve: 1 where P50 is reported in full, 0 where it is not reported."""
    low, full = P50_FULL
    fading = (P50_WITH_INTERVAL - so2) / (P50_WITH_INTERVAL - full)
    return np.where(so2 >= low, np.clip(fading, 0.0, 1.0), 0.0)


@quiet
def co2_content_plasma(pco2: ArrayLike, ph: ArrayLike, temperature: ArrayLike = 37.0) -> Floats:
    """Carbon dioxide content of plasma, Douglas, Jones & Reed 1988 [4]_: 2.226 s PCO2 (1 + 10^(pH - pK')).

    Parameters
    ----------
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    ph : array_like
        pH [1].
    temperature : array_like
        Temperature the values hold at [°C].

    Returns
    -------
    ndarray
        Carbon dioxide content of plasma [mL/dL, STPD], NaN where any input is NaN or PCO2 negative.
    """
    pco2, ph, temperature = floats(pco2, ph, temperature)
    colder, alkaline = 37.0 - temperature, 7.4 - ph
    solubility = 0.0307 + 0.00057 * colder + 0.00002 * colder * colder
    pk = 6.086 + 0.042 * alkaline + (colder + 1.0) * (0.00472 + 0.00139 * alkaline)
    return keep(pco2 >= 0.0, 2.226 * solubility * pco2 * (1.0 + power_of_ten(ph - pk)))


@quiet
def co2_content_blood(
    pco2: ArrayLike, ph: ArrayLike, hb: ArrayLike, so2: ArrayLike, temperature: ArrayLike = 37.0
) -> Floats:
    """Carbon dioxide content of blood, Douglas, Jones & Reed 1988 [4]_.

    Plasma content times ``1 - 0.0289 Hb / ((3.352 - 0.456 sO2)(8.142 - pH))``. Against the paper's 38 samples the SD is
    1.15 mL/dL: a veno-arterial difference is dominated by that noise and is only shown with its interval.

    Parameters
    ----------
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    ph : array_like
        pH, below 8.142 [1].
    hb : array_like
        Haemoglobin [g/dL].
    so2 : array_like
        Functional saturation [0-1].
    temperature : array_like
        Temperature the values hold at [°C].

    Returns
    -------
    ndarray
        Carbon dioxide content [mL/dL, STPD], NaN where any input is NaN or out of domain.
    """
    ph, hb, so2 = floats(ph, hb, so2)
    plasma = co2_content_plasma(pco2, ph, temperature)
    cells = 1.0 - 0.0289 * hb / ((3.352 - 0.456 * so2) * (8.142 - ph))
    return keep((ph < 8.142) & (hb >= 0.0) & (so2 >= 0.0) & (so2 <= 1.0) & (cells > 0.0), plasma * cells)
