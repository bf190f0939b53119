"""Postgraduate Medical Journal, table "Calculation of oxygen delivery: example in a 70 kg man" (pmj.bmj.com, 162101).

Hüfner's constant 1.39, 0.0225 mL/dL/kPa; content printed to 0.1 mL/dL.
"""

import dataclasses

import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.content import capacity, dissolved_oxygen, oxygen_content
from worksheet.oxygen.delivery import oxygen_delivery
from worksheet.oxygen.quantities import MMHG_PER_KPA

THEIRS = dataclasses.replace(DEFAULT, hufner=1.39, o2_solubility=0.0225 / MMHG_PER_KPA)
PO2 = 13.3 * MMHG_PER_KPA


def test_content():
    assert oxygen_content(14.0, 0.98, PO2, THEIRS) == pytest.approx(19.4, abs=0.05)


def test_its_two_parts():
    assert capacity(14.0, 0.0, THEIRS) * 0.98 == pytest.approx(19.1, abs=0.05)
    assert dissolved_oxygen(PO2, THEIRS) == pytest.approx(0.3, abs=0.05)


def test_delivery():
    # printed 950.6: from the content as printed
    assert oxygen_delivery(4.9, 19.4) == pytest.approx(950.6, abs=0.05)
