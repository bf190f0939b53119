"""Loyola University Chicago, Stritch School of Medicine, pulmonary case EMB10: A-a gradient, PaO2 80, PaCO2 30, air.

The full equation at R 0.8 has the factor 0.21 + 0.79/0.8 = 1.2 on PaCO2 that the page uses; printed to 1 mmHg.
"""

import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.exchange import aa_gradient, alveolar_po2


def test_alveolar_pressure_and_gradient():
    alveolar = alveolar_po2(0.21, 30.0, 760.0, DEFAULT)
    assert alveolar == pytest.approx(114, abs=0.5)
    assert aa_gradient(alveolar, 80.0) == pytest.approx(34, abs=0.5)
