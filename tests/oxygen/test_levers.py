"""Levers and what to measure next."""

import re
from dataclasses import replace

import numpy as np
import pytest

from tests.oxygen.change_world import crowd, derived, table
from worksheet.oxygen import levers, uncertainty
from worksheet.oxygen import next_measurement as next_measurement_module
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.derive import chain_inputs, oxygen_chain
from worksheet.oxygen.next_measurement import next_measurement
from worksheet.oxygen.readings import Site


def with_levers(*rows, row=1, **more):
    snapshots, found = derived(table(*rows))
    return levers.levers(snapshots, found, row, DEFAULT, start_row=0, **more), snapshots, found


def test_each_step_alone_reaches_the_target():
    """Put what a lever says into the snapshot: supply is then the target."""
    made, snapshots, found = with_levers({}, {"hb": 8.5, "cardiac_output": 5.2, "po2": 55.0, "so2": 0.87})
    assert made.target == pytest.approx(found["do2i"][0])
    raw = chain_inputs(snapshots, DEFAULT, np.array([1]))
    for one in made.levers:
        if not one.reachable or one.step in ("lung", "function"):
            continue
        column, value = {"hb": ("hb", one.needed), "cardiac_index": ("cardiac_index", one.needed)}[one.quantity]
        supply = oxygen_chain(raw | {column: np.array([value])}, DEFAULT, ("do2i",))["do2i"][0]
        assert supply == pytest.approx(made.target, rel=1e-9), one.step


def test_lung_reaches_and_cannot():
    made, _, _ = with_levers({}, {"po2": 48.0, "so2": 0.82})
    lung = next(one for one in made.levers if one.step == "lung")
    assert lung.reachable
    assert lung.needed == pytest.approx(90.0, rel=0.1)
    made, _, _ = with_levers({}, {"hb": 7.0})
    lung = next(one for one in made.levers if one.step == "lung")
    assert not lung.reachable
    assert np.isnan(lung.needed)
    assert "cannot: even 100 % saturation gives" in lung.words
    assert lung.at_limit < made.target


def test_function_cleared():
    made, _, _ = with_levers({}, {"cohb": 0.25, "so2": 0.97})
    function = next(one for one in made.levers if one.step == "function")
    assert function.reachable
    # supply falls in proportion to the active share: 0.98 at the start, saturation nearly the same
    assert function.needed == pytest.approx(0.02, abs=0.012)
    made, _, _ = with_levers({}, {"hb": 7.0})
    assert "cannot: even no COHb or MetHb" in next(one for one in made.levers if one.step == "function").words


def test_small_steps():
    made, _, found = with_levers({}, {"hb": 8.0})
    gains = {one.step: one.gain for one in made.levers}
    assert gains["flow"] == pytest.approx(0.1 * found["do2i"][1])
    # one unit raises Hb by 1 g/dL in 70 kg, here 75 kg
    index = found["do2i"][1] / (10 * found["cao2"][1])
    assert gains["haemoglobin"] == pytest.approx(10 * index * 1.39 * 0.98 * 0.965 * 70 / 75)
    assert 0.0 < gains["lung"] < gains["haemoglobin"]


def test_target_of_extraction():
    venous = {"time": 0.0, "site": Site.MIXED_VENOUS, "so2": 0.45, "po2": 26.0}
    snapshots, found = derived(table({}, venous))
    made = levers.levers(snapshots, found, 0, DEFAULT)
    assert made.target == pytest.approx(found["vo2i"][0] / 0.30)
    assert "30 %" in made.why
    assert not made.reached


def test_content_alone_has_no_lever_of_flow():
    made, _, _ = with_levers({"cardiac_output": None}, {"cardiac_output": None, "hb": 8.0})
    assert made.name == "cao2"
    assert [one.step for one in made.levers] == ["haemoglobin", "lung", "function"]


def test_cautions_name_their_sources():
    made, _, _ = with_levers({}, {"hb": 7.0})
    assert any("Carson 2023" in source for _, source in made.cautions)
    assert all(words and source for words, source in made.cautions)


def test_carbon_monoxide_turns_the_caution_on_oxygen():
    """Oxygen shortens the half-life of COHb (Weaver 2000: 74 min, SD 25): no word against it while COHb is raised."""
    said = {}
    for cohb in (0.02, 0.28, None):
        made, _, _ = with_levers({}, {"cohb": cohb, "hb": 9.0})
        said[cohb] = " ".join(words for words, _ in made.cautions)
    assert "More inspired oxygen than needed does harm" in said[0.02]
    assert said[None] == said[0.02]
    assert "does harm" not in said[0.28]
    assert "on 100 % its half-life is about 75 min" in said[0.28]
    assert "Restrictive transfusion" in said[0.28]


def test_no_target_no_levers():
    snapshots, found = derived(table({"hb": None}, {}))
    assert levers.levers(snapshots, found, 0, DEFAULT) is None
    assert levers.levers(snapshots, found, 1, DEFAULT, start_row=0) is None


def next_of(*rows, row=0, target=None):
    snapshots, found = derived(table(*rows))
    return next_measurement(snapshots, found, row, DEFAULT, target=target), snapshots, found


def test_a_carried_haemoglobin_is_the_most_telling_for_content():
    old = {"site": Site.NONE, "time": -9.0, "hb": 9.0}
    made, _, _ = next_of({"hb": None}, old, target="cao2")
    assert (made.best.name, "carried" in made.best.reason) == ("hb", True)
    assert "Most telling next: haemoglobin" in made.words


def test_what_it_promises_is_what_is_gained():
    """Measure the carried haemoglobin afresh: the SD is then what was promised."""
    old = {"site": Site.NONE, "time": -9.0, "hb": 10.0}
    made, _, _ = next_of({"hb": None}, old, target="cao2")
    snapshots, found = derived(table({"hb": 10.0}))
    fresh = uncertainty.standard_uncertainties(snapshots, found, DEFAULT)["cao2"][0]
    assert made.best.sd_after == pytest.approx(fresh, rel=1e-6)


def test_co_oximetry_is_the_most_telling_where_saturation_is_calculated():
    made, _, _ = next_of({"so2": None, "po2": 50.0, "cohb": None, "methb": None}, target="cao2")
    assert made.best.name == "co_oximetry"
    snapshots, found = derived(table({"so2": 0.85, "po2": 50.0}))
    fresh = uncertainty.standard_uncertainties(snapshots, found, DEFAULT)["cao2"][0]
    assert made.best.sd_after == pytest.approx(fresh, rel=0.1)


def test_a_repeat_is_averaged_and_says_what_that_gives():
    """Co-oximetry measured: only a repeat can help, and the mean of two has the random part of the variance halved."""
    made, _, found = next_of({}, target="cao2")
    one = next(one for one in made.candidates if one.reason == next_measurement_module.REPEAT)
    assert one.removed <= 0.5
    assert one.sd_after >= made.sd * np.sqrt(0.5)
    assert "halves" not in made.words
    assert found["cao2"][0] > 0.0


def test_flow_dominates_delivery():
    made, _, _ = next_of({})
    assert made.target == "do2i"
    assert made.candidates[0].name == "flow"


def test_missing_flow_says_what_it_would_add():
    made, _, _ = next_of({"cardiac_output": None})
    assert made.target == "cao2"
    assert "Flow is not known" in made.words
    assert "± 22 %" in made.words


def test_percent_of_the_narrowing_is_said_to_be_of_the_value():
    made, _, _ = next_of({"so2": None, "po2": 50.0, "cohb": None, "methb": None}, target="cao2")
    assert re.search(r"from ± \d+ to ± \d+ % of its value\.", made.words)


def test_removed_shares_are_shares():
    snapshots, found = derived(crowd(stays=10))
    shared = uncertainty.budget(snapshots, found, DEFAULT)
    for row in np.flatnonzero(snapshots.arterial)[:20]:
        for target in ("do2i", "cao2", "o2er"):
            made = next_measurement(snapshots, found, int(row), DEFAULT, target=target, known=shared)
            assert made.sd == pytest.approx(shared.sd(target)[row])
            for one in made.candidates:
                assert 0.0 <= one.removed <= 1.0
                assert one.sd_after <= made.sd + 1e-12
            assert list(made.candidates) == sorted(made.candidates, key=lambda one: -one.removed)


def test_unknown_target():
    snapshots, found = derived(table({"hb": None}))
    assert next_measurement(snapshots, found, 0, DEFAULT) is None
    assert replace(levers.Levers("do2i", 1.0, 1.0, "", ())).reached
