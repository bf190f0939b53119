"""OpenStax Biology 2e, section 39.2: oxygen pressure of dry and of humidified air at sea level, to 1 mmHg."""

import dataclasses

import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.exchange import alveolar_po2


@pytest.mark.parametrize(("water_vapour", "published"), [(0.0, 160), (47.0, 150)])
def test_oxygen_pressure_of_air(water_vapour, published):
    site = dataclasses.replace(DEFAULT, water_vapour=water_vapour)
    assert alveolar_po2(0.21, 0.0, 760.0, site) == pytest.approx(published, abs=0.5)
