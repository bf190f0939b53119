"""Clinical haemodynamics chapter "Normal values" (alpfmedical.info, cardiac output): a hypothetical normal adult.

BSA 1.84 m², CO 5 L/min, CaO2 20.73 and CvO2 15.76 mL/dL: delivery 563 mL/min/m², extraction 24 %. The VO2 the chapter
prints (132 mL/min/m²) does not follow from its own numbers (they give 135) and is not used.
"""

import pytest

from worksheet.oxygen.delivery import extraction_ratio, oxygen_delivery


def test_delivery_index():
    assert oxygen_delivery(5.0 / 1.84, 20.73) == pytest.approx(563, abs=0.5)


def test_extraction():
    assert extraction_ratio(20.73, 15.76) == pytest.approx(0.24, abs=0.005)
