"""Community College of Philadelphia, respiratory care course 210, shunt equations, problem 1 (worked solution).

PaO2 90, PvO2 40, Hb 15, SaO2 0.95, SvO2 0.70, air at sea level, PaCO2 40, R 0.8; 1.34 mL/g, 0.003 mL/dL/mmHg. The
solution uses the short alveolar equation and a saturated end capillary, printed to 0.01 mL/dL and 0.1 %.
"""

import dataclasses

import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.content import oxygen_content
from worksheet.oxygen.exchange import alveolar_po2_short, shunt_fraction

THEIRS = dataclasses.replace(DEFAULT, hufner=1.34, o2_solubility=0.003, water_vapour=47.0, respiratory_quotient=0.8)


@pytest.mark.parametrize(
    ("saturation", "po2", "content"),
    [(1.0, 99.73, 20.399), (0.95, 90.0, 19.36), (0.70, 40.0, 14.19)],
)
def test_contents(saturation, po2, content):
    assert oxygen_content(15.0, saturation, po2, THEIRS) == pytest.approx(content, abs=0.01)


def test_alveolar_pressure():
    assert alveolar_po2_short(0.21, 40.0, 760.0, THEIRS) == pytest.approx(99.73, abs=0.005)


def test_shunt():
    assert shunt_fraction(20.39, 19.36, 14.19) == pytest.approx(0.166, abs=0.0005)


def test_estimated_shunt_with_a_difference_of_3_5():
    # printed 22.7 %: 1.03/4.53
    assert shunt_fraction(20.39, 19.36, 19.36 - 3.5) == pytest.approx(0.227, abs=0.0005)
