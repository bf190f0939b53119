"""The dissociation curve, its inverse, carbon monoxide and P50: numbers worked by hand, edges, derivatives."""

import dataclasses

import numpy as np
import pytest

from worksheet.oxygen import carbon_monoxide, half_saturation, tanh_model
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.curve import (
    carbon_monoxide_pressure,
    co_share,
    displacement,
    displacement_from_pair,
    displacement_terms,
    kelman_equivalent_po2,
    p50_grade,
    p50_in_vivo,
    p50_of_displacement,
    p50_standard,
    po2_ellis,
    po2_tanh,
    po2_with_co,
    saturation,
    saturation_from_displacement,
    saturation_severinghaus,
    saturation_severinghaus_kelman,
    saturation_tanh,
    saturation_with_co,
    severinghaus_ph_coefficient,
)

BELOW = -1e-9
STANDARD_PCO2 = 5.33 * 7.500617
P0 = 7.0 * 7.500617


def by_hand(po2, a=0.0, temperature=37.0):
    """The tanh model written out once more, from the publication."""
    x = np.log(po2 / P0) - a - 0.055 * (temperature - 37.0)
    return 1.0 / (1.0 + np.exp(-(1.8747 + x + (3.5 + a) * np.tanh(0.5342857 * x))))


# Displacement


@pytest.mark.parametrize(
    ("given", "name", "value"),
    [
        ({"ph": 7.30}, "ph", 0.088),
        ({"ph": 7.50}, "ph", -0.088),
        ({"pco2": STANDARD_PCO2 * np.e}, "pco2", 0.048),
        ({"methb": 0.2}, "methb", -0.14),
        ({"hbf": 0.8}, "hbf", -0.20),
        ({"dpg": 7.5}, "dpg", 0.15),
        ({"dpg": 7.5, "hbf": 0.5}, "dpg", 0.125),
    ],
)
def test_each_named_part_of_the_displacement(given, name, value):
    terms = displacement_terms(**{"ph": 7.40, "pco2": STANDARD_PCO2, **given})
    assert list(terms) == ["ph", "pco2", "methb", "hbf", "dpg"]
    assert terms[name] == pytest.approx(value, abs=1e-12)
    others = {key: term for key, term in terms.items() if key not in (name, "hbf")}
    np.testing.assert_allclose(list(others.values()), 0.0, atol=1e-12)


def test_displacement_is_the_sum_of_its_parts():
    found = displacement(7.25, 60.0, 0.05, 0.1, 6.0)
    assert found == pytest.approx(sum(displacement_terms(7.25, 60.0, 0.05, 0.1, 6.0).values()), abs=1e-15)
    assert found == pytest.approx(0.132 + 0.048 * np.log(60.0 / STANDARD_PCO2) - 0.035 - 0.025 + 0.29 * 0.2, abs=1e-12)
    assert displacement(7.40, STANDARD_PCO2) == pytest.approx(0.0, abs=1e-12)


def test_no_displacement_without_carbon_dioxide_pressure():
    assert np.isfinite(displacement(7.4, 1e-6))
    assert np.isnan(displacement(7.4, 0.0))
    assert np.isnan(displacement_terms(7.4, -1.0)["pco2"])


# Saturation


@pytest.mark.parametrize("po2", [1.0, 12.0, 26.8, 40.0, 60.0, 95.0, 250.0])
@pytest.mark.parametrize(("a", "temperature"), [(0.0, 37.0), (0.3, 40.0), (-0.5, 31.0)])
def test_tanh_model_written_out(po2, a, temperature):
    assert saturation_from_displacement(po2, a, temperature) == pytest.approx(by_hand(po2, a, temperature), abs=1e-14)
    assert saturation_with_co(po2, a, temperature, 0.0) == pytest.approx(by_hand(po2, a, temperature), abs=1e-14)


def test_tanh_model_takes_every_shift():
    a = displacement(7.25, 60.0, 0.05, 0.1, 6.0)
    found = saturation_tanh(50.0, 7.25, 60.0, 39.0, 0.0, 0.05, 0.1, 6.0)
    assert found == pytest.approx(by_hand(50.0, a, 39.0), abs=1e-14)
    assert po2_tanh(found, 7.25, 60.0, 39.0, 0.0, 0.05, 0.1, 6.0) == pytest.approx(50.0, rel=1e-12)


def test_defaults_are_standard_blood():
    assert saturation_tanh(40.0) == saturation_tanh(40.0, 7.4, 40.0, 37.0, 0.0, 0.0, 0.0, 5.0)
    assert po2_tanh(0.75) == po2_tanh(0.75, 7.4, 40.0, 37.0, 0.0, 0.0, 0.0, 5.0)
    assert saturation_from_displacement(40.0, 0.1) == saturation_from_displacement(40.0, 0.1, 37.0)
    assert po2_with_co(0.7, 0.1) == po2_with_co(0.7, 0.1, 37.0, 0.0)
    assert kelman_equivalent_po2(40.0) == 40.0
    assert saturation_severinghaus_kelman(40.0) == saturation_severinghaus(40.0)


def test_small_negative_dyshaemoglobins_count_as_none():
    assert saturation_tanh(40.0, cohb=-0.01, methb=-0.01) == saturation_tanh(40.0)
    assert po2_tanh(0.75, cohb=-0.01, methb=-0.01) == po2_tanh(0.75)
    assert co_share(-0.01, -0.01) == 0.0


def test_no_oxygen_no_saturation():
    for share in (0.0, 0.01, 0.2):
        assert saturation_with_co(0.0, 0.0, 37.0, share) == 0.0
        assert 0.0 <= saturation_with_co(1e-300, 0.0, 37.0, share) < 1e-299
        assert po2_with_co(0.0, 0.0, 37.0, share) == 0.0
    assert saturation_severinghaus(0.0) == 0.0
    assert po2_ellis(0.0) == 0.0


@pytest.mark.parametrize(
    ("function", "inside", "outside"),
    [
        (saturation_from_displacement, (0.0, 0.0), (BELOW, 0.0)),
        (saturation_from_displacement, (0.5, 0.0), (-0.5, 0.0)),
        (saturation_from_displacement, (40.0, 2.5), (40.0, 2.5 + 1e-9)),
        (saturation_from_displacement, (40.0, -2.5), (40.0, -2.5 - 1e-9)),
        (saturation_with_co, (0.0, 0.0, 37.0, 0.0), (BELOW, 0.0, 37.0, 0.0)),
        (saturation_with_co, (0.5, 0.0, 37.0, 0.1), (-0.5, 0.0, 37.0, 0.1)),
        (saturation_with_co, (40.0, 2.5, 37.0, 0.0), (40.0, 2.6, 37.0, 0.0)),
        (saturation_with_co, (40.0, 0.0, 37.0, 0.0), (40.0, 0.0, 37.0, BELOW)),
        (saturation_with_co, (40.0, 0.0, 37.0, 0.99), (40.0, 0.0, 37.0, 1.0)),
        (co_share, (0.5, 0.49), (0.5, 0.5)),
        (carbon_monoxide_pressure, (0.0, 0.9, 0.1), (BELOW, 0.9, 0.1)),
        (carbon_monoxide_pressure, (0.5, 0.9, 0.1), (-0.5, 0.9, 0.1)),
        (carbon_monoxide_pressure, (90.0, 1e-9, 0.1), (90.0, 0.0, 0.1)),
        (carbon_monoxide_pressure, (90.0, 0.9, 0.0), (90.0, 0.9, BELOW)),
        (po2_with_co, (0.0, 0.0), (BELOW, 0.0)),
        (po2_with_co, (1.0 - 1e-9, 0.0), (1.0, 0.0)),
        (po2_with_co, (0.5, 2.5), (0.5, 2.6)),
        (po2_with_co, (0.5, 0.0, 37.0, 0.0), (0.5, 0.0, 37.0, BELOW)),
        (po2_with_co, (0.5, 0.0, 37.0, 0.99), (0.5, 0.0, 37.0, 1.0)),
        (displacement_from_pair, (26.8, 0.5), (0.0, 0.5)),
        (displacement_from_pair, (0.5, 0.002), (-0.5, 0.002)),
        (displacement_from_pair, (1.0, 1e-3), (1.0, 0.0)),
        (displacement_from_pair, (1.0, 1e-3), (1.0, -1e-3)),
        (displacement_from_pair, (100.0, 0.99), (100.0, 1.0)),
        (displacement_from_pair, (40.0, 0.7, 37.0, 0.0), (40.0, 0.7, 37.0, BELOW)),
        (displacement_from_pair, (40.0, 0.7, 37.0, 0.5), (40.0, 0.7, 37.0, 1.0)),
        (displacement_from_pair, (40.0, 0.75), (500.0, 0.05)),
        (p50_of_displacement, (2.5,), (2.6,)),
        (p50_of_displacement, (-2.5,), (-2.6,)),
        (saturation_severinghaus, (0.0,), (BELOW,)),
        (saturation_severinghaus, (0.5,), (-0.5,)),
        (po2_ellis, (0.0,), (BELOW,)),
        (po2_ellis, (1.0 - 1e-9,), (1.0,)),
        (kelman_equivalent_po2, (0.0,), (BELOW,)),
        (kelman_equivalent_po2, (40.0, 7.4, 1e-9), (40.0, 7.4, 0.0)),
        (kelman_equivalent_po2, (40.0, 7.4, 0.5), (-40.0, 7.4, -0.5)),
        (severinghaus_ph_coefficient, (0.0,), (BELOW,)),
    ],
)
def test_edges_of_the_domain(function, inside, outside):
    assert np.isfinite(function(*inside))
    assert np.isnan(function(*outside))


# Carbon monoxide


@pytest.mark.parametrize("share", [0.005, 0.02, 0.03, 0.031, 0.1, 0.3, 0.6, 0.9])
@pytest.mark.parametrize("a", [-0.5, 0.0, 0.4])
def test_saturation_beside_carbon_monoxide_solves_haldanes_law(share, a):
    po2 = np.array([10.0, 25.0, 40.0, 60.0, 100.0, 300.0])
    s = saturation_with_co(po2, a, 37.0, share)
    both = s + (1 - s) * share
    # the curve at the pressure of both ligands gives the saturation with both
    law = by_hand(po2 * both / (both - share), a) - both
    # where one step stands for the root (next test), the law is left with twice the error of the saturation
    np.testing.assert_allclose(law, 0.0, atol=2e-4 if share <= carbon_monoxide.SOLVED_FROM else 1e-12)


@pytest.mark.parametrize("share", [0.001, 0.005, 0.01, 0.02, 0.03])
def test_one_step_stands_for_the_root(share):
    po2, a = np.meshgrid(np.geomspace(1.0, 600.0, 60), np.linspace(-0.8, 0.8, 9))
    x = tanh_model.abscissa(po2, a, np.float64(37.0))
    odds = tanh_model.odds_at(x, a)
    exact = tanh_model.expit(carbon_monoxide._haldane_root(odds, x, a, np.full_like(x, share)))
    found = saturation_with_co(po2, a, 37.0, share)
    assert 100 * np.abs(found - exact).max() < 0.01  # points; 0.05 asked


def test_no_step_where_the_root_takes_over():
    edge = carbon_monoxide.SOLVED_FROM
    po2 = np.array([15.0, 26.8, 40.0, 90.0])
    before, after = saturation_with_co(po2, 0.0, 37.0, edge), saturation_with_co(po2, 0.0, 37.0, edge + 1e-9)
    assert 100 * np.abs(after - before).max() < 0.01


def test_rows_with_and_without_carbon_monoxide_in_one_table():
    share = np.array([0.0, 0.01, 0.2, 1.2, np.nan, 0.0])
    a = np.array([0.0, 0.1, 0.0, 0.0, 0.0, np.nan])
    found = saturation_with_co(40.0, a, 37.0, share)
    np.testing.assert_array_equal(np.isnan(found), [False, False, False, True, True, True])
    for i in range(3):
        assert found[i] == pytest.approx(float(saturation_with_co(40.0, a[i], 37.0, share[i])), abs=1e-12)


def test_share_of_the_sites():
    assert co_share(0.2, 0.0) == 0.2
    assert co_share(0.2, 0.2) == pytest.approx(0.25)
    assert co_share(0.0, 0.99) == 0.0


def test_haldanes_law_for_the_pressure():
    # M PCO/PO2 = COHb/O2Hb: equal parts at PO2/218
    assert carbon_monoxide_pressure(109.0, 0.45, 0.45) == pytest.approx(0.5)
    assert carbon_monoxide_pressure(100.0, 0.8, 0.2, 250.0) == pytest.approx(0.1)


@pytest.mark.parametrize("share", [0.0, 0.1, 0.4])
def test_pressure_beside_carbon_monoxide_worked_by_hand(share):
    s, a, t = 0.7, 0.1, 39.0
    po2 = po2_with_co(s, a, t, share)
    both = s + (1 - s) * share
    assert by_hand(po2 * both / (s * (1 - share)), a, t) == pytest.approx(both, abs=1e-12)


# Derivatives that a Newton step uses


@pytest.mark.parametrize("a", [-1.0, 0.0, 0.8])
@pytest.mark.parametrize("odds", [-3.0, 0.0, 2.0, 3.5])
def test_one_step_towards_the_displacement_triples_the_digits(odds, a):
    # Halley's method with true first and second derivatives leaves the cube of an error, Newton's leaves the square
    x0 = tanh_model.abscissa_of_odds(np.float64(odds), np.float64(a)) + a
    for error in (0.05, -0.05):
        left = tanh_model._nearer(np.float64(a + error), np.float64(odds), x0) - a
        assert abs(left) < 4.0 * abs(error) ** 3


@pytest.mark.parametrize("odds", [-3.0, 0.0, 2.0, 4.0])
@pytest.mark.parametrize("share", [0.02, 0.3, 0.7])
def test_derivatives_of_haldanes_law_are_the_numerical_ones(odds, share):
    step, own = 1e-5, (np.float64(-0.3), np.float64(0.1), np.float64(share))
    above, slope_above, _ = carbon_monoxide._haldane(np.float64(odds + step), *own)
    below, slope_below, _ = carbon_monoxide._haldane(np.float64(odds - step), *own)
    _, slope, curved = carbon_monoxide._haldane(np.float64(odds), *own)
    assert slope == pytest.approx((above - below) / (2 * step), rel=1e-7)
    assert curved == pytest.approx((slope_above - slope_below) / (2 * step), rel=1e-5, abs=1e-9)


@pytest.mark.parametrize("a", [-2.0, 0.0, 1.5])
def test_abscissa_of_odds_is_exact(a):
    odds = np.linspace(-25.0, 12.0, 75)
    found = tanh_model.abscissa_of_odds(odds, np.float64(a))
    np.testing.assert_allclose(tanh_model.odds_at(found, np.float64(a)), odds, atol=1e-11)


def test_first_estimate_of_the_displacement_is_close_enough_for_two_steps():
    # living blood: displacement within 1 of the standard curve, saturation as far as P50 is reported
    a, so2 = np.meshgrid(np.linspace(-1.0, 1.0, 41), np.linspace(0.30, 0.97, 68))
    odds = np.log(so2 / (1 - so2))
    x0 = tanh_model.abscissa_of_odds(odds, a) + a
    estimate = tanh_model._first_displacement(odds, x0)
    assert np.abs(estimate - a).max() < 0.1
    twice = tanh_model._nearer(tanh_model._nearer(estimate, odds, x0), odds, x0)
    np.testing.assert_allclose(twice, a, atol=1e-12)
    # on the standard curve the estimate is only off by how the curve is read backwards
    on_standard = tanh_model._first_displacement(odds[:, 20], x0[:, 20])
    assert np.abs(on_standard).max() < 0.06


def test_first_estimate_stays_in_range_where_no_curve_fits():
    found = tanh_model._first_displacement(np.array([-8.0, 8.0]), np.array([3.0, -6.0]))
    np.testing.assert_array_equal(found, tanh_model.A_RANGE[::-1])


def test_displacement_root_leaves_nothing():
    a = np.linspace(-2.4, 2.4, 49)
    po2 = po2_with_co(np.array([[0.1], [0.5], [0.9]]), a)
    found, left = tanh_model.displacement_root(tanh_model.abscissa(po2, np.float64(0.0), np.float64(37.0)), np.log(
        np.array([[0.1], [0.5], [0.9]]) / np.array([[0.9], [0.5], [0.1]])
    ))  # fmt: skip
    np.testing.assert_allclose(found, np.broadcast_to(a, found.shape), atol=1e-9)
    np.testing.assert_allclose(left, 0.0, atol=1e-9)


# P50


def test_p50_of_standard_blood():
    assert p50_of_displacement(0.0) == pytest.approx(26.84, abs=0.005)
    assert saturation_tanh(p50_of_displacement(displacement(7.4, 40.0))) == pytest.approx(0.5, abs=1e-12)
    assert p50_of_displacement(0.2, 40.0) == pytest.approx(p50_of_displacement(0.2) * np.exp(0.165), rel=1e-12)
    assert p50_of_displacement(0.2, 37.0) == p50_of_displacement(0.2)


def test_p50_in_vivo_from_a_pair_on_a_known_curve():
    for a, t in ((0.0, 37.0), (0.3, 39.0), (-0.4, 34.0)):
        for so2 in (0.30, 0.60, 0.95, 0.97):
            po2 = po2_with_co(so2, a, t)
            assert p50_in_vivo(po2, so2, t) == pytest.approx(float(p50_of_displacement(a, t)), rel=1e-8)


def test_p50_in_vivo_with_carbon_monoxide():
    # 20 % COHb: the pressure at which half of the free haemoglobin holds oxygen, as the curve itself says
    expected = po2_tanh(0.5, cohb=0.2, methb=0.01)
    po2 = po2_tanh(0.8, cohb=0.2, methb=0.01)
    assert p50_in_vivo(po2, 0.8, 37.0, 0.2, 0.01) == pytest.approx(float(expected), rel=1e-8)
    assert expected < p50_of_displacement(0.0) - 5.0


def test_p50_is_not_given_where_a_pair_says_little():
    so2 = np.array([0.2999, 0.30, 0.95, 0.9501, 0.97, 0.9701, np.nan])
    np.testing.assert_array_equal(p50_grade(so2), [0, 2, 2, 1, 1, 0, 0])
    assert p50_grade(so2).dtype == np.int8
    po2 = po2_with_co(np.nan_to_num(so2, nan=0.5), 0.0)
    np.testing.assert_array_equal(np.isnan(p50_in_vivo(po2, so2)), p50_grade(so2) == 0)
    np.testing.assert_array_equal(np.isnan(p50_standard(po2, so2, 7.4, 40.0)), p50_grade(so2) == 0)


def test_standard_p50_takes_the_known_shifts_out():
    po2 = po2_tanh(0.7, 7.25, 60.0, 39.0, 0.15, 0.05, 0.1)
    found = p50_standard(po2, 0.7, 7.25, 60.0, 39.0, 0.15, 0.05, 0.1)
    assert found == pytest.approx(float(p50_of_displacement(0.0)), rel=1e-8)
    assert p50_standard(40.0, 0.75, 7.4, 40.0) == p50_standard(40.0, 0.75, 7.4, 40.0, 37.0, 0.0, 0.0, 0.0)
    assert p50_in_vivo(40.0, 0.75) == p50_in_vivo(40.0, 0.75, 37.0, 0.0, 0.0)


def test_standard_p50_keeps_a_shift_of_dpg():
    po2 = po2_tanh(0.7, 7.3, 50.0, dpg=7.5)
    assert p50_standard(po2, 0.7, 7.3, 50.0) == pytest.approx(float(p50_of_displacement(0.15)), rel=1e-8)


def test_limits_of_p50_are_the_published_ones():
    assert half_saturation.P50_FULL == (0.30, 0.95)
    assert half_saturation.P50_WITH_INTERVAL == 0.97


# Severinghaus and Kelman


def test_severinghaus_worked_by_hand():
    assert saturation_severinghaus(10.0) == pytest.approx(2500 / 25900, rel=1e-12)
    assert po2_ellis(2500 / 25900) == pytest.approx(10.0, rel=1e-12)
    assert po2_ellis(1e-9) == pytest.approx(1e-9 * 23400 / 150, rel=1e-6)  # no cancellation at small saturation


@pytest.mark.parametrize(
    ("changed", "log10_factor"),
    [
        ({"temperature": 47.0}, -0.24),
        ({"temperature": 27.0}, 0.24),
        ({"ph": 7.50}, 0.04),
        ({"ph": 7.20}, -0.08),
        ({"pco2": 400.0}, -0.06),
        ({"pco2": 4.0}, 0.06),
    ],
)
def test_kelmans_shifts_worked_by_hand(changed, log10_factor):
    assert kelman_equivalent_po2(50.0, **changed) == pytest.approx(50.0 * 10**log10_factor, rel=1e-12)
    assert saturation_severinghaus_kelman(50.0, **changed) == pytest.approx(
        float(saturation_severinghaus(50.0 * 10**log10_factor)), rel=1e-12
    )


def test_severinghaus_coefficient_of_ph_worked_by_hand():
    assert severinghaus_ph_coefficient(26.6) == pytest.approx(-1.2)
    assert severinghaus_ph_coefficient(26.6 * 2 ** (1 / 0.184)) == pytest.approx(-0.2)


def test_the_site_chooses_the_curve():
    row = (40.0, 7.3, 50.0, 38.0, 0.1, 0.02)
    severinghaus = dataclasses.replace(DEFAULT, curve="severinghaus")
    assert saturation(*row, DEFAULT) == saturation_tanh(*row)
    assert saturation(*row, severinghaus) == saturation_severinghaus_kelman(*row[:4])
    assert np.isnan(saturation(40.0, 7.3, 50.0, 38.0, np.nan, 0.02, severinghaus))
    assert np.isnan(saturation(40.0, 7.3, 50.0, 38.0, 0.1, np.nan, severinghaus))
