"""Rice TW et al. Comparison of the SpO2/FiO2 ratio and the PaO2/FiO2 ratio. Chest 2007;132:410-417 (abstract).

S/F = 64 + 0.84 P/F; S/F of 235 and 315 correspond with P/F of 200 and 300 (published to the next multiple of 5).
"""

import numpy as np
import pytest

from worksheet.oxygen.exchange import rice_sf, sf_ratio


@pytest.mark.parametrize(("pf", "sf"), [(200, 235), (300, 315)])
def test_thresholds(pf, sf):
    assert rice_sf(pf) == pytest.approx(sf, abs=5.0)


@pytest.mark.parametrize(("pf", "sf"), [(0, 64), (100, 148), (200, 232), (300, 316)])
def test_equation(pf, sf):
    assert rice_sf(pf) == pytest.approx(sf, abs=1e-9)


def test_only_saturations_below_the_flat_part_were_studied():
    assert np.isfinite(sf_ratio(0.97, 0.4))
    assert np.isnan(sf_ratio(0.98, 0.4))
