"""ARDS Definition Task Force. Acute respiratory distress syndrome: the Berlin definition. JAMA 2012;307:2526-2533.

Mild above 200 to 300, moderate above 100 to 200, severe to 100 mmHg, at a PEEP or CPAP of at least 5 cmH2O; above
1000 m P/F times barometric pressure over 760.
"""

import numpy as np
import pytest

from worksheet.oxygen.exchange import BAND_WORDS, Band, pf_altitude_corrected, pf_band


@pytest.mark.parametrize(
    ("pf", "band"),
    [
        (300.1, Band.ABOVE),
        (300, Band.MILD),
        (200.1, Band.MILD),
        (200, Band.MODERATE),
        (100.1, Band.MODERATE),
        (100, Band.SEVERE),
        (40, Band.SEVERE),
    ],
)
def test_bands(pf, band):
    assert pf_band(pf, 5.0) == band


@pytest.mark.parametrize(("pf", "peep"), [(150, 4.9), (150, np.nan), (np.nan, 10)])
def test_no_band_without_its_condition(pf, peep):
    assert pf_band(pf, peep) == Band.NOT_REPORTED


@pytest.mark.parametrize(
    ("pf", "pressure", "corrected"),
    [(200, 760, 200), (200, 700, 200), (200, 560, 200 * 560 / 760)],  # 560 mmHg: 2600 m
)
def test_altitude(pf, pressure, corrected):
    assert pf_altitude_corrected(pf, pressure) == pytest.approx(corrected, abs=1e-9)


def test_every_band_has_words_and_none_names_a_diagnosis():
    assert set(BAND_WORDS) == set(Band)
    assert not any("ARDS" in words or "syndrome" in words for words in BAND_WORDS.values())
