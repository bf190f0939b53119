"""Pairing and carrying forward: the table of limits line by line, then against a slow account of the same rules."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from worksheet.oxygen.align import CARRIED, PERSON, VENOUS, align
from worksheet.oxygen.constants import CarryLimits
from worksheet.oxygen.quantities import MEASURED
from worksheet.oxygen.readings import Device, Event, FlowMethod, Readings, Site

from .builders import readings, snapshots

NONE, MIXED, CENTRAL = Site.NONE, Site.MIXED_VENOUS, Site.CENTRAL_VENOUS


def carried(name, value, minute, **more):
    """What a gas at minute 0 gets of a value read so many minutes before (or after, if negative)."""
    table = snapshots({"minute": -minute, "site": NONE, name: value, **more}, {"minute": 0})
    return table[name][1], table.age[name][1], table.source[name][1]


@pytest.mark.parametrize(
    ("name", "value", "before", "after"),
    [
        ("hb", 9.0, 12 * 60, 0),
        ("fio2", 0.5, 6 * 60, 0),
        ("peep", 8.0, 6 * 60, 0),
        ("mean_airway_pressure", 14.0, 6 * 60, 0),
        ("oxygen_flow", 4.0, 6 * 60, 0),
        ("cardiac_output", 5.0, 60, 30),
        ("cardiac_index", 2.5, 60, 30),
        ("vo2_measured", 210.0, 60, 30),
        ("temperature", 38.0, 4 * 60, 0),
        ("spo2", 0.95, 10, 10),
        ("cohb", 0.02, 4 * 60, 0),
        ("methb", 0.01, 4 * 60, 0),
        ("sulfhb", 0.01, 4 * 60, 0),
    ],
)
def test_each_value_is_carried_up_to_its_limit_and_no_further(name, value, before, after):
    assert carried(name, value, before) == (value, pytest.approx(before / 60), 0)
    assert np.isnan(carried(name, value, before + 1)[0])
    if after:
        assert carried(name, value, -after) == (value, pytest.approx(-after / 60), 0)
    assert np.isnan(carried(name, value, -after - 1)[0])


@pytest.mark.parametrize("name", [name for name in MEASURED if name not in CARRIED])
def test_everything_else_is_the_entrys_own(name):
    value, age, source = carried(name, 0.9, 1)
    assert np.isnan(value)
    assert np.isnan(age)
    assert source == -1


def test_own_value_wins_over_a_nearer_or_equal_one_and_has_age_0():
    table = snapshots({"minute": 0, "site": NONE, "hb": 7.0}, {"minute": 0, "hb": 9.0})
    assert table["hb"].tolist() == [7.0, 9.0]
    assert table.source["hb"].tolist() == [0, 1]
    assert table.age["hb"].tolist() == [0.0, 0.0]


def test_a_value_read_at_the_same_time_in_another_entry_has_age_0_whichever_row_comes_first():
    settings_row, gas = {"site": NONE, "fio2": 0.4}, {"po2": 90.0}
    for rows in ((settings_row, gas), (gas, settings_row)):
        table = snapshots(*rows)
        assert table["fio2"].tolist() == [0.4, 0.4]
        assert table.age["fio2"].tolist() == [0.0, 0.0]


@pytest.mark.parametrize("event", [Event.TRANSFUSION, Event.BLEED])
@pytest.mark.parametrize("minute", [-60, -30, 0])
def test_haemoglobin_is_not_carried_across_a_transfusion_or_bleed(event, minute):
    table = snapshots(
        {"minute": -60, "site": NONE, "hb": 9.0}, {"minute": minute, "site": NONE, "event": event}, {"minute": 0}
    )
    assert np.isnan(table["hb"][2])


@pytest.mark.parametrize(("event", "minute"), [(Event.TRANSFUSION, -61), (Event.OTHER, -30), (Event.BED_MOVE, -30)])
def test_haemoglobin_is_carried_past_events_that_do_not_change_it(event, minute):
    table = snapshots(
        {"minute": -60, "site": NONE, "hb": 9.0}, {"minute": minute, "site": NONE, "event": event}, {"minute": 0}
    )
    assert table["hb"][2] == 9.0


def test_haemoglobin_measured_after_a_transfusion_is_carried():
    table = snapshots(
        {"minute": -60, "site": NONE, "event": Event.TRANSFUSION, "hb": 7.0},
        {"minute": -30, "site": NONE, "hb": 8.2},
        {"minute": 0},
    )
    assert table["hb"].tolist() == [7.0, 8.2, 8.2]


def test_an_event_of_another_stay_does_not_count():
    table = snapshots(
        {"minute": -60, "hb": 9.0}, {"minute": -30, "stay": 2, "event": Event.BLEED, "site": NONE}, {"minute": 0}
    )
    assert table["hb"][2] == 9.0


def test_settings_hold_until_the_device_is_changed():
    before = {"minute": -60, "site": NONE, "fio2": 0.5, "device": Device.VENTILATOR}
    change = {"minute": -30, "site": NONE, "device": Device.HIGH_FLOW}
    marked = {"minute": -30, "site": NONE, "event": Event.DEVICE_CHANGE}
    same = {"minute": -30, "site": NONE, "device": Device.VENTILATOR}
    assert np.isnan(snapshots(before, change, {})["fio2"][2])
    assert np.isnan(snapshots(before, marked, {})["fio2"][2])
    kept = snapshots(before, same, {})
    assert kept["fio2"][2] == 0.5
    assert kept.device[2] == Device.VENTILATOR
    anew = snapshots(before, change | {"fio2": 0.6}, {})
    assert anew["fio2"][2] == 0.6
    assert anew.device[2] == Device.HIGH_FLOW
    assert snapshots(before, change, {}).device[2] == Device.HIGH_FLOW


def test_a_device_recorded_for_the_first_time_is_not_a_change():
    table = snapshots(
        {"minute": -60, "site": NONE, "fio2": 0.5}, {"minute": -30, "site": NONE, "device": Device.HIGH_FLOW}, {}
    )
    assert table["fio2"][2] == 0.5
    assert table.device[2] == Device.HIGH_FLOW


def test_output_and_index_come_from_the_same_entry():
    table = snapshots(
        {
            "minute": -50,
            "site": NONE,
            "cardiac_output": 6.0,
            "cardiac_index": 3.0,
            "flow_method": FlowMethod.ULTRASOUND,
        },
        {"minute": -10, "site": NONE, "cardiac_output": 4.0, "flow_method": FlowMethod.THERMODILUTION},
        {"minute": 0},
    )
    assert table["cardiac_output"][2] == 4.0
    assert np.isnan(table["cardiac_index"][2])
    assert table.flow_method[2] == FlowMethod.THERMODILUTION


def test_the_nearest_of_before_and_after_is_taken_and_the_earlier_of_two_equally_near():
    early, late = (
        {"minute": -20, "site": NONE, "cardiac_output": 4.0},
        {"minute": 10, "site": NONE, "cardiac_output": 6.0},
    )
    assert snapshots(early, late, {})["cardiac_output"][2] == 6.0
    assert snapshots(early | {"minute": -10}, late, {})["cardiac_output"][2] == 4.0


def test_equally_near_is_judged_in_minutes_and_not_by_the_last_bit_of_the_time():
    rows = [{"minute": 65, "site": NONE, "spo2": 0.91}, {"minute": 70}, {"minute": 75, "site": NONE, "spo2": 0.92}]
    assert snapshots(*rows)["spo2"][1] == 0.91


@pytest.mark.parametrize("name", PERSON)
def test_facts_of_the_person_have_no_age_limit_and_reach_back(name):
    table = snapshots(
        {"minute": -9000}, {"minute": -5000, "site": NONE, name: 80.0}, {"minute": 0}, {"minute": 0, "stay": 2}
    )
    assert table[name][:3].tolist() == [80.0, 80.0, 80.0]
    assert np.isnan(table[name][3])
    assert table.age[name][0] < 0 < table.age[name][2]


def test_mixed_venous_is_paired_before_a_nearer_central_venous_sample():
    gas, mixed, central = (
        {"po2": 90.0},
        {"minute": 29, "site": MIXED, "so2": 0.7},
        {"minute": 1, "site": CENTRAL, "so2": 0.75},
    )
    table = snapshots(gas, mixed, central)
    assert table.venous_row.tolist() == [1, -1, -1]
    assert table.venous_site[0] == MIXED
    assert table.venous["so2"][0] == 0.7
    assert snapshots(gas, mixed | {"minute": 31}, central).venous_row[0] == 2
    assert snapshots(gas, mixed | {"minute": -31}, central | {"minute": -31}).venous_row[0] == -1


def test_a_peripheral_venous_sample_and_another_stays_are_never_paired():
    assert snapshots({}, {"site": Site.VENOUS, "so2": 0.7}).venous_row[0] == -1
    assert snapshots({}, {"site": MIXED, "so2": 0.7, "stay": 2}).venous_row[0] == -1


def test_a_venous_entry_without_a_gas_has_nothing_to_pair():
    assert snapshots({}, {"site": MIXED, "lactate": 2.0}, {"site": CENTRAL, "so2": 0.7}).venous_row[0] == 2


def test_previous_is_the_stays_last_arterial_sample():
    table = snapshots(
        {"minute": 5},
        {"minute": 1},
        {"minute": 3, "site": NONE},
        {"minute": 0, "stay": 2},
        {"minute": 4, "site": MIXED},
    )
    assert table.previous.tolist() == [1, -1, -1, -1, -1]


def test_limits_are_the_sites_own():
    table = align(readings({"minute": -90, "site": NONE, "hb": 9.0}, {}), CarryLimits(hb=1.0))
    assert np.isnan(table["hb"][1])


@pytest.mark.parametrize("n", [0, 1])
def test_empty_and_single_tables(n):
    table = align(Readings.build([1] * n, [0.0] * n, [1] * n, {"hb": [9.0] * n}))
    assert len(table) == n
    assert [len(table[name]) for name in MEASURED] == [n] * len(MEASURED)
    assert [len(table.venous[name]) for name in VENOUS] == [n] * len(VENOUS)
    assert table.previous.tolist() == [-1] * n


# ---- against a slow account of the same rules, written row by row ----

LIMITS = {"hb": (12, 0), "fio2": (6, 0), "temperature": (4, 0), "spo2": (1 / 6, 1 / 6), "cohb": (4, 0)}
VALUES = ("hb", "fio2", "temperature", "spo2", "cohb", "cardiac_output", "so2")


@st.composite
def tables(draw):
    n = draw(st.integers(2, 14))
    rows = []
    for _ in range(n):
        row = {
            "stay": draw(st.integers(1, 2)),
            "minute": 5 * draw(st.integers(0, 60)),
            "site": draw(st.sampled_from([NONE, Site.ARTERIAL, Site.ARTERIAL, MIXED, CENTRAL])),
            "event": draw(st.sampled_from([0, 0, 0, 0, Event.BLEED, Event.DEVICE_CHANGE])),
        }
        row |= {name: draw(st.integers(1, 90)) / 100 for name in VALUES if draw(st.booleans())}
        rows.append(row)
    return rows


def slow(rows, i, name):
    """The value by the rules, one row at a time; None when two entries of one time would both do."""
    me = rows[i]
    if name in me:
        return me[name]
    before, after = LIMITS[name]
    fit = []
    for row in rows:
        age = (me["minute"] - row["minute"]) / 60
        if name not in row or row["stay"] != me["stay"] or not -after - 1e-9 <= age <= before + 1e-9:
            continue
        between = [
            e["event"] for e in rows
            if e["stay"] == me["stay"] and row["minute"] <= e["minute"] <= me["minute"] and e["event"]
            and (name == "hb" or e["minute"] > row["minute"])
        ]  # fmt: skip
        if name == "hb" and Event.BLEED in between and age > 0:
            continue
        if name == "fio2" and Event.DEVICE_CHANGE in between:
            continue
        fit.append((abs(age), age < 0, row[name]))
    if not fit:
        return np.nan
    best = min(fit)[:2]
    choices = {value for *rank, value in fit if tuple(rank) == best}
    return choices.pop() if len(choices) == 1 else None


@given(tables())
@settings(max_examples=150, deadline=None)
def test_every_carried_value_is_what_the_rules_say_row_by_row(rows):
    table = snapshots(*rows)
    for name in LIMITS:
        for i in range(len(rows)):
            expected = slow(rows, i, name)
            if expected is not None:
                assert np.array_equal(table[name][i], expected, equal_nan=True), (name, i)


@given(tables(), st.randoms(use_true_random=False))
@settings(max_examples=150, deadline=None)
def test_the_order_of_rows_does_not_matter(rows, random):
    shuffled = list(range(len(rows)))
    random.shuffle(shuffled)
    one, other = snapshots(*rows), snapshots(*(rows[i] for i in shuffled))
    for name in MEASURED:
        assert np.array_equal(one[name][shuffled], other[name], equal_nan=True), name
        assert np.array_equal(one.age[name][shuffled], other.age[name], equal_nan=True), name
    for name in VENOUS:
        assert np.array_equal(one.venous[name][shuffled], other.venous[name], equal_nan=True), name


@given(tables())
@settings(max_examples=80, deadline=None)
def test_stays_do_not_touch_each_other(rows):
    whole = snapshots(*rows)
    for stay in (1, 2):
        mine = [i for i, row in enumerate(rows) if row["stay"] == stay]
        if mine:
            alone = snapshots(*(rows[i] for i in mine))
            for name in MEASURED:
                assert np.array_equal(whole[name][mine], alone[name], equal_nan=True), name


@given(tables())
@settings(max_examples=80, deadline=None)
def test_source_age_and_value_agree(rows):
    table = snapshots(*rows)
    time = table.readings.time
    for name in MEASURED:
        source = table.source[name]
        there = source >= 0
        assert np.array_equal(there, ~np.isnan(table[name]))
        assert np.array_equal(table[name][there], table.readings[name][source[there]])
        assert np.array_equal(table.age[name][there], (time - time[source])[there])
