"""Gas exchange of the lung: the alveolar gas equation, gradients and ratios, shunt and indices.

Altitude and bands are in their own modules and offered here too.

References
----------
.. [1] Fenn WO, Rahn H, Otis AB. A theoretical study of the composition of the alveolar air at altitude. Am J Physiol
   1946;146:637-653.
.. [2] Mellemgaard K. The alveolar-arterial oxygen difference: its size and components in normal man. Acta Physiol Scand
   1966;67:10-20.
.. [3] Gilbert R, Keighley JF. The arterial/alveolar oxygen tension ratio. Am Rev Respir Dis 1974;109:142-145.
.. [4] ARDS Definition Task Force. Acute respiratory distress syndrome: the Berlin definition. JAMA 2012;307:2526-2533.
.. [5] Matthay MA et al. A new global definition of acute respiratory distress syndrome. Am J Respir Crit Care Med
   2024;209:37-47. https://doi.org/10.1164/rccm.202303-0558WS
.. [6] Rice TW et al. Comparison of the SpO2/FiO2 ratio and the PaO2/FiO2 ratio in patients with acute lung injury or
   ARDS. Chest 2007;132:410-417.
.. [7] Berggren SM. The oxygen deficit of arterial blood caused by non-ventilating parts of the lung. Acta Physiol Scand
   1942;4 Suppl 11:1-92.
.. [8] Roca O et al. Predicting success of high-flow nasal cannula in pneumonia patients with hypoxemic respiratory
   failure: the utility of the ROX index. J Crit Care 2016;35:200-205.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from .altitude import (
    SEA_LEVEL,
    barometric_pressure_icao,
    barometric_pressure_west,
    estimated_fio2_low_flow,
    water_vapour_pressure,
)
from .bands import BAND_WORDS, Band, pf_band, pf_band_global
from .constants import Constants
from .content import functional_to_fractional, oxygen_content
from .curve import saturation
from .domain import Floats, floats, keep, quiet

__all__ = [
    "BAND_WORDS",
    "SPO2_LIMIT",
    "Band",
    "a_a_ratio",
    "aa_gradient",
    "alveolar_po2",
    "alveolar_po2_short",
    "barometric_pressure_icao",
    "barometric_pressure_west",
    "end_capillary_content",
    "estimated_fio2_low_flow",
    "expected_aa_gradient",
    "oxygenation_index",
    "pf_altitude_corrected",
    "pf_band",
    "pf_band_global",
    "pf_ratio",
    "rice_sf",
    "rox_index",
    "sf_ratio",
    "shunt_fraction",
    "water_vapour_pressure",
]

SPO2_LIMIT = 0.97  # S/F is not reported above: the curve is flat there [5, 6]


@quiet
def alveolar_po2(fio2: ArrayLike, paco2: ArrayLike, barometric_pressure: ArrayLike, constants: Constants) -> Floats:
    """Alveolar oxygen pressure, full alveolar gas equation [1]_.

    ``FiO2 (PB - PH2O) - PaCO2 (FiO2 + (1 - FiO2)/R)``.

    Parameters
    ----------
    fio2 : array_like
        Inspired oxygen fraction [0-1].
    paco2 : array_like
        Arterial carbon dioxide partial pressure [mmHg].
    barometric_pressure : array_like
        Station pressure [mmHg].
    constants : Constants
        Of which ``water_vapour`` [mmHg] and ``respiratory_quotient`` [1].

    Returns
    -------
    ndarray
        PAO2 [mmHg], NaN where any input is NaN or out of domain, or the result not positive.
    """
    fio2, paco2, pb = floats(fio2, paco2, barometric_pressure)
    dry = pb - constants.water_vapour
    result = fio2 * dry - paco2 * (fio2 + (1.0 - fio2) / constants.respiratory_quotient)
    return keep((fio2 > 0.0) & (fio2 <= 1.0) & (paco2 >= 0.0) & (dry > 0.0) & (result > 0.0), result)


@quiet
def alveolar_po2_short(
    fio2: ArrayLike, paco2: ArrayLike, barometric_pressure: ArrayLike, constants: Constants
) -> Floats:
    """Alveolar oxygen pressure, short form: FiO2 (PB - PH2O) - PaCO2/R. For tests: low by PaCO2 FiO2 (1/R - 1).

    Parameters
    ----------
    fio2 : array_like
        Inspired oxygen fraction [0-1].
    paco2 : array_like
        Arterial carbon dioxide partial pressure [mmHg].
    barometric_pressure : array_like
        Station pressure [mmHg].
    constants : Constants
        Of which ``water_vapour`` [mmHg] and ``respiratory_quotient`` [1].

    Returns
    -------
    ndarray
        PAO2 [mmHg], NaN where any input is NaN or out of domain, or the result not positive.
    """
    fio2, paco2, pb = floats(fio2, paco2, barometric_pressure)
    dry = pb - constants.water_vapour
    result = fio2 * dry - paco2 / constants.respiratory_quotient
    return keep((fio2 > 0.0) & (fio2 <= 1.0) & (paco2 >= 0.0) & (dry > 0.0) & (result > 0.0), result)


@quiet
def aa_gradient(pao2_alveolar: ArrayLike, pao2: ArrayLike) -> Floats:
    """Alveolar-arterial oxygen gradient.

    Parameters
    ----------
    pao2_alveolar, pao2 : array_like
        Alveolar and arterial oxygen partial pressure [mmHg].

    Returns
    -------
    ndarray
        A-a gradient [mmHg], NaN where any input is NaN or negative. A negative result is a finding, not hidden.
    """
    pao2_alveolar, pao2 = floats(pao2_alveolar, pao2)
    return keep((pao2_alveolar >= 0.0) & (pao2 >= 0.0), pao2_alveolar - pao2)


@quiet
def expected_aa_gradient(age: ArrayLike) -> Floats:
    """Expected A-a gradient on room air: 2.5 + 0.21 age [2]_.

    Parameters
    ----------
    age : array_like
        Age [a].

    Returns
    -------
    ndarray
        Expected A-a gradient [mmHg], NaN where age is NaN or negative. Not for raised FiO2.
    """
    (age,) = floats(age)
    return keep(age >= 0.0, 2.5 + 0.21 * age)


@quiet
def a_a_ratio(pao2: ArrayLike, pao2_alveolar: ArrayLike) -> Floats:
    """Arterial/alveolar oxygen ratio [3]_.

    Parameters
    ----------
    pao2, pao2_alveolar : array_like
        Arterial and alveolar oxygen partial pressure [mmHg].

    Returns
    -------
    ndarray
        PaO2/PAO2 [1], NaN where any input is NaN or out of domain.
    """
    pao2, pao2_alveolar = floats(pao2, pao2_alveolar)
    return keep((pao2 >= 0.0) & (pao2_alveolar > 0.0), pao2 / pao2_alveolar)


@quiet
def pf_ratio(pao2: ArrayLike, fio2: ArrayLike) -> Floats:
    """PaO2/FiO2 [4]_.

    Parameters
    ----------
    pao2 : array_like
        Arterial oxygen partial pressure [mmHg].
    fio2 : array_like
        Inspired oxygen fraction [0-1].

    Returns
    -------
    ndarray
        P/F [mmHg], NaN where any input is NaN or out of domain.
    """
    pao2, fio2 = floats(pao2, fio2)
    return keep((pao2 >= 0.0) & (fio2 > 0.0) & (fio2 <= 1.0), pao2 / fio2)


@quiet
def pf_altitude_corrected(pf: ArrayLike, barometric_pressure: ArrayLike) -> Floats:
    """P/F as it would count at sea level: P/F PB/760 above 1000 m [4]_, unchanged below.

    Parameters
    ----------
    pf : array_like
        PaO2/FiO2 [mmHg].
    barometric_pressure : array_like
        Station pressure [mmHg]; 1000 m is where it falls below the one of West 1996 at 1000 m, 678 mmHg.

    Returns
    -------
    ndarray
        Corrected P/F [mmHg], NaN where any input is NaN or out of domain.
    """
    pf, pb = floats(pf, barometric_pressure)
    high = pb < barometric_pressure_west(1000.0)
    return keep((pf >= 0.0) & (pb > 0.0), np.where(high, pf * pb / SEA_LEVEL, pf))


@quiet
def sf_ratio(spo2: ArrayLike, fio2: ArrayLike) -> Floats:
    """SpO2/FiO2, SpO2 in percent, only for SpO2 up to 97 % [5]_, [6]_.

    Parameters
    ----------
    spo2 : array_like
        Saturation by pulse oximeter [0-1].
    fio2 : array_like
        Inspired oxygen fraction [0-1].

    Returns
    -------
    ndarray
        S/F [1, percent over fraction], NaN where any input is NaN, out of domain or SpO2 above 0.97.
    """
    spo2, fio2 = floats(spo2, fio2)
    valid = (spo2 >= 0.0) & (spo2 <= SPO2_LIMIT + 1e-9) & (fio2 > 0.0) & (fio2 <= 1.0)
    return keep(valid, 100.0 * spo2 / fio2)


@quiet
def rice_sf(pf: ArrayLike) -> Floats:
    """S/F that goes with a P/F, Rice 2007 [6]_: 64 + 0.84 P/F.

    Parameters
    ----------
    pf : array_like
        PaO2/FiO2 [mmHg].

    Returns
    -------
    ndarray
        S/F [1], NaN where P/F is NaN or negative.
    """
    (pf,) = floats(pf)
    return keep(pf >= 0.0, 64.0 + 0.84 * pf)


@quiet
def end_capillary_content(
    hb: ArrayLike,
    inactive: ArrayLike,
    pao2_alveolar: ArrayLike,
    ph: ArrayLike,
    pco2: ArrayLike,
    cohb: ArrayLike,
    methb: ArrayLike,
    constants: Constants,
) -> Floats:
    """Oxygen content Cc' of blood in balance with the alveolus, with the sample's own haemoglobin.

    Parameters
    ----------
    hb : array_like
        Total haemoglobin [g/dL].
    inactive : array_like
        Share of haemoglobin that cannot carry oxygen [0-1].
    pao2_alveolar : array_like
        Alveolar oxygen partial pressure [mmHg].
    ph : array_like
        pH of the arterial sample [1].
    pco2 : array_like
        Arterial carbon dioxide partial pressure [mmHg].
    cohb, methb : array_like
        Carboxy- and methaemoglobin, share of total; 0 where not known [0-1].
    constants : Constants
        Constants in force.

    Returns
    -------
    ndarray
        Cc'O2 [mL/dL, STPD], NaN where any input is NaN or out of domain.
    """
    so2 = saturation(pao2_alveolar, ph, pco2, 37.0, cohb, methb, constants)
    return oxygen_content(hb, functional_to_fractional(so2, inactive), pao2_alveolar, constants)


@quiet
def shunt_fraction(cco2: ArrayLike, cao2: ArrayLike, cvo2: ArrayLike) -> Floats:
    """Shunt, Berggren 1942 [7]_: (Cc' - Ca)/(Cc' - Cv).

    Parameters
    ----------
    cco2, cao2, cvo2 : array_like
        End-capillary, arterial and mixed-venous oxygen content [mL/dL].

    Returns
    -------
    ndarray
        Qs/Qt [0-1]; 0 where the arterial content is above the end-capillary one (within noise of no shunt); NaN where
        any input is NaN or the venous content is not the lowest.
    """
    cco2, cao2, cvo2 = floats(cco2, cao2, cvo2)
    return keep((cvo2 >= 0.0) & (cvo2 < cco2) & (cvo2 <= cao2), np.maximum(cco2 - cao2, 0.0) / (cco2 - cvo2))


@quiet
def oxygenation_index(fio2: ArrayLike, mean_airway_pressure: ArrayLike, pao2: ArrayLike) -> Floats:
    """Oxygenation index: 100 FiO2 mean airway pressure / PaO2 (common practice).

    Parameters
    ----------
    fio2 : array_like
        Inspired oxygen fraction [0-1].
    mean_airway_pressure : array_like
        Mean airway pressure [cmH2O].
    pao2 : array_like
        Arterial oxygen partial pressure [mmHg].

    Returns
    -------
    ndarray
        Oxygenation index [cmH2O/mmHg], NaN where any input is NaN or out of domain.
    """
    fio2, pressure, pao2 = floats(fio2, mean_airway_pressure, pao2)
    valid = (fio2 > 0.0) & (fio2 <= 1.0) & (pressure >= 0.0) & (pao2 > 0.0)
    return keep(valid, 100.0 * fio2 * pressure / pao2)


@quiet
def rox_index(spo2: ArrayLike, fio2: ArrayLike, respiratory_rate: ArrayLike) -> Floats:
    """ROX index [8]_: (SpO2/FiO2)/respiratory rate, SpO2 in percent.

    Parameters
    ----------
    spo2 : array_like
        Saturation by pulse oximeter [0-1].
    fio2 : array_like
        Inspired oxygen fraction [0-1].
    respiratory_rate : array_like
        Respiratory rate [1/min].

    Returns
    -------
    ndarray
        ROX index [min], NaN where any input is NaN or out of domain.
    """
    spo2, fio2, rate = floats(spo2, fio2, respiratory_rate)
    valid = (spo2 >= 0.0) & (spo2 <= 1.0) & (fio2 > 0.0) & (fio2 <= 1.0) & (rate > 0.0)
    return keep(valid, 100.0 * spo2 / fio2 / rate)
