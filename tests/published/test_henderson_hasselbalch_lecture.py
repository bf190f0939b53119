"""Lecturio, "Henderson-Hasselbalch equation: examples": three pairs of bicarbonate and PCO2 with the pH they give.

The lecture uses pK 6.1 and 0.03; the guideline's 6.105 and 0.0307 used here move bicarbonate by 1.2 %, that is 0.005 in
pH. pH is printed to 0.01.
"""

import numpy as np
import pytest

from worksheet.oxygen.acidbase import bicarbonate

EXAMPLES = [(24, 40, 7.40), (26, 60, 7.26), (22, 20, 7.66)]  # mmol/L, mmHg, pH


@pytest.mark.parametrize(("hco3", "pco2", "ph"), EXAMPLES)
def test_bicarbonate(hco3, pco2, ph):
    # a pH printed to 0.01 leaves 1.2 % of bicarbonate open, the two sets of constants another 1.2 %
    assert bicarbonate(ph, pco2) == pytest.approx(hco3, rel=0.024)


@pytest.mark.parametrize(("hco3", "pco2", "ph"), EXAMPLES)
def test_ph_back_from_bicarbonate(hco3, pco2, ph):
    found = 7.4 + np.log10(hco3 / bicarbonate(7.4, pco2))
    assert found == pytest.approx(ph, abs=0.005 + 0.005)
