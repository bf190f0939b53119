"""What a two-wavelength oximeter showed in blood with dyshaemoglobin.

Barker SJ, Tremper KK, Hyatt J. Anesthesiology 1989;70:112-117 (from memory): with rising MetHb SpO2 falls to about 85 %
at MetHb 30-35 % and stays there. Barker SJ, Tremper KK. Anesthesiology 1987;66:677-679 (abstract): with COHb raised to
75 % both oximeters read above 90 % while O2Hb fell below 30 %. Vegfors M, Lennmarken C. Br J Anaesth 1991;66:625-626
(abstract): SpO2 was the sum of O2Hb and COHb for COHb from 30 to 1 %.
"""

import numpy as np
import pytest

from worksheet.oxygen.oximetry import methb_explaining, predicted_spo2


@pytest.mark.parametrize("methb", [0.35, 0.40, 0.45, 0.50])
def test_methaemoglobin_draws_the_reading_to_about_85(methb):
    assert predicted_spo2(0.98, 0.0, methb) == pytest.approx(0.85, abs=0.03)


def test_it_raises_the_reading_of_truly_desaturated_blood():
    assert predicted_spo2(0.60, 0.0, 0.40) > predicted_spo2(0.60, 0.0, 0.0)


@pytest.mark.parametrize("cohb", [0.10, 0.20, 0.30, 0.50, 0.60])
def test_carbon_monoxide_leaves_the_reading_above_90(cohb):
    assert predicted_spo2(0.98, cohb, 0.0) > 0.90


def test_no_prediction_where_the_calibration_falls_below_what_was_observed():
    # at COHb 0.70 the absorbances and 110 - 25 R give 87 %, the oximeters showed more than 90 %
    assert np.isnan(predicted_spo2(0.98, 0.61, 0.0))


@pytest.mark.parametrize("cohb", [0.01, 0.10, 0.20, 0.30])
def test_the_reading_is_the_sum_of_both(cohb):
    total = 0.98 * (1 - cohb) + cohb
    assert predicted_spo2(0.98, cohb, 0.0) == pytest.approx(total, abs=0.02)  # SD of a reading: 2 points


def test_the_reading_names_the_methaemoglobin_that_would_explain_it():
    assert methb_explaining(0.87, 0.98) == pytest.approx(0.36, abs=0.02)
    assert np.isnan(methb_explaining(0.70, 0.98))
