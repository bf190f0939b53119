"""Workbook for Egan's Fundamentals of Respiratory Care, chapter 12, answers 1, 2 and 4: alveolar pressure, A-a."""

import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.exchange import aa_gradient, alveolar_po2_short


def test_alveolar_pressure_on_air():
    assert alveolar_po2_short(0.21, 40.0, 760.0, DEFAULT) == pytest.approx(99.73, abs=0.005)


@pytest.mark.parametrize(("alveolar", "arterial", "gradient"), [(100, 90, 10), (388, 90, 298)])
def test_gradient(alveolar, arterial, gradient):
    assert aa_gradient(alveolar, arterial) == pytest.approx(gradient, abs=0.5)
