"""Content, capacity, extractable oxygen and CO2 content: numbers worked by hand, edges, and what the trade knows."""

import dataclasses

import numpy as np
import pytest

from worksheet.oxygen import content, curve
from worksheet.oxygen.acidbase import pco2_at, ph_at, po2_at
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.content import (
    capacity,
    co2_content_blood,
    co2_content_plasma,
    dissolved_oxygen,
    end_capillary_saturation,
    extractable_oxygen,
    functional_to_fractional,
    oxygen_content,
)

BELOW, ABOVE = -1e-9, 1.0 + 1e-9
SEVERINGHAUS = dataclasses.replace(DEFAULT, curve="severinghaus")
NORMAL = {"ph": 7.40, "pco2": 40.0, "temperature": 37.0, "cohb": 0.01, "methb": 0.01, "constants": DEFAULT}


def extractable(hb=15.0, inactive=0.02, so2=0.97, po2=95.0, **changed):
    return extractable_oxygen(hb, inactive, so2, po2, **{**NORMAL, **changed})


def at_the_end(so2=0.97, po2=95.0, **changed):
    return end_capillary_saturation(so2, po2, **{**NORMAL, **changed})


@pytest.mark.parametrize(
    ("function", "given", "by_hand"),
    [
        (functional_to_fractional, (0.98, 0.02), 0.9604),
        (functional_to_fractional, (1.0, 0.0), 1.0),
        (capacity, (15.0, 0.0, DEFAULT), 20.85),
        (capacity, (15.0, 0.2, DEFAULT), 16.68),
        (dissolved_oxygen, (100.0, DEFAULT), 0.31),
        (dissolved_oxygen, (100.0, DEFAULT, 27.0), 0.31 * np.exp(0.12)),
        (oxygen_content, (10.0, 0.95, 100.0, DEFAULT), 13.205 + 0.31),
        (oxygen_content, (0.0, 0.0, 100.0, DEFAULT), 0.31),
        (co2_content_plasma, (0.0, 7.4), 0.0),
    ],
)
def test_worked_by_hand(function, given, by_hand):
    assert function(*given) == pytest.approx(by_hand, rel=1e-9)


def test_plasma_content_worked_by_hand():
    # 37 °C, pH 7.40: s 0.0307, pK' 6.086 + 0.00472 = 6.09072, 10^1.30928 = 20.3836
    assert co2_content_plasma(40.0, 7.40) == pytest.approx(2.226 * 0.0307 * 40.0 * 21.3836, rel=1e-5)
    # 27 °C, pH 7.30: s 0.0307 + 0.0057 + 0.002 = 0.0384, pK' 6.086 + 0.0042 + 11 (0.00472 + 0.000139) = 6.143649
    assert co2_content_plasma(40.0, 7.30, 27.0) == pytest.approx(2.226 * 0.0384 * 40.0 * (1 + 10**1.156351), rel=1e-9)


def test_blood_content_worked_by_hand():
    factor = 1 - 0.0289 * 15 / ((3.352 - 0.456 * 0.5) * (8.142 - 7.4))
    assert co2_content_blood(40.0, 7.4, 15.0, 0.5) == pytest.approx(co2_content_plasma(40.0, 7.4) * factor, rel=1e-12)
    assert co2_content_blood(40.0, 7.4, 0.0, 0.5) == co2_content_plasma(40.0, 7.4)
    assert co2_content_blood(40.0, 7.4, 15.0, 0.5, 30.0) == pytest.approx(
        co2_content_plasma(40.0, 7.4, 30.0) * factor, rel=1e-12
    )


@pytest.mark.parametrize(
    ("function", "inside", "outside"),
    [
        (functional_to_fractional, (0.0, 0.1), (BELOW, 0.1)),
        (functional_to_fractional, (1.0, 0.1), (ABOVE, 0.1)),
        (functional_to_fractional, (0.9, 0.0), (0.9, BELOW)),
        (functional_to_fractional, (0.9, 1.0), (0.9, ABOVE)),
        (capacity, (0.0, 0.1, DEFAULT), (BELOW, 0.1, DEFAULT)),
        (capacity, (0.5, 0.1, DEFAULT), (-0.5, 0.1, DEFAULT)),
        (capacity, (15.0, 0.0, DEFAULT), (15.0, BELOW, DEFAULT)),
        (capacity, (15.0, 1.0, DEFAULT), (15.0, ABOVE, DEFAULT)),
        (dissolved_oxygen, (0.0, DEFAULT), (BELOW, DEFAULT)),
        (oxygen_content, (0.0, 0.9, 90.0, DEFAULT), (BELOW, 0.9, 90.0, DEFAULT)),
        (oxygen_content, (15.0, 0.0, 90.0, DEFAULT), (15.0, BELOW, 90.0, DEFAULT)),
        (oxygen_content, (15.0, 1.0, 90.0, DEFAULT), (15.0, ABOVE, 90.0, DEFAULT)),
        (oxygen_content, (15.0, 0.9, 0.0, DEFAULT), (15.0, 0.9, BELOW, DEFAULT)),
        (co2_content_plasma, (0.0, 7.4), (BELOW, 7.4)),
        (co2_content_blood, (40.0, 7.8, 15.0, 0.9), (40.0, 8.142, 15.0, 0.9)),
        (co2_content_blood, (40.0, 7.8, 15.0, 0.9), (40.0, 8.5, 15.0, 0.9)),
        (co2_content_blood, (40.0, 7.4, 0.0, 0.9), (40.0, 7.4, BELOW, 0.9)),
        (co2_content_blood, (40.0, 7.4, 15.0, 0.0), (40.0, 7.4, 15.0, BELOW)),
        (co2_content_blood, (40.0, 7.4, 15.0, 1.0), (40.0, 7.4, 15.0, ABOVE)),
        (co2_content_blood, (40.0, 8.0, 12.0, 0.9), (40.0, 8.0, 15.0, 0.9)),  # cells would hold less than 0
    ],
)
def test_edges_of_the_domain(function, inside, outside):
    assert np.isfinite(function(*inside))
    assert np.isnan(function(*outside))


def test_extractable_oxygen_worked_by_hand():
    # what is bound at 97 % less what is bound on the standard curve at 38 mmHg, and the dissolved difference
    so2, end = curve.saturation_tanh(95.0), curve.saturation_tanh(38.0)
    found = extractable_oxygen(15.0, 0.0, so2, 95.0, 7.4, 40.0, 37.0, 0.0, 0.0, DEFAULT)
    assert found == pytest.approx(1.39 * 15 * (so2 - end) + 0.0031 * (95 - 38), rel=1e-9)


def test_end_saturation_lies_on_the_patients_own_curve():
    # a measured pair that fixes the curve: displacement by hand, then the curve at 38 mmHg
    for so2 in (0.50, 0.80, 0.95):
        po2 = float(curve.po2_tanh(so2, 7.30, 50.0)) * 1.1
        a = curve.displacement_from_pair(po2, so2)
        found = at_the_end(so2, po2, ph=7.30, pco2=50.0, cohb=0.0, methb=0.0)
        assert found == pytest.approx(curve.saturation_from_displacement(38.0, a), abs=1e-12)


def test_it_lies_on_the_modelled_curve_where_a_pair_says_nothing():
    for so2, po2 in ((0.99, 90.0), (0.20, 25.0)):
        found = at_the_end(so2, po2, ph=7.30, pco2=50.0, cohb=0.0, methb=0.05)
        assert found == pytest.approx(curve.saturation_tanh(38.0, 7.30, 50.0, methb=0.05), abs=1e-12)


def test_between_095_and_097_the_pair_fades_out():
    po2 = 90.0
    full, none = curve.displacement_from_pair(po2, 0.96), curve.displacement(7.4, 40.0)
    found = at_the_end(0.96, po2, cohb=0.0, methb=0.0)
    assert found == pytest.approx(curve.saturation_from_displacement(38.0, (full + none) / 2), abs=1e-9)
    assert at_the_end(0.97, po2, cohb=0.0, methb=0.0) == pytest.approx(curve.saturation_tanh(38.0), abs=1e-9)


def test_where_no_curve_fits_the_pair_the_modelled_one_is_taken():
    assert np.isnan(curve.displacement_from_pair(500.0, 0.40))
    assert at_the_end(0.40, 500.0, cohb=0.0, methb=0.0) == pytest.approx(curve.saturation_tanh(38.0), abs=1e-12)


def test_a_pair_that_contradicts_itself_moves_the_curve_only_so_far():
    # 94 % at 300 mmHg would be a P50 of about 100: an air bubble or a mixed-up value, not this blood's curve
    modelled = curve.displacement(7.4, 40.0)
    assert curve.displacement_from_pair(300.0, 0.94) - modelled > 1.0
    found = at_the_end(0.94, 300.0, cohb=0.0, methb=0.0)
    assert found == pytest.approx(curve.saturation_from_displacement(38.0, modelled + 0.4), abs=1e-12)
    left = at_the_end(0.94, 20.0, cohb=0.0, methb=0.0)
    assert left == pytest.approx(curve.saturation_from_displacement(38.0, modelled - 0.4), abs=1e-12)
    scaled = at_the_end(0.94, 300.0, constants=SEVERINGHAUS)
    assert scaled == pytest.approx(curve.saturation_severinghaus(38.0 * np.exp(-0.4)), abs=1e-12)


def test_blood_in_the_body_is_taken_to_body_temperature():
    t, so2, po2 = 34.0, 0.90, 60.0
    body = po2_at(po2, t), ph_at(7.4, t), pco2_at(40.0, t)
    a = curve.displacement_from_pair(body[0], so2, t)
    found = at_the_end(so2, po2, temperature=t, cohb=0.0, methb=0.0)
    assert found == pytest.approx(curve.saturation_from_displacement(38.0, a, t), abs=1e-12)
    above = at_the_end(0.99, 200.0, temperature=t, cohb=0.0, methb=0.0)
    assert above == pytest.approx(curve.saturation_tanh(38.0, body[1], body[2], t), abs=1e-12)
    dissolved = 0.0031 * 200.0 - 0.0031 * np.exp(0.012 * 3) * 38.0
    whole = extractable(15.0, 0.0, 0.99, 200.0, temperature=t, cohb=0.0, methb=0.0)
    assert whole == pytest.approx(1.39 * 15 * (0.99 - above) + dissolved, rel=1e-9)


def test_carbon_monoxide_is_kept_on_the_way_down():
    share = curve.co_share(0.2, 0.01)
    po2 = 1.1 * float(curve.po2_tanh(0.90, cohb=0.2, methb=0.01))
    a = curve.displacement_from_pair(po2, 0.90, 37.0, share)
    found = at_the_end(0.90, po2, cohb=0.2, methb=0.01)
    assert found == pytest.approx(curve.saturation_with_co(38.0, a, 37.0, share), abs=1e-12)


def test_a_small_negative_dyshaemoglobin_counts_as_none():
    assert at_the_end(cohb=-0.01, methb=-0.01) == at_the_end(cohb=0.0, methb=0.0)


def test_severinghaus_site_scales_the_curve_through_the_pair():
    scale = curve.po2_ellis(0.90) / curve.kelman_equivalent_po2(70.0, 7.3, 50.0, 37.0)
    at_38 = curve.kelman_equivalent_po2(38.0, 7.3, 50.0, 37.0) * scale
    found = at_the_end(0.90, 70.0, ph=7.3, pco2=50.0, constants=SEVERINGHAUS)
    assert found == pytest.approx(curve.saturation_severinghaus(at_38), abs=1e-12)
    modelled = at_the_end(0.99, 70.0, ph=7.3, pco2=50.0, constants=SEVERINGHAUS)
    assert modelled == pytest.approx(curve.saturation_severinghaus_kelman(38.0, 7.3, 50.0), abs=1e-12)
    cold = at_the_end(0.90, 70.0, temperature=33.0, constants=SEVERINGHAUS)
    body = po2_at(70.0, 33.0), ph_at(7.4, 33.0), pco2_at(40.0, 33.0), 33.0
    scale = curve.po2_ellis(0.90) / curve.kelman_equivalent_po2(*body)
    assert cold == pytest.approx(
        curve.saturation_severinghaus(curve.kelman_equivalent_po2(38.0, *body[1:]) * scale), abs=1e-12
    )
    assert np.isnan(at_the_end(cohb=np.nan, constants=SEVERINGHAUS))
    assert np.isnan(at_the_end(methb=np.nan, constants=SEVERINGHAUS))


def test_a_saturation_out_of_range_has_no_end():
    assert np.isfinite(at_the_end(so2=1.0))
    assert np.isfinite(at_the_end(so2=0.0))
    assert np.isnan(at_the_end(so2=1.0 + 1e-9))
    assert np.isnan(at_the_end(so2=-1e-9))


def test_end_capillary_pressure_follows_the_site():
    lower = dataclasses.replace(DEFAULT, end_capillary_po2=30.0)
    assert extractable(constants=lower) > extractable()


def test_nothing_is_extractable_from_blood_below_the_end_capillary_pressure():
    assert extractable(so2=0.60, po2=32.0) == 0.0


def test_weight_of_the_pair():
    found = content._trust_of_pair(np.array([0.2999, 0.30, 0.5, 0.95, 0.955, 0.96, 0.97, 0.99, np.nan]))
    np.testing.assert_allclose(found, [0, 1, 1, 1, 0.75, 0.5, 0, 0, 0], atol=1e-12)


# Facts of the trade (common practice)


def test_97_to_98_percent_of_the_oxygen_in_normal_arterial_blood_is_on_haemoglobin():
    # "about 98 %": haemoglobin 15 g/dL (13.5-17), PaO2 95
    for hb in (13.5, 15.0, 17.0):
        total = oxygen_content(hb, functional_to_fractional(0.97, 0.02), 95.0, DEFAULT)
        assert 0.975 <= 1 - dissolved_oxygen(95.0, DEFAULT) / total <= 0.99


def test_anaemia_with_healthy_lungs_leaves_pressure_and_saturation_normal_while_content_falls():
    so2 = curve.saturation_tanh(95.0)  # depends on pressure, not on the amount of haemoglobin
    healthy = oxygen_content(15.0, functional_to_fractional(so2, 0.02), 95.0, DEFAULT)
    anaemic = oxygen_content(7.5, functional_to_fractional(so2, 0.02), 95.0, DEFAULT)
    assert so2 > 0.95
    assert anaemic / healthy == pytest.approx(0.51, abs=0.01)


def test_carbon_monoxide_costs_more_than_its_share():
    # COHb 30 %: content falls by a third, what can be unloaded falls by more
    healthy, poisoned = extractable(cohb=0.0, inactive=0.01), extractable(cohb=0.30, inactive=0.31, methb=0.01)
    assert poisoned / healthy < 0.6 * 0.69 / 0.99


def test_a_left_shift_costs_extractable_oxygen_without_costing_content():
    assert extractable(so2=0.985, ph=7.6) < extractable(so2=0.985, ph=7.4) < extractable(so2=0.985, ph=7.2)


def test_dissolved_oxygen_alone_cannot_replace_haemoglobin():
    # 600 mmHg dissolves less than 2 mL/dL
    assert dissolved_oxygen(600.0, DEFAULT) < 2.0


def test_one_constant_and_the_usual_share_are_the_bedside_formula():
    assert oxygen_content(10.0, functional_to_fractional(0.98, 0.036), 0.0, DEFAULT) == pytest.approx(
        1.34 * 9.8, rel=1e-4
    )
