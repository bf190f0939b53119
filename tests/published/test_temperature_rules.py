"""OpenAnesthesia, "ABG measurement: temperature effect": rules per °C of body temperature below 37.

PO2 5 mmHg, PCO2 2 mmHg, pH 0.015, for normal arterial blood; printed to 1 mmHg and 0.001.
Bradley AF, Severinghaus JW, Stupfel M. J Appl Physiol 1956;9:201-204: factor 0.0185 per °C on log10 PCO2 (0.019 since
Kelman & Nunn 1966), measured 0.024 +- 0.006 on log10 PO2.
"""

import numpy as np
import pytest

from worksheet.oxygen.acidbase import pco2_at, ph_at, po2_at


def test_ph_rises_by_0_015():
    assert ph_at(7.40, 36.0) - 7.40 == pytest.approx(0.015, abs=0.0005)


def test_pco2_falls_by_2():
    assert 40.0 - pco2_at(40.0, 36.0) == pytest.approx(2.0, abs=0.5)


def test_po2_falls_by_5():
    assert 90.0 - po2_at(90.0, 36.0) == pytest.approx(5.0, abs=0.6)


def test_log_factor_of_pco2():
    assert np.log10(pco2_at(40.0, 38.0) / 40.0) == pytest.approx(0.0185, abs=0.0005 + 1e-9)


@pytest.mark.parametrize("po2", [60.0, 90.0, 100.0])
def test_log_factor_of_po2(po2):
    assert np.log10(po2_at(po2, 38.0) / po2) == pytest.approx(0.024, abs=0.007)
