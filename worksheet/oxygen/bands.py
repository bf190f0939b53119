"""Bands of P/F and S/F with the conditions they were defined for. They name a range, never a diagnosis.

References
----------
.. [1] ARDS Definition Task Force. Acute respiratory distress syndrome: the Berlin definition. JAMA 2012;307:2526-2533.
.. [2] Matthay MA et al. A new global definition of acute respiratory distress syndrome. Am J Respir Crit Care Med
   2024;209:37-47. https://doi.org/10.1164/rccm.202303-0558WS
"""

from __future__ import annotations

from collections.abc import Mapping
from enum import IntEnum
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .domain import Floats, floats, quiet
from .readings import Device

PEEP_LEAST = 5.0  # cmH2O [1]
HIGH_FLOW_LEAST = 30.0  # L/min [2]


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


@quiet
def pf_band(pf: ArrayLike, peep: ArrayLike) -> NDArray[np.int8]:
    """Band of the Berlin definition [1]_, at a PEEP or CPAP of at least 5 cmH2O.

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
    """Band of the global definition of 2023 [2]_: P/F, else S/F at SpO2 up to 97 %.

    Intubated: S/F 315, 235 and 148 stand beside P/F 300, 200 and 100; no least PEEP is named. Not intubated:
    non-invasive pressure of at least 5 cmH2O or high flow of at least 30 L/min, one band.

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
    intubated = device == Device.VENTILATOR
    pressure = (device == Device.NONINVASIVE) & (peep >= PEEP_LEAST)
    flow = (device == Device.HIGH_FLOW) & (oxygen_flow >= HIGH_FLOW_LEAST)
    one = np.where(band > Band.ABOVE, Band.NOT_INTUBATED, band)
    return np.where(intubated, band, np.where(pressure | flow, one, Band.NOT_REPORTED)).astype(np.int8)


def _band_of(ratio: Floats, mild: float, moderate: float, severe: float) -> NDArray[np.int_]:
    steps = Band.ABOVE + (ratio <= mild).astype(int) + (ratio <= moderate) + (ratio <= severe)
    return np.where(ratio >= 0.0, steps, Band.NOT_REPORTED)
