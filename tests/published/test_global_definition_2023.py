"""Matthay MA et al. A new global definition of acute respiratory distress syndrome. AJRCCM 2024;209:37-47.

P/F up to 300, or S/F up to 315 if SpO2 is up to 97 %. Not intubated: high flow of at least 30 L/min, or non-invasive
pressure of at least 5 cmH2O. Intubated: S/F above 235 to 315, above 148 to 235, to 148 beside P/F 300, 200, 100.
"""

import numpy as np
import pytest

from worksheet.oxygen.exchange import Band, pf_band_global, sf_ratio
from worksheet.oxygen.readings import Device

NONE = np.nan


@pytest.mark.parametrize(
    ("pf", "sf", "band"),
    [
        (NONE, 316, Band.ABOVE),
        (NONE, 315, Band.MILD),
        (NONE, 235.5, Band.MILD),
        (NONE, 235, Band.MODERATE),
        (NONE, 148.5, Band.MODERATE),
        (NONE, 148, Band.SEVERE),
        (301, NONE, Band.ABOVE),
        (300, NONE, Band.MILD),
        (200, NONE, Band.MODERATE),
        (100, NONE, Band.SEVERE),
        (250, 148, Band.MILD),  # P/F comes first
    ],
)
def test_intubated(pf, sf, band):
    assert pf_band_global(pf, sf, 5.0, Device.VENTILATOR, NONE) == band


@pytest.mark.parametrize(
    ("device", "peep", "flow", "band"),
    [
        (Device.HIGH_FLOW, NONE, 30.0, Band.NOT_INTUBATED),
        (Device.HIGH_FLOW, NONE, 29.0, Band.NOT_REPORTED),
        (Device.HIGH_FLOW, NONE, NONE, Band.NOT_REPORTED),
        (Device.NONINVASIVE, 5.0, NONE, Band.NOT_INTUBATED),
        (Device.NONINVASIVE, 4.0, NONE, Band.NOT_REPORTED),
        (Device.NASAL_CANNULA, NONE, 6.0, Band.NOT_REPORTED),
        (Device.UNKNOWN, 8.0, 60.0, Band.NOT_REPORTED),
    ],
)
def test_not_intubated(device, peep, flow, band):
    assert pf_band_global(180.0, NONE, peep, device, flow) == band


def test_not_intubated_above_the_limit():
    assert pf_band_global(301.0, NONE, NONE, Device.HIGH_FLOW, 40.0) == Band.ABOVE


def test_no_saturation_above_97_percent():
    assert pf_band_global(NONE, sf_ratio(0.98, 0.5), 5.0, Device.VENTILATOR, NONE) == Band.NOT_REPORTED
    assert pf_band_global(NONE, sf_ratio(0.97, 0.5), 5.0, Device.VENTILATOR, NONE) == Band.MODERATE
