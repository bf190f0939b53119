"""The derived table: worked by hand from the equations as published, and what must hold whatever the numbers."""

import math
import warnings

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from worksheet.oxygen.align import align
from worksheet.oxygen.constants import Constants
from worksheet.oxygen.curve import po2_tanh
from worksheet.oxygen.derive import CHAIN_INPUTS, chain_inputs, derive, oxygen_chain, p50_is_venous
from worksheet.oxygen.quantities import DERIVED, MEASURED, WITH_SD
from worksheet.oxygen.readings import Device, Flag, Readings, Site

from .builders import derived, readings, snapshots

GAS = {"ph": 7.40, "pco2": 40.0, "po2": 90.0, "so2": 0.97, "cohb": 0.01, "methb": 0.01, "hb": 10.0}
VENOUS = {"site": Site.MIXED_VENOUS, "ph": 7.36, "pco2": 46.0, "po2": 38.0, "so2": 0.70, "hb": 10.0}
BEDSIDE = {"fio2": 0.5, "cardiac_output": 5.0, "height": 180.0, "weight": 80.0, "spo2": 0.96, "respiratory_rate": 20.0,
           "mean_airway_pressure": 12.0, "temperature": 37.0}  # fmt: skip


def value(table, name, row=0):
    return float(table[name][row])


def test_a_whole_row_by_hand():
    """Each number worked out here from the published equation, with the constants of the methods page."""
    table = derived(GAS | BEDSIDE, VENOUS)
    cao2 = 1.39 * 10 * 0.97 * 0.98 + 0.0031 * 90
    cvo2 = 1.39 * 10 * 0.70 * 0.98 + 0.0031 * 38  # dyshaemoglobins of the arterial sample: same blood
    bsa = math.sqrt(180 * 80 / 3600)
    alveolar = 0.5 * (760 - 47) - 40 * (0.5 + 0.5 / 0.8)
    expected = {
        "cao2": cao2, "cvo2": cvo2, "avdo2": cao2 - cvo2, "dissolved_share": 0.0031 * 90 / cao2,
        "do2": 50 * cao2, "do2i": 50 * cao2 / bsa, "vo2": 50 * (cao2 - cvo2), "vo2i": 50 * (cao2 - cvo2) / bsa,
        "o2er": (cao2 - cvo2) / cao2, "pf_ratio": 180.0, "sf_ratio": 192.0, "pao2_alveolar": alveolar,
        "aa_gradient": alveolar - 90, "a_a_ratio": 90 / alveolar, "oxygenation_index": 100 * 0.5 * 12 / 90,
        "rox_index": 96 / 0.5 / 20, "gap_measured": 0.01, "co2_gap": 6.0, "co2_o2_ratio": 6 / (cao2 - cvo2), "bsa": bsa,
    }  # fmt: skip
    for name, number in expected.items():
        assert value(table, name) == pytest.approx(number, rel=1e-12), name
    assert set(table.values) == set(DERIVED)


def test_the_curve_values_agree_with_published_models():
    """Saturation at 90 mmHg in the table of Severinghaus 1979 is 96.5 % (J Appl Physiol 46:599); his P50 is 26.86."""
    standard = {"ph": 7.40, "pco2": 40.0, "hb": 15.0}
    table = derived(standard | {"po2": 90.0}, standard | {"minute": 700, "po2": 27.0, "so2": 0.503, "stay": 2})
    assert value(table, "so2_from_po2") == pytest.approx(0.965, abs=0.0055)
    assert value(table, "p50", 1) == pytest.approx(26.86, rel=0.02)


def test_shunt_by_hand():
    """Berggren 1942 with an end-capillary saturation near 1 on pure oxygen."""
    table = derived(GAS | {"fio2": 1.0, "po2": 150.0, "so2": 0.99, "cohb": 0.0, "methb": 0.0}, VENOUS)
    alveolar = 713.0 - 40.0
    end = 1.39 * 10 * 0.9995 + 0.0031 * alveolar
    arterial, venous = 1.39 * 10 * 0.99 + 0.0031 * 150, 1.39 * 10 * 0.70 + 0.0031 * 38
    assert value(table, "shunt_fraction") == pytest.approx((end - arterial) / (end - venous), abs=0.002)


def test_without_co_oximetry_content_is_the_bedside_convention_of_1_34():
    """1.34 Hb sO2 (Hüfner 1894) is 1.39 x 0.964."""
    row = {name: GAS[name] for name in ("ph", "pco2", "po2", "so2", "hb")}
    table = derived(row)
    assert value(table, "cao2") == pytest.approx(1.34 * 10 * 0.97 + 0.0031 * 90, rel=1e-4)
    assert table.flags[0] & Flag.DYSHAEMOGLOBINS_ASSUMED


def test_index_from_output_and_output_from_index():
    by_output = derived(GAS | {"cardiac_output": 5.0, "height": 180.0, "weight": 80.0})
    by_index = derived(GAS | {"cardiac_index": 2.5, "height": 180.0, "weight": 80.0})
    for name in ("do2", "do2i"):
        assert value(by_output, name) == pytest.approx(value(by_index, name), rel=1e-12)
    alone = derived(GAS | {"cardiac_output": 5.0})
    assert not math.isnan(value(alone, "do2"))
    assert math.isnan(value(alone, "do2i"))


def test_no_flow_no_delivery_and_no_haemoglobin_no_content():
    assert math.isnan(value(derived(GAS), "do2"))
    assert math.isnan(value(derived({k: v for k, v in GAS.items() if k != "hb"}), "cao2"))


def test_measured_vo2_stands_in_only_where_fick_cannot_be_had():
    flow = {"cardiac_output": 5.0, "vo2_measured": 222.0, "height": 180.0, "weight": 80.0}
    alone = derived(GAS | flow)
    assert value(alone, "vo2") == 222.0
    assert value(alone, "vo2i") == pytest.approx(111.0)
    assert alone.flags[0] & Flag.VO2_MEASURED
    fick = derived(GAS | flow, VENOUS)
    assert value(fick, "vo2") == pytest.approx(50 * value(fick, "avdo2"))
    assert not fick.flags[0] & Flag.VO2_MEASURED


def test_venous_blood_shares_the_arterial_haemoglobin():
    table = derived(GAS, {k: v for k, v in VENOUS.items() if k != "hb"})
    assert table.flags[0] & Flag.VENOUS_HB_SHARED
    assert value(table, "cvo2") == pytest.approx(1.39 * 10 * 0.7 * 0.98 + 0.0031 * 38)
    assert not derived(GAS, VENOUS).flags[0] & Flag.VENOUS_HB_SHARED


def test_a_saturation_without_po2_gives_the_bound_part_and_says_so():
    table = derived(GAS | BEDSIDE, {"site": Site.MIXED_VENOUS, "so2": 0.70, "hb": 10.0})
    assert value(table, "cvo2") == pytest.approx(1.39 * 10 * 0.7 * 0.98)
    assert table.flags[0] & Flag.DISSOLVED_NOT_COUNTED
    assert not derived(GAS | BEDSIDE, VENOUS).flags[0] & Flag.DISSOLVED_NOT_COUNTED


def test_the_finger_is_used_for_content_only_without_saturation_and_po2():
    table = derived({"hb": 10.0, "spo2": 0.95})
    assert table.flags[0] & Flag.SATURATION_FROM_FINGER
    assert value(table, "cao2") == pytest.approx(1.39 * 10 * 0.95 * 0.964)
    with_po2 = derived({"hb": 10.0, "spo2": 0.95, "po2": 90.0})
    assert math.isnan(value(with_po2, "cao2"))


def test_an_analysers_calculated_saturation_is_compared_and_never_used():
    without, with_it = (
        derived(GAS | {"so2": np.nan}),
        derived(GAS | {"so2": np.nan, "so2_calculated": 0.80, "spo2": 0.95}),
    )
    assert value(without, "cao2") == value(with_it, "cao2")
    assert value(with_it, "gap_calculated") == pytest.approx(-0.15)
    assert with_it.flags[0] & Flag.SATURATION_CALCULATED


def test_p50_prefers_the_venous_pair_and_takes_no_calculated_saturation():
    both = derived(GAS | {"so2": 0.96}, VENOUS)
    venous = derived(GAS | {"so2": 0.99}, VENOUS)
    assert value(both, "p50") == value(venous, "p50")
    assert value(both, "p50") == value(both, "p50", 1)  # the venous row's own
    assert math.isnan(value(derived(GAS | {"so2": np.nan, "so2_calculated": 0.9}), "p50"))


def test_p50_follows_carbon_monoxide_by_haldanes_law():
    """A pair on the curve of blood with 20 % COHb: P50 is where that very curve is at a half, not the pair's shift."""
    cohb, methb = 0.20, 0.01
    po2, half = (float(po2_tanh(s, cohb=cohb, methb=methb)) for s in (0.9, 0.5))
    gas = GAS | {"po2": po2, "so2": 0.9, "cohb": cohb, "methb": methb}
    assert value(derived(gas), "p50") == pytest.approx(half, rel=1e-6)
    # with COHb unknown its shift stays in the displacement: near by, but another number
    assert value(derived(gas | {"cohb": np.nan}), "p50") != pytest.approx(half, rel=0.01)


def test_which_pair_p50_comes_from_is_known():
    full = VENOUS | {"so2": 0.985, "po2": 130.0}
    assert p50_is_venous(snapshots(GAS, VENOUS))[0]
    assert not p50_is_venous(snapshots(GAS))[0]
    assert not p50_is_venous(snapshots(GAS, full))[0]


def test_no_p50_that_only_noise_on_the_flat_part_can_have_made():
    assert math.isnan(value(derived(GAS | {"po2": 180.0, "so2": 0.965}), "p50"))
    assert value(derived(GAS | {"po2": 180.0, "so2": 0.95}), "p50") > 50  # reported, with a finding
    assert 25 < value(derived(GAS | {"po2": 88.0, "so2": 0.965}), "p50") < 30


def test_gases_at_37_degrees_and_body_temperature_only_for_what_the_body_unloads():
    warm, cold = derived(GAS | {"temperature": 40.0}), derived(GAS | {"temperature": 33.0})
    for name in ("so2_from_po2", "cao2", "p50"):
        assert np.array_equal(warm[name], cold[name], equal_nan=True), name
    assert value(warm, "extractable_o2") > value(cold, "extractable_o2")


def test_carbon_monoxide_costs_more_unloading_than_content():
    """Left shift: at COHb 30 % the share of content that can be unloaded falls too (Roughton & Darling 1944)."""
    clean, poisoned = derived(GAS), derived(GAS | {"cohb": 0.30})
    lost = 1 - value(poisoned, "cao2") / value(clean, "cao2")
    assert 1 - value(poisoned, "extractable_o2") / value(clean, "extractable_o2") > lost + 0.05


@pytest.mark.parametrize("missing", ["cohb", "methb"])
def test_a_prediction_for_the_finger_needs_both_dyshaemoglobins(missing):
    assert not math.isnan(value(derived(GAS), "predicted_spo2"))
    assert math.isnan(value(derived(GAS | {missing: np.nan}), "predicted_spo2"))


def test_venous_rows_get_their_own_content_curve_and_p50_and_nothing_arterial():
    table = derived(VENOUS, VENOUS | {"site": Site.VENOUS, "stay": 2})
    own = {name for name in DERIVED if not math.isnan(value(table, name, 0))}
    assert own == {"cvo2", "so2_from_po2", "p50"}
    assert {name for name in DERIVED if not math.isnan(value(table, name, 1))} == {"so2_from_po2", "p50"}


def test_rows_without_a_sample_get_what_their_readings_allow():
    table = derived(BEDSIDE | {"site": Site.NONE, "hb": 10.0})
    assert {name for name in DERIVED if not math.isnan(value(table, name))} == {"sf_ratio", "rox_index", "bsa"}


@pytest.mark.parametrize(
    ("flag", "rows"),
    [
        (Flag.DYSHAEMOGLOBINS_CARRIED,
         [GAS | {"cohb": np.nan, "methb": np.nan}, {"minute": -60, "site": 0, "cohb": 0.02, "methb": 0.01}]),
        (Flag.HB_CARRIED, [GAS | {"hb": np.nan}, {"minute": -60, "site": 0, "hb": 9.0}]),
        (Flag.FLOW_CARRIED, [GAS, {"minute": -30, "site": 0, "cardiac_index": 2.5}]),
        (Flag.FIO2_ESTIMATED, [GAS | {"fio2": 0.36, "device": Device.NASAL_CANNULA}]),
        (Flag.CENTRAL_VENOUS, [GAS, VENOUS | {"site": Site.CENTRAL_VENOUS}]),
        (Flag.TEMPERATURE_ASSUMED, [GAS]),
        (Flag.SPO2_ABOVE_97, [GAS | {"spo2": 0.98, "fio2": 0.4}]),
        (Flag.BAROMETRIC_STANDARD, [GAS | {"fio2": 0.4}]),
    ],
)  # fmt: skip
def test_flags_say_what_the_numbers_rest_on(flag, rows):
    assert derived(*rows).flags[0] & flag
    clean = {"fio2": 0.4, "device": Device.VENTILATOR, "temperature": 37.0, "barometric_pressure": 755.0, "spo2": 0.96}
    assert derived(GAS | clean | {"cardiac_output": 5.0}, VENOUS).flags[0] == 0


def test_a_site_that_chose_other_constants_gets_them_everywhere():
    row = GAS | BEDSIDE
    usual = derived(row, VENOUS)
    other = derived(row, VENOUS, constants=Constants(hufner=1.34, barometric_pressure=600.0, bsa_formula="dubois",
                                                     curve="severinghaus"))  # fmt: skip
    for name in ("cao2", "cvo2", "pao2_alveolar", "bsa", "so2_from_po2", "shunt_fraction"):
        assert value(usual, name) != value(other, name), name


def test_the_lean_chain_gives_what_the_table_gives():
    table = snapshots(GAS | BEDSIDE, VENOUS, GAS | {"minute": 90, "so2": np.nan})
    whole, raw = derive(table), chain_inputs(table)
    assert set(raw) == set(CHAIN_INPUTS)
    lean = oxygen_chain(raw)
    for name in ("cvo2", *WITH_SD):
        arterial = table.arterial
        assert np.array_equal(lean[name][arterial], whole[name][arterial], equal_nan=True), name
    assert list(oxygen_chain(raw, wanted=("cao2",))) == ["cao2"]


# ---- laws ----

RANGES = {"ph": (6.8, 7.8), "pco2": (15, 100), "po2": (20, 600), "hb": (3, 20), "so2": (0.3, 1), "cohb": (0, 0.5),
          "methb": (0, 0.4), "fio2": (0.21, 1), "spo2": (0.5, 1), "cardiac_output": (1, 15), "height": (140, 200),
          "weight": (40, 150), "temperature": (30, 42), "o2hb": (0.2, 0.99), "sulfhb": (0, 0.1)}  # fmt: skip


@st.composite
def rows(draw):
    made = []
    for _ in range(draw(st.integers(1, 8))):
        row = {
            "stay": draw(st.integers(1, 2)),
            "minute": draw(st.integers(0, 90)),
            "site": draw(st.sampled_from([0, 1, 1, 2, 3, 4])),
        }
        made.append(row | {name: draw(st.floats(*limits)) for name, limits in RANGES.items() if draw(st.booleans())})
    return made


@given(rows())
@settings(max_examples=150, deadline=None)
def test_bounded_and_silent_for_anything(made):
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        table = derived(*made)
    for name in ("o2er", "shunt_fraction", "dissolved_share", "so2_from_po2", "predicted_spo2"):
        column = table[name][~np.isnan(table[name])]
        assert np.all((column >= 0.0) & (column <= 1.0)), name
    for name in ("cao2", "cvo2", "do2", "do2i", "pf_ratio", "p50", "extractable_o2", "bsa"):
        assert not np.any(table[name] < 0.0), name
    assert not any(np.any(np.isinf(column)) for column in table.values.values())
    content = table["cao2"][~np.isnan(table["cao2"])]
    assert np.all(content <= 1.39 * 20 + 0.0031 * 600)


@given(rows(), st.randoms(use_true_random=False))
@settings(max_examples=100, deadline=None)
def test_order_of_rows_does_not_matter(made, random):
    shuffled = list(range(len(made)))
    random.shuffle(shuffled)
    one, other = derived(*made), derived(*(made[i] for i in shuffled))
    for name in DERIVED:
        assert np.array_equal(one[name][shuffled], other[name], equal_nan=True), name
    assert np.array_equal(one.flags[shuffled], other.flags)


@given(rows())
@settings(max_examples=60, deadline=None)
def test_splitting_at_stays_gives_the_same_rows(made):
    whole = derived(*made)
    for stay in {row["stay"] for row in made}:
        mine = [i for i, row in enumerate(made) if row["stay"] == stay]
        part = derived(*(made[i] for i in mine))
        for name in DERIVED:
            assert np.array_equal(whole[name][mine], part[name], equal_nan=True), name


def test_nan_in_nan_out_and_nothing_on_the_console():
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        table = derive(
            align(Readings.build([1, 1, 2], [0.0, 1.0, 2.0], [1, 2, 0], {name: [np.nan] * 3 for name in MEASURED}))
        )
    assert all(np.all(np.isnan(column)) for column in table.values.values())
    assert not np.any(table.flags)


def test_blocks_of_work_leave_no_seam():
    """More rows than are worked on at a time give the same as each row alone."""
    n = 40_000
    many = Readings.build(
        np.arange(n), np.zeros(n), np.ones(n), {name: np.full(n, v) for name, v in (GAS | BEDSIDE).items()}
    )
    table = derive(align(many))
    one = derived(GAS | BEDSIDE)
    for name in DERIVED:
        assert np.array_equal(np.unique(table[name]), np.unique(one[name]), equal_nan=True), name


def test_empty_table():
    assert len(derive(align(readings()))["cao2"]) == 0
