"""e-SAFE anaesthesia, session 05_02 "Oxygen delivery": worked example of content and oxygen flux, and of the curve.

1.34 mL/g, 0.23 mL/L/kPa; whole mL/L printed.
"""

import dataclasses

import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.content import oxygen_content
from worksheet.oxygen.curve import p50_of_displacement, saturation_tanh
from worksheet.oxygen.delivery import oxygen_delivery
from worksheet.oxygen.quantities import MMHG_PER_KPA

THEIRS = dataclasses.replace(DEFAULT, hufner=1.34, o2_solubility=0.023 / MMHG_PER_KPA)


@pytest.mark.parametrize(
    ("hb_g_per_litre", "so2", "po2_kpa", "ml_per_litre"),
    [(150, 0.98, 13.0, 200), (150, 0.57, 4.5, 116)],
)
def test_content(hb_g_per_litre, so2, po2_kpa, ml_per_litre):
    found = oxygen_content(hb_g_per_litre / 10, so2, po2_kpa * MMHG_PER_KPA, THEIRS)
    assert 10 * found == pytest.approx(ml_per_litre, abs=0.5)


def test_flux():
    assert oxygen_delivery(5.0, 20.0) == pytest.approx(1000.0, abs=0.5)


def test_venous_point_of_the_curve():
    assert saturation_tanh(5.3 * MMHG_PER_KPA) == pytest.approx(0.75, abs=0.005)


def test_p50_around_3_5_kpa():
    assert p50_of_displacement(0.0) / MMHG_PER_KPA == pytest.approx(3.5, abs=0.1)
