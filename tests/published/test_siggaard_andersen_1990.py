"""Siggaard-Andersen O, Fogh-Andersen N, Gøthgen IH, Larsen VH: The oxygen status of the arterial blood revised.
Scand J Clin Lab Invest 1990;50 Suppl 203:17-28 (authors from memory).

From the abstract: extractable oxygen is what is extracted at a tension of 5.0 kPa; a normal arterio-venous difference
is 2.3 mmol/L, so normal arterial blood (compensation factor 1.0) holds 2.3 mmol/L of it.
"""

import dataclasses

import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.content import extractable_oxygen
from worksheet.oxygen.curve import p50_grade, saturation_tanh
from worksheet.oxygen.quantities import HB_G_PER_MMOL, MMHG_PER_KPA

ML_DL_PER_MMOL_L = 2.2394
AT_5_KPA = dataclasses.replace(DEFAULT, end_capillary_po2=5.0 * MMHG_PER_KPA)


def test_normal_arterial_blood_holds_2_3_mmol_per_litre_of_extractable_oxygen():
    # normal adult: haemoglobin 9.3 mmol/L (men), PO2 12 kPa, COHb 1 %, MetHb 0.5 % (common practice)
    po2, hb = 12.0 * MMHG_PER_KPA, 9.3 * HB_G_PER_MMOL
    so2 = saturation_tanh(po2, cohb=0.01, methb=0.005)
    found = extractable_oxygen(hb, 0.015, so2, po2, 7.40, 40.0, 37.0, 0.01, 0.005, AT_5_KPA)
    assert found / ML_DL_PER_MMOL_L == pytest.approx(2.3, abs=0.05)
    assert 2.3 / (found / ML_DL_PER_MMOL_L) == pytest.approx(1.0, abs=0.05)


def test_the_site_default_is_5_kpa_rounded_up_to_a_whole_mmhg():
    assert pytest.approx(5.0, abs=0.1) == DEFAULT.end_capillary_po2 / MMHG_PER_KPA


def test_no_p50_from_a_saturation_above_97_percent():
    assert p50_grade(0.97) == 1
    assert p50_grade(0.971) == 0
