"""CRC Handbook of Chemistry and Physics: vapour pressure of water.

0-34 °C in mmHg: 62nd edition (1981), 0.01 mmHg. 35-40 °C in kPa: 73rd edition (1992-93), its steps to 0.0001 kPa.
Buck's equation is an approximation: its stated error is below 0.1 % in this range.
"""

import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.exchange import water_vapour_pressure
from worksheet.oxygen.quantities import MMHG_PER_KPA

IN_MMHG = [(0, 4.58), (10, 9.21), (20, 17.55), (24, 22.40), (28, 28.38), (30, 31.86), (32, 35.70), (34, 39.95)]
IN_KPA = [(35, 5.6267), (36, 5.9453), (37, 6.2795), (39, 6.9969), (40, 7.3814)]


@pytest.mark.parametrize(("celsius", "mmhg"), IN_MMHG)
def test_vapour_pressure_in_mmhg(celsius, mmhg):
    assert water_vapour_pressure(celsius) == pytest.approx(mmhg, abs=0.005 + 0.001 * mmhg)


@pytest.mark.parametrize(("celsius", "kpa"), IN_KPA)
def test_vapour_pressure_in_kpa(celsius, kpa):
    assert water_vapour_pressure(celsius) / MMHG_PER_KPA == pytest.approx(kpa, abs=0.00005 + 0.001 * kpa)


def test_47_mmhg_at_body_temperature():
    assert water_vapour_pressure(37.0) == pytest.approx(DEFAULT.water_vapour, abs=0.5)
