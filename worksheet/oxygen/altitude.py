"""The air that is breathed: barometric pressure from altitude, water vapour, oxygen from a low-flow device.

Measured station pressure (not reduced to sea level) comes first, then altitude by West's model, then the standard
atmosphere.

References
----------
.. [1] West JB. Prediction of barometric pressures at high altitudes with the use of model atmospheres. J Appl Physiol
   1996;81:1850-1854. https://doi.org/10.1152/jappl.1996.81.4.1850
.. [2] Manual of the ICAO standard atmosphere, Doc 7488; ISO 2533:1975.
.. [3] Buck AL. New equations for computing vapor pressure and enhancement factor. J Appl Meteorol 1981;20:1527-1532;
   constants as revised 1996 (from memory; checked against tables in the tests).
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from .domain import Floats, floats, keep, quiet
from .quantities import MMHG_PER_KPA

SEA_LEVEL = 760.0


@quiet
def barometric_pressure_west(altitude: ArrayLike) -> Floats:
    """Barometric pressure from altitude, West 1996 [1]_: exp(6.63268 - 0.1112 h - 0.00149 h²), h in km.

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
    """Barometric pressure of the standard atmosphere [2]_: 760 (1 - 2.25577e-5 h)^5.25588.

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
    """Saturated water vapour pressure, Buck [3]_: 6.1121 exp((18.678 - T/234.5) T/(257.14 + T)) hPa.

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
