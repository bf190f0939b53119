"""West JB. Prediction of barometric pressures at high altitudes with the use of model atmospheres.

J Appl Physiol 1996;81:1850-1854. The model is used because the standard atmosphere is wrong where people climb: 253
mmHg were measured on the summit of Mount Everest (West JB et al. J Appl Physiol 1983;55:688-698), the standard
atmosphere gives 236.
"""

import pytest

from worksheet.oxygen.exchange import barometric_pressure_icao, barometric_pressure_west


def test_everest_summit():
    assert barometric_pressure_west(8848.0) == pytest.approx(253.0, abs=0.5)


def test_standard_atmosphere_is_17_mmhg_too_low_there():
    assert barometric_pressure_icao(8848.0) == pytest.approx(236.0, abs=0.5)


def test_sea_level():
    assert barometric_pressure_west(0.0) == pytest.approx(760.0, abs=0.6)  # exp(6.63268) = 759.5
