"""Which saturation is trusted, what a finger would show, and what explains a gap."""

import dataclasses

import numpy as np
import pytest

from worksheet.oxygen import curve
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.oximetry import (
    choose_saturation,
    dyshaemoglobin_effect,
    gap_calculated,
    gap_measured,
    inactive_share,
    methb_explaining,
    predicted_spo2,
)
from worksheet.oxygen.readings import Flag

NAN = np.nan
NOTHING = {
    "so2": NAN, "o2hb": NAN, "so2_curve": NAN, "spo2": NAN, "po2": NAN, "cohb": NAN, "methb": NAN, "sulfhb": NAN,
}  # fmt: skip


def choose(constants=DEFAULT, **given):
    return choose_saturation(**{**NOTHING, **given}, constants=constants)


MEASURED = {"cohb": 0.02, "methb": 0.01}
GAS = {"po2": 80.0, "so2_curve": 0.95, "spo2": 0.93}


@pytest.mark.parametrize(
    ("given", "saturation", "inactive", "flags"),
    [
        ({"o2hb": 0.94, **MEASURED, **GAS}, 0.94 / 0.97, 0.03, 0),
        ({"o2hb": 0.94, "so2": 0.96, **MEASURED, **GAS}, 0.94 / 0.97, 0.03, 0),
        ({"o2hb": 0.912, "so2": 0.96, **GAS}, 0.96, 0.05, 0),
        ({"o2hb": 0.90, **GAS}, 0.90 / 0.964, 0.036, Flag.DYSHAEMOGLOBINS_ASSUMED),
        ({"o2hb": 0.98, **GAS}, 1.0, 0.02, Flag.DYSHAEMOGLOBINS_ASSUMED),
        ({"o2hb": 0.98, "so2": 0.97, **GAS}, 1.0, 0.02, Flag.DYSHAEMOGLOBINS_ASSUMED),
        ({"o2hb": 0.90, "so2": 0.0, **GAS}, 0.90 / 0.964, 0.036, Flag.DYSHAEMOGLOBINS_ASSUMED),
        ({"so2": 0.96, **MEASURED, **GAS}, 0.96, 0.03, 0),
        ({"so2": 0.96, **MEASURED, "sulfhb": 0.02, **GAS}, 0.96, 0.05, 0),
        ({"so2": 0.96, **GAS}, 0.96, 0.036, Flag.DYSHAEMOGLOBINS_ASSUMED),
        ({"so2": 1.004, **MEASURED, **GAS}, 1.0, 0.03, 0),
        ({"so2": 1.005, **MEASURED, **GAS}, 1.0, 0.03, 0),
        ({"so2": 0.0, **MEASURED, **GAS}, 0.0, 0.03, 0),
        (GAS, 0.95, 0.036, Flag.SATURATION_CALCULATED | Flag.DYSHAEMOGLOBINS_ASSUMED),
        ({**GAS, **MEASURED}, 0.95, 0.03, Flag.SATURATION_CALCULATED),
        ({"so2": 1.01, **MEASURED, **GAS}, 0.95, 0.03, Flag.SATURATION_CALCULATED),
        ({"so2": -0.01, **MEASURED, **GAS}, 0.95, 0.03, Flag.SATURATION_CALCULATED),
        ({"spo2": 0.93, **MEASURED}, 0.93, 0.03, Flag.SATURATION_FROM_FINGER),
        ({"spo2": 0.93}, 0.93, 0.036, Flag.SATURATION_FROM_FINGER | Flag.DYSHAEMOGLOBINS_ASSUMED),
    ],
)
def test_order_of_trust(given, saturation, inactive, flags):
    found = choose(**given)
    assert found.saturation == pytest.approx(saturation, abs=1e-12)
    assert found.inactive == pytest.approx(inactive, abs=1e-12)
    assert found.o2hb == pytest.approx(saturation * (1 - inactive), abs=1e-12)
    assert found.flags == flags
    assert found.flags.dtype == np.int64


@pytest.mark.parametrize(
    "given",
    [
        {},
        MEASURED,
        {"po2": 80.0, "spo2": 0.93},  # a PO2 without a curve value (pH missing): the finger does not stand in
    ],
)
def test_nothing_to_go_by(given):
    found = choose(**given)
    assert np.isnan(found.saturation)
    assert np.isnan(found.o2hb)
    assert found.flags == 0


def test_dyshaemoglobins_that_leave_no_haemoglobin_leave_no_content():
    found = choose(so2=0.9, cohb=0.6, methb=0.5)
    assert np.isnan(found.o2hb)
    assert np.isnan(found.inactive)


def test_a_table_of_different_rows_at_once():
    found = choose(
        so2=[0.96, NAN, NAN], o2hb=[NAN, 0.90, NAN], so2_curve=[0.9, 0.9, 0.9], po2=[60.0, 60.0, 60.0],
        spo2=[0.9, 0.9, 0.9], cohb=[0.01, NAN, 0.3], methb=[0.01, NAN, 0.01],
    )  # fmt: skip
    np.testing.assert_allclose(found.saturation, [0.96, 0.90 / 0.964, 0.9])
    np.testing.assert_allclose(found.inactive, [0.02, 0.036, 0.31])
    assert found.flags.tolist() == [0, Flag.DYSHAEMOGLOBINS_ASSUMED, Flag.SATURATION_CALCULATED]


@pytest.mark.parametrize(
    ("cohb", "methb", "sulfhb", "share", "known"),
    [
        (0.02, 0.01, NAN, 0.03, True),
        (0.02, 0.01, 0.005, 0.035, True),
        (-0.01, 0.01, -0.02, 0.01, True),
        (0.0, 0.0, NAN, 0.0, True),
        (NAN, NAN, NAN, 0.036, False),
        (0.30, NAN, NAN, 0.30, False),
        (NAN, 0.20, NAN, 0.20, False),
        (0.01, NAN, NAN, 0.036, False),
        (NAN, NAN, 0.10, 0.10, False),
    ],
)
def test_inactive_share(cohb, methb, sulfhb, share, known):
    found, is_known = inactive_share(cohb, methb, sulfhb, DEFAULT)
    assert found == pytest.approx(share, abs=1e-12)
    assert bool(is_known) is known


def test_inactive_share_follows_the_site_and_stops_at_all_haemoglobin():
    site = dataclasses.replace(DEFAULT, usual_inactive=0.02)
    assert inactive_share(NAN, NAN, NAN, site)[0] == 0.02
    assert np.isfinite(inactive_share(0.5, 0.49, NAN, DEFAULT)[0])
    assert np.isnan(inactive_share(0.5, 0.5, NAN, DEFAULT)[0])


# Worked from the absorptivities: R = A660/A940, SpO2 = 110 - 25 R
@pytest.mark.parametrize(
    ("so2", "cohb", "methb", "spo2"),
    [
        (0.0, 0.0, 0.0, 0.0),  # R 4.45 would read below zero
        (0.5, 0.0, 0.0, 1.10 - 0.25 * 0.4575 / 0.2385),
        (1.0, 0.0, 0.5, 1.10 - 0.25 * (0.05 + 0.4725) / (0.147 + 0.3645)),
        (1.0, 0.5, 0.0, 1.10 - 0.25 * (0.05 + 0.0345) / (0.147 + 0.0005)),
        (1.0, 0.2, 0.3, 1.10 - 0.25 * (0.05 + 0.0138 + 0.2835) / (0.147 + 0.0002 + 0.2187)),
        (1.0, 0.0, 0.0, 1.0),
        (0.98, 0.0, 0.0, 1.0),  # 110 - 25 x 0.393 = 100.2 is shown as 100
        (0.9, -0.01, -0.01, 1.10 - 0.25 * 0.1715 / 0.2829),
    ],
)
def test_predicted_reading(so2, cohb, methb, spo2):
    assert predicted_spo2(so2, cohb, methb) == pytest.approx(spo2, abs=1e-12)


@pytest.mark.parametrize(
    ("function", "inside", "outside"),
    [
        (predicted_spo2, (0.0, 0.0, 0.0), (-1e-9, 0.0, 0.0)),
        (predicted_spo2, (1.0, 0.0, 0.0), (1.0 + 1e-9, 0.0, 0.0)),
        (predicted_spo2, (0.9, 0.5, 0.5), (0.9, 0.5, 0.5 + 1e-9)),
        (predicted_spo2, (0.9, 0.6, 0.0), (0.9, 0.6 + 1e-9, 0.0)),
        (methb_explaining, (0.85, 0.98), (0.60, 0.98)),
        (methb_explaining, (0.77, 0.0), (0.77, -1e-9)),
        (methb_explaining, (0.80, 1.0), (0.80, 1.0 + 1e-9)),
        (methb_explaining, (0.85, 0.98, 0.0), (0.85, 0.98, -1e-9)),
        (methb_explaining, (0.85, 0.98), (1.0, 1.0)),
        (methb_explaining, (0.92, 0.95), (0.99, 0.95)),
    ],
)
def test_edges_of_the_domain(function, inside, outside):
    assert np.isfinite(function(*inside))
    assert np.isnan(function(*outside))


@pytest.mark.parametrize("cohb", [0.0, 0.1, 0.3])
@pytest.mark.parametrize("methb", [0.05, 0.2, 0.45])
def test_methaemoglobin_that_explains_a_reading(cohb, methb):
    shown = predicted_spo2(0.97, cohb, methb)
    assert methb_explaining(shown, 0.97, cohb) == pytest.approx(methb, abs=1e-12)


def test_no_methaemoglobin_beyond_what_carbon_monoxide_leaves():
    assert methb_explaining(predicted_spo2(0.97, 0.5, 0.45), 0.97, 0.5) == pytest.approx(0.45)
    assert np.isnan(methb_explaining(0.75, 0.97, 0.5))


def test_gaps():
    assert gap_measured(0.90, 0.95) == pytest.approx(-0.05)
    assert gap_calculated(0.97, 0.96, 0.85) == pytest.approx(0.12)
    assert gap_calculated(NAN, 0.96, 0.85) == pytest.approx(0.11)
    assert np.isnan(gap_calculated(NAN, NAN, 0.85))
    assert np.isnan(gap_calculated(0.97, 0.96, NAN))
    assert np.isnan(gap_measured(NAN, 0.95))


# Facts of the trade (common practice)


def test_methaemoglobin_lowers_the_reading_while_pressure_and_calculated_saturation_stay_normal():
    po2 = 95.0
    calculated = curve.saturation_tanh(po2)
    shown = predicted_spo2(calculated, 0.0, 0.35)
    assert calculated > 0.96
    assert shown == pytest.approx(0.85, abs=0.03)
    assert 100 * gap_calculated(NAN, calculated, shown) > 5


def test_carbon_monoxide_leaves_reading_and_calculated_saturation_normal():
    calculated = curve.saturation_tanh(95.0)
    shown = predicted_spo2(calculated, 0.30, 0.0)
    assert shown > 0.95
    assert abs(100 * gap_calculated(NAN, calculated, shown)) < 5
    assert choose(so2=calculated, cohb=0.30, methb=0.0, po2=95.0).o2hb < 0.70


def test_a_clean_reading_at_the_saturation_of_a_healthy_person():
    assert predicted_spo2(0.97, 0.01, 0.005) == pytest.approx(0.99, abs=0.02)


def test_true_desaturation_is_not_laid_on_dyshaemoglobin():
    # the straight calibration reads clean blood high, by 6 points at 85 %: the effect is free of that
    assert predicted_spo2(0.85, 0.0, 0.0) == pytest.approx(0.91, abs=0.005)
    assert dyshaemoglobin_effect(0.85, 0.0, 0.0) == 0.0
    assert abs(dyshaemoglobin_effect(0.85, 0.01, 0.01)) < 0.01


def test_effect_on_the_reading():
    assert dyshaemoglobin_effect(0.97, 0.0, 0.35) == pytest.approx(-0.126, abs=0.001)
    assert dyshaemoglobin_effect(0.97, 0.20, 0.0) == pytest.approx(-0.0147, abs=0.0005)
    assert np.isnan(dyshaemoglobin_effect(0.97, 0.7, 0.0))
    assert np.isnan(dyshaemoglobin_effect(np.nan, 0.1, 0.0))
