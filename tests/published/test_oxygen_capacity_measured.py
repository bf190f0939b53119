"""Measured oxygen capacity of human haemoglobin.

Domínguez de Villota ED et al. Br J Anaesth 1981;53:1325-1328: 1.392 +- 0.007 mL/g of active haemoglobin.
Dijkhuizen P et al. Pflügers Arch 1977;369:223-231: 1.368 (SD 0.017) mL/g of total haemoglobin as it is found in blood.
"""

import dataclasses

import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.content import capacity


def test_active_haemoglobin():
    assert capacity(1.0, 0.0, DEFAULT) == pytest.approx(1.392, abs=0.007)


def test_active_haemoglobin_from_molar_volume_and_mass():
    # 4 x 22,394 mL/mol / 64,458 g/mol
    assert capacity(1.0, 0.0, DEFAULT) == pytest.approx(4 * 22394 / 64458, abs=0.005)


def test_total_haemoglobin_of_normal_blood():
    # about 1.5 % COHb and MetHb in those samples (common practice)
    assert capacity(1.0, 0.015, DEFAULT) == pytest.approx(1.368, abs=0.017)


def test_bedside_figure_1_34():
    assert capacity(1.0, DEFAULT.usual_inactive, DEFAULT) == pytest.approx(1.34, abs=0.005)
    assert capacity(1.0, 0.0, dataclasses.replace(DEFAULT, hufner=1.34)) == pytest.approx(1.34, abs=1e-12)
