"""Gas exchange of the lung: the alveolar gas equation, gradients and ratios, shunt, bands, altitude.

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
.. [9] West JB. Prediction of barometric pressures at high altitudes with the use of model atmospheres. J Appl Physiol
   1996;81:1850-1854. https://doi.org/10.1152/jappl.1996.81.4.1850
.. [10] Manual of the ICAO standard atmosphere, Doc 7488; ISO 2533:1975.
.. [11] Buck AL. New equations for computing vapor pressure and enhancement factor. J Appl Meteorol 1981;20:1527-1532;
   constants as revised 1996.
"""

from __future__ import annotations

from collections.abc import Mapping
from enum import IntEnum
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .constants import Constants
from .content import functional_to_fractional, oxygen_content
from .curve import saturation
from .domain import Floats, floats, keep, quiet
from .quantities import MMHG_PER_KPA
from .readings import Device

SPO2_LIMIT = 0.97  # S/F is not reported above: the curve is flat there [5, 6]
SEA_LEVEL = 760.0


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
        Station pressure [mmHg]; 1000 m is where it falls below that of [9]_ at 1000 m, 678 mmHg.

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


class Band(IntEnum):
    """Bands of oxygenation. They name a range of a ratio under stated conditions, never a diagnosis."""

    NOT_REPORTED = 0
    ABOVE = 1
    MILD = 2
    MODERATE = 3
    SEVERE = 4
    NOT_INTUBATED = 5


BAND_WORDS: Mapping[int, str] = MappingProxyType(
    {
        Band.NOT_REPORTED: "no band: a ratio or its condition is missing or not met",
        Band.ABOVE: "P/F above 300",
        Band.MILD: "P/F above 200, up to 300",
        Band.MODERATE: "P/F above 100, up to 200",
        Band.SEVERE: "P/F up to 100",
        Band.NOT_INTUBATED: "P/F up to 300 or S/F up to 315, not intubated",
    }
)
PEEP_LEAST = 5.0  # [4]
HIGH_FLOW_LEAST = 30.0  # [5]


@quiet
def pf_band(pf: ArrayLike, peep: ArrayLike) -> NDArray[np.int8]:
    """Band of the Berlin definition [4]_, at a PEEP or CPAP of at least 5 cmH2O.

    Parameters
    ----------
    pf : array_like
        PaO2/FiO2, corrected for altitude [mmHg].
    peep : array_like
        PEEP or CPAP [cmH2O].

    Returns
    -------
    ndarray of int8
        Codes of :class:`Band`; ``NOT_REPORTED`` where the ratio or the PEEP is missing or PEEP below 5 [code].
    """
    pf, peep = floats(pf, peep)
    band = _band_of(pf, 300.0, 200.0, 100.0)
    return np.where(peep >= PEEP_LEAST, band, Band.NOT_REPORTED).astype(np.int8)


@quiet
def pf_band_global(
    pf: ArrayLike, sf: ArrayLike, peep: ArrayLike, device: ArrayLike, oxygen_flow: ArrayLike
) -> NDArray[np.int8]:
    """Band of the global definition of 2023 [5]_: P/F, else S/F at SpO2 up to 97 %.

    Intubated: PEEP at least 5; S/F 315, 235 and 148 stand beside P/F 300, 200 and 100. Not intubated: non-invasive
    pressure of at least 5 cmH2O or high flow of at least 30 L/min, one band.

    Parameters
    ----------
    pf : array_like
        PaO2/FiO2, corrected for altitude [mmHg].
    sf : array_like
        SpO2/FiO2, NaN where SpO2 is above 0.97, as :func:`sf_ratio` gives it [1].
    peep : array_like
        PEEP or CPAP [cmH2O].
    device : array_like of int
        Codes of :class:`~worksheet.oxygen.readings.Device` [code].
    oxygen_flow : array_like
        Flow of the device [L/min].

    Returns
    -------
    ndarray of int8
        Codes of :class:`Band`; ``NOT_REPORTED`` where a ratio or condition is missing or not met [code].
    """
    pf, sf, peep, oxygen_flow = floats(pf, sf, peep, oxygen_flow)
    device = np.asarray(device)
    band = np.where(np.isnan(pf), _band_of(sf, 315.0, 235.0, 148.0), _band_of(pf, 300.0, 200.0, 100.0))
    intubated = (device == Device.VENTILATOR) & (peep >= PEEP_LEAST)
    pressure = (device == Device.NONINVASIVE) & (peep >= PEEP_LEAST)
    flow = (device == Device.HIGH_FLOW) & (oxygen_flow >= HIGH_FLOW_LEAST)
    one = np.where(band > Band.ABOVE, Band.NOT_INTUBATED, band)
    return np.where(intubated, band, np.where(pressure | flow, one, Band.NOT_REPORTED)).astype(np.int8)


def _band_of(ratio: Floats, mild: float, moderate: float, severe: float) -> NDArray[np.int_]:
    steps = Band.ABOVE + (ratio <= mild).astype(int) + (ratio <= moderate) + (ratio <= severe)
    return np.where(ratio >= 0.0, steps, Band.NOT_REPORTED)


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


@quiet
def barometric_pressure_west(altitude: ArrayLike) -> Floats:
    """Barometric pressure from altitude, West 1996 [9]_: exp(6.63268 - 0.1112 h - 0.00149 h²), h in km.

    Parameters
    ----------
    altitude : array_like
        Altitude above sea level [m].

    Returns
    -------
    ndarray
        Barometric pressure [mmHg], NaN where altitude is NaN or outside -500 to 9000 m.
    """
    (altitude,) = floats(altitude)
    h = altitude / 1000.0
    return keep((altitude >= -500.0) & (altitude <= 9000.0), np.exp(6.63268 - 0.1112 * h - 0.00149 * h * h))


@quiet
def barometric_pressure_icao(altitude: ArrayLike) -> Floats:
    """Barometric pressure of the standard atmosphere [10]_: 760 (1 - 2.25577e-5 h)^5.25588.

    Parameters
    ----------
    altitude : array_like
        Altitude above sea level [m].

    Returns
    -------
    ndarray
        Barometric pressure [mmHg], NaN where altitude is NaN or outside -500 to 11000 m.
    """
    (altitude,) = floats(altitude)
    valid = (altitude >= -500.0) & (altitude <= 11000.0)
    return keep(valid, SEA_LEVEL * np.power(1.0 - 2.25577e-5 * altitude, 5.25588))


@quiet
def water_vapour_pressure(temperature: ArrayLike) -> Floats:
    """Saturated water vapour pressure, Buck [11]_: 6.1121 exp((18.678 - T/234.5) T/(257.14 + T)) hPa.

    Parameters
    ----------
    temperature : array_like
        Temperature [°C].

    Returns
    -------
    ndarray
        Vapour pressure [mmHg], NaN where temperature is NaN or outside 0 to 100 °C.
    """
    (t,) = floats(temperature)
    hpa = 6.1121 * np.exp((18.678 - t / 234.5) * t / (257.14 + t))
    return keep((t >= 0.0) & (t <= 100.0), hpa * MMHG_PER_KPA / 10.0)


@quiet
def estimated_fio2_low_flow(oxygen_flow: ArrayLike) -> Floats:
    """FiO2 by nasal cannula, an estimate: 20 % + 4 % per L/min, to 6 L/min (common practice).

    The true value depends on breathing pattern; give it a standard uncertainty of at least 5 points and mark it.

    Parameters
    ----------
    oxygen_flow : array_like
        Oxygen flow [L/min].

    Returns
    -------
    ndarray
        Estimated FiO2 [0-1], at least that of air; NaN where flow is NaN or outside 0 to 6 L/min.
    """
    (flow,) = floats(oxygen_flow)
    return keep((flow >= 0.0) & (flow <= 6.0), np.maximum(0.20 + 0.04 * flow, 0.21))
