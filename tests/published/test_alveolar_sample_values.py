"""Alveolar gas equation, table of sample values (Wikipedia): air, 760 mmHg, water vapour 47, PaCO2 36, R 0.8: 107 mmHg.

Martin L, "The four most important equations in clinical practice", gives the same full equation and says that the
factor on PaCO2 is 1.2 on air and becomes 1.0 at an FiO2 of 1.0.
"""

import pytest

from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.exchange import alveolar_po2
from worksheet.oxygen.quantities import MMHG_PER_KPA


def test_sample_value():
    found = alveolar_po2(0.21, 36.0, 760.0, DEFAULT)
    assert found == pytest.approx(107, abs=0.5)
    assert found / MMHG_PER_KPA == pytest.approx(14.2, abs=0.05)


@pytest.mark.parametrize(("fio2", "factor"), [(0.21, 1.2), (1.0, 1.0)])
def test_factor_on_paco2(fio2, factor):
    per_mmhg = alveolar_po2(fio2, 40.0, 760.0, DEFAULT) - alveolar_po2(fio2, 41.0, 760.0, DEFAULT)
    assert per_mmhg == pytest.approx(factor, abs=0.05)
