"""Uncertainty against an independent propagation, numerical derivatives and Monte Carlo; shared inputs enter once."""

from dataclasses import replace
from types import MappingProxyType

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.oxygen.change_world import checks, crowd, derived, table
from worksheet.oxygen import measurement, uncertainty
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.derive import chain_inputs, oxygen_chain
from worksheet.oxygen.quantities import WITH_SD
from worksheet.oxygen.readings import Device, FlowMethod, Site
from worksheet.oxygen.uncertainty import Uncertainties

# Cases of the published example: Hb, SaO2, PaO2, SvO2, CO, FiO2; u(Hb) 2 %, u(CO) 5 %, u(sO2) 0.0044, u(FiO2) 0.02
CASES = {
    "A": (9.0, 0.97, 90.0, 0.70, 5.0, 0.4),
    "B": (8.5, 0.88, 58.0, 0.62, 7.5, 0.9),
    "C": (6.8, 0.99, 180.0, 0.45, 3.2, 0.5),
}


def case(name):
    """A snapshot with a mixed-venous sample, no dyshaemoglobins, and the uncertainties of the example."""
    hb, so2, po2, svo2, output, fio2 = CASES[name]
    bare = {"cohb": 0.0, "methb": 0.0, "hb": hb, "so2": so2, "po2": po2, "cardiac_output": output, "fio2": fio2}
    venous = {"time": 0.0, "site": Site.MIXED_VENOUS, "so2": svo2, "po2": 35.0}
    quantities = dict(Uncertainties().quantities) | {
        "so2": (0.0044, 0.0), "po2": (3.28, 0.036), "cohb": (0.0, 0.0), "methb": (0.0, 0.0), "fio2": (0.02, 0.0),
    }  # fmt: skip
    own = replace(
        Uncertainties(), quantities=MappingProxyType(quantities), fio2={}, venous_saturation=0.0105,
        flow={FlowMethod.THERMODILUTION: (0.05, 0.0)},
    )  # fmt: skip
    return (*derived(table(bare, venous)), own)


@pytest.mark.parametrize(("quantity", "inputs", "printed"), [*checks("cao2_gum_u"), *checks("do2_gum_u")])
def test_against_independent_propagation(quantity, inputs, printed):
    snapshots, found, own = case(inputs["case"])
    sds = uncertainty.standard_uncertainties(snapshots, found, DEFAULT, own)
    assert sds[quantity.split("_")[0]][0] == pytest.approx(float(printed), rel=1e-4)


@pytest.mark.parametrize(("quantity", "inputs", "printed"), checks("do2_gum_value"))
def test_values_of_the_example(quantity, inputs, printed):
    assert case(inputs["case"])[1]["do2"][0] == pytest.approx(float(printed), rel=1e-5)


# Printed with the example: O2ER, P/F with their standard uncertainties (haemoglobin shared)
@pytest.mark.parametrize(("name", "o2er", "pf"), [("A", 0.0111, 13.9), ("B", 0.0123, 3.9), ("C", 0.0102, 19.4)])
def test_shared_haemoglobin_enters_once(name, o2er, pf):
    snapshots, found, own = case(name)
    sds = uncertainty.standard_uncertainties(snapshots, found, DEFAULT, own)
    assert sds["o2er"][0] == pytest.approx(o2er, abs=0.00025)
    assert sds["pf_ratio"][0] == pytest.approx(pf, abs=0.06 if name != "B" else 0.2)
    # wrongly taken as independent the difference would be about twice as uncertain
    alone = uncertainty.budget(snapshots, found, DEFAULT, own)
    separate = np.hypot(alone.sd("cao2")[0], alone.sd("cvo2")[0])
    assert alone.sd("avdo2")[0] < 0.75 * separate


def test_against_numerical_derivatives():
    """Each closed-form derivative against a small step of the pass that derives the values."""
    snapshots, found = derived(crowd(stays=30, gases=3))
    rows = np.flatnonzero(snapshots.arterial)
    partials = uncertainty.budget(snapshots, found, DEFAULT).partials
    raw = chain_inputs(snapshots, DEFAULT, rows)
    inputs = {"hb": "hb", "so2": "so2", "po2": "po2", "fio2": "fio2", "so2_venous": "venous_so2",
              "po2_venous": "venous_po2", "barometric_pressure": "barometric_pressure"}  # fmt: skip
    near_one = (raw["so2"] > 0.995) | (found["shunt_fraction"][rows] < 0.02)
    for name, column in inputs.items():
        step = 1e-5 * raw[column]
        low, high = (oxygen_chain(raw | {column: raw[column] + sign * step}, DEFAULT) for sign in (-1, 1))
        for quantity in WITH_SD:
            numerical = (high[quantity] - low[quantity]) / (2 * step)
            closed = partials[quantity].get(name, np.zeros(len(snapshots)))[rows]
            loose = 0.02 * np.nanmax(np.abs(numerical)) if quantity == "shunt_fraction" else 1e-9
            ok = np.isclose(closed, numerical, rtol=2e-4, atol=loose + 1e-7) | near_one
            assert np.all(ok), (quantity, name)


@pytest.mark.parametrize("measured", [True, False])
def test_first_order_against_monte_carlo(measured):
    """Within 5 % on typical rows; rows where that fails are said to be doubtful."""
    readings = crowd(stays=16, gases=2, seed=3)
    if not measured:
        nothing = np.full(len(readings), np.nan)
        bare = dict.fromkeys(("so2", "cohb", "methb"), nothing)
        readings = replace(readings, values={**readings.values, **bare})
    snapshots, found = derived(readings)
    sds = uncertainty.standard_uncertainties(snapshots, found, DEFAULT)
    doubtful = uncertainty.first_order_doubtful(snapshots, found, sds)
    compared = 0
    for row in np.flatnonzero(snapshots.arterial):
        drawn = uncertainty.monte_carlo(snapshots, int(row), DEFAULT, n=20_000)
        for name in WITH_SD:
            if name in drawn and not doubtful[name][row]:
                assert sds[name][row] == pytest.approx(drawn[name].sd, rel=0.05 if measured else 0.08), name
                compared += 1
    assert compared > 100


def test_monte_carlo_repeats_itself():
    snapshots, _ = derived(table({}))
    one, two = (uncertainty.monte_carlo(snapshots, 0, DEFAULT, n=500, seed=9) for _ in (0, 1))
    assert one == two
    assert one["do2i"].low < one["do2i"].mean < one["do2i"].high


def test_doubtful_rows():
    finger = {"so2": None, "po2": None, "ph": None, "pco2": None, "spo2": 0.9}
    snapshots, found = derived(table({}, {"so2": 0.999}, {"fio2": 0.30}, finger))
    snapshots = replace(snapshots, device=np.array([7, 7, Device.NASAL_CANNULA, 7], dtype=np.int8))
    sds = uncertainty.standard_uncertainties(snapshots, found, DEFAULT)
    doubtful = uncertainty.first_order_doubtful(snapshots, found, sds)
    assert list(doubtful["cao2"]) == [False, True, False, True]
    assert list(doubtful["pf_ratio"]) == [False, False, True, False]


def test_every_promised_quantity_has_one():
    snapshots, found = derived(crowd(stays=5))
    sds = uncertainty.standard_uncertainties(snapshots, found, DEFAULT)
    for name in WITH_SD:
        np.testing.assert_array_equal(np.isnan(sds[name]), np.isnan(found[name]))
        assert np.nanmin(sds[name]) > 0.0


def test_products_agree_with_the_budget():
    """Delivery and consumption as flow times content, against their derivatives by every input."""
    readings = crowd(stays=10, seed=2)
    index = np.where(np.arange(len(readings)) % 2, readings["cardiac_output"] / 1.9, np.nan)
    output = np.where(np.isnan(index), readings["cardiac_output"], np.nan)
    values = {**readings.values, "cardiac_index": index, "cardiac_output": output}
    snapshots, found = derived(replace(readings, values=values))
    sds = uncertainty.standard_uncertainties(snapshots, found, DEFAULT)
    whole = uncertainty.budget(snapshots, found, DEFAULT)
    for name in ("do2", "do2i", "vo2", "vo2i"):
        there = snapshots.arterial & ~np.isnan(found[name])
        assert there.sum() > 50
        np.testing.assert_allclose(sds[name][there], whole.sd(name)[there], rtol=1e-12)


def test_a_measured_vo2_has_its_own_uncertainty():
    """5 % of the measured value; for the index body surface adds to it (Mosteller: half of each relative SD)."""
    snapshots, found = derived(table({"vo2_measured": 240.0}))
    assert found["vo2"][0] == 240.0
    sds = uncertainty.standard_uncertainties(snapshots, found, DEFAULT)
    height, weight = (Uncertainties().quantities[name][1] for name in ("height", "weight"))
    surface = 0.5 * np.hypot(height, weight)
    assert sds["vo2"][0] == pytest.approx(0.05 * 240.0)
    assert sds["vo2i"][0] == pytest.approx(found["vo2i"][0] * np.hypot(0.05, surface))
    venous = {"time": 0.0, "site": Site.MIXED_VENOUS, "so2": 0.65, "po2": 35.0}
    both, fick = derived(table({"vo2_measured": 240.0}, venous)), derived(table({}, venous))
    by_fick = [uncertainty.standard_uncertainties(*made, DEFAULT)["vo2"][0] for made in (both, fick)]
    assert by_fick[0] == by_fick[1]


def test_methods_and_devices():
    snapshots, _ = derived(table({}, {"method": FlowMethod.PULSE_CONTOUR}, {"method": FlowMethod.UNKNOWN}))
    flow = uncertainty.input_sds(snapshots)["cardiac_output"] / snapshots["cardiac_output"]
    np.testing.assert_allclose(flow, [np.hypot(0.05, 0.10), 0.15, 0.15], atol=5e-4)
    for device, sd in ((Device.VENTILATOR, 0.01), (Device.NASAL_CANNULA, 0.05), (Device.RESERVOIR_MASK, 0.08)):
        at = replace(snapshots, device=np.full(3, device, dtype=np.int8))
        assert measurement.fio2_sd(at)[0] == sd


def test_carried_values_grow_with_age():
    rows = ({"site": Site.NONE, "time": 0.0, "hb": 10.0}, *({"time": float(t), "hb": None} for t in (0, 1, 4, 9)))
    snapshots, _ = derived(table(*rows))
    relative = uncertainty.input_sds(snapshots)["hb"][1:] / 10.0
    np.testing.assert_allclose(relative, np.sqrt(0.02**2 + 0.01**2 * np.array([0, 1, 4, 9])), rtol=1e-9)


def test_a_site_can_edit_them():
    snapshots, found = derived(table({}))
    twice = {name: (2 * a, 2 * b) for name, (a, b) in Uncertainties().quantities.items()}
    own = replace(Uncertainties(), quantities=twice, flow={}, flow_other=(0.15, 0.26))
    usual, wide = (uncertainty.standard_uncertainties(snapshots, found, DEFAULT, one) for one in (
        replace(Uncertainties(), flow={}), own))  # fmt: skip
    assert wide["do2i"][0] == pytest.approx(2 * usual["do2i"][0], rel=1e-3)


@given(st.floats(10.0, 1000.0), st.floats(0.001, 0.3))
@settings(deadline=None)
def test_interval(value, relative):
    low, high = uncertainty.interval("do2i", value, relative * value)
    assert 0.0 < low < value < high
    assert low * high == pytest.approx(value**2)
    assert high - low == pytest.approx(2 * 1.96 * relative * value, rel=0.07)
    low, high = uncertainty.interval("o2er", 0.95, 0.1)
    assert high == 1.0


def test_repeatability_matches_mallat():
    """Smallest detectable differences, Mallat 2015: the SDs in force are at least 0.8 of what was measured."""
    published = {name: float(printed) / (1.96 * np.sqrt(2)) for name, _, printed in checks("sdd_")}
    own = Uncertainties()
    assert own.sd("po2", np.array(91.0)) >= 0.8 * published["sdd_pao2_mmHg"]
    assert own.sd("pco2", np.array(40.0)) >= 0.8 * published["sdd_paco2_mmHg"]
