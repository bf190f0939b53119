"""Des Jardins T. Cardiopulmonary Anatomy and Physiology, 7th ed., chapter 6, review question: extraction ratio."""

import pytest

from worksheet.oxygen.delivery import extraction_ratio


def test_extraction_ratio():
    assert extraction_ratio(20.0, 15.0) == pytest.approx(0.25, abs=0.005)
