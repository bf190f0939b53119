"""Samuels MP. The effects of flight and altitude. Arch Dis Child 2004;89:448-455, table 1.

Barometric pressure and inspired oxygen pressure at seven altitudes, to 1 mmHg; water vapour 47.1 mmHg at 37 °C.
"""

import dataclasses

import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.exchange import alveolar_po2, barometric_pressure_icao

TABLE = [  # m, barometric pressure [mmHg], inspired PO2 [mmHg]
    (0, 760, 150),
    (1000, 674, 132),
    (2000, 596, 115),
    (3000, 526, 100),
    (5000, 405, 75),
    (8000, 267, 46),
    (10000, 198, 32),
]
SITE = dataclasses.replace(DEFAULT, water_vapour=47.1)


@pytest.mark.parametrize(("metres", "pressure", "inspired"), TABLE)
def test_barometric_pressure(metres, pressure, inspired):
    assert barometric_pressure_icao(metres) == pytest.approx(pressure, abs=0.5)


@pytest.mark.parametrize(("metres", "pressure", "inspired"), TABLE)
def test_inspired_oxygen_pressure(metres, pressure, inspired):
    # without carbon dioxide the alveolar equation is the inspired pressure; air 0.2095, printed to 1 mmHg
    found = alveolar_po2(0.2095, 0.0, pressure, SITE)
    assert found == pytest.approx(inspired, abs=0.7)  # its own rounding and that of the pressure
