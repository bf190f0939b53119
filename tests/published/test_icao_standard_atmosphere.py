"""Manual of the ICAO standard atmosphere, Doc 7488 (1964); ISO 2533:1975: altitude of the pressure levels, to 1 m."""

import numpy as np
import pytest
from scipy.optimize import brentq

from worksheet.oxygen.exchange import barometric_pressure_icao
from worksheet.oxygen.quantities import MMHG_PER_KPA

LEVELS = [(1000, 111), (950, 540), (900, 988), (850, 1457), (700, 3012), (500, 5574), (300, 9164)]  # hPa, m


@pytest.mark.parametrize(("hpa", "metres"), LEVELS)
def test_altitude_of_a_pressure_level(hpa, metres):
    target = hpa * MMHG_PER_KPA / 10
    found = brentq(lambda h: float(barometric_pressure_icao(h)) - target, -400, 10900)
    assert found == pytest.approx(metres, abs=1.0)


def test_sea_level_and_the_tropopause():
    assert barometric_pressure_icao(0.0) == pytest.approx(760.0, abs=0.5)
    assert barometric_pressure_icao(11000.0) == pytest.approx(226.321 * MMHG_PER_KPA / 10, abs=0.05)  # 22,632.1 Pa
    assert np.isnan(barometric_pressure_icao(11001.0))
