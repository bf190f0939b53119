"""The ledger at its edges: which rows, which level, which window; found by mutation testing."""

from dataclasses import replace

import numpy as np
import pytest

from tests.oxygen.change_world import derived, random_factors, table
from worksheet.oxygen import ledger
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.ledger import Level, Note
from worksheet.oxygen.measurement import DEFAULT as SETTINGS
from worksheet.oxygen.readings import Site
from worksheet.oxygen.shapley import split


def pair(*rows):
    snapshots, found = derived(table(*rows))
    return snapshots, found


def compared(snapshots, found, start, end, **more):
    return ledger.between(snapshots, found, np.array(start), np.array(end), DEFAULT, **more)


def test_highest_level_can_be_held_down():
    world = pair({}, {"hb": 8.0})
    for level in (Level.CAO2, Level.DO2, Level.DO2I):
        for made in (ledger.between, ledger.extractable):
            found = made(*world, np.array([0]), np.array([1]), DEFAULT, level=np.array([level]))
            assert found.level[0] == level
    content = compared(*world, [0], [1], level=np.array([Level.CAO2]))
    assert content.total[0] == pytest.approx(np.diff(world[1]["cao2"])[0])
    assert content.unit == ("mL/dL",)
    assert compared(*world, [0], [1], level=np.array([Level.NONE])).level[0] == Level.NONE
    assert compared(*world, [0], [1]).level.dtype == np.int8


def test_levels_asked_for_one_by_one():
    world = pair({}, {"hb": 8.0}, {"hb": 7.0})
    found = compared(*world, [0, 1], [1, 2], level=np.array([Level.CAO2, Level.DO2I]))
    assert list(found.level) == [Level.CAO2, Level.DO2I]
    assert found.total[0] == pytest.approx(world[1]["cao2"][1] - world[1]["cao2"][0])
    assert found.total[1] == pytest.approx(world[1]["do2i"][2] - world[1]["do2i"][1])


@pytest.mark.parametrize(("start", "end"), [(-1, 1), (1, -1), (-1, -1), (-1, 0), (0, -1)])
def test_a_row_that_is_not_there_gives_nothing(start, end):
    found = compared(*pair({}, {"hb": 8.0}), [start], [end])
    assert found.level[0] == Level.NONE
    assert (found.start_row[0], found.end_row[0]) == (-1, -1)
    assert np.isnan(found.total[0])
    assert found.notes[0] == 0


def test_ends_may_be_in_any_order_and_the_first_row_may_be_the_last():
    world = pair({}, {"hb": 8.0})
    there, back = compared(*world, [0], [1]), compared(*world, [1], [0])
    assert back.total[0] == pytest.approx(-there.total[0])
    assert (back.start_row[0], back.end_row[0]) == (1, 0)
    assert (there.start_row[0], there.end_row[0]) == (0, 1)
    assert there.start_supply[0] == pytest.approx(world[1]["do2i"][0])
    assert there.end_supply[0] == pytest.approx(world[1]["do2i"][1])


@pytest.mark.parametrize("without", [{"cardiac_output": None, "time": 30.0}, {"cardiac_output": None, "time": 40.0}])
def test_flow_known_at_one_end_only_leaves_content(without):
    world = pair({}, without)
    for rows in ((0, 1), (1, 0)):
        found = compared(*world, [rows[0]], [rows[1]])
        assert found.level[0] == Level.CAO2
        assert found.notes[0] & Note.FLOW_MISSING
        assert found.start_row[0] == rows[0]
        assert found.end_row[0] == rows[1]


def test_rows_may_be_given_as_plain_numbers():
    world = pair({}, {"hb": 8.0})
    found = ledger.between(*world, [0.0], [1.0], DEFAULT)
    assert found.total[0] == pytest.approx(np.diff(world[1]["do2i"])[0])
    assert found.start_row.dtype == np.int64
    assert found.end_row.dtype == np.int64


def test_saturation_counts_wholly_for_the_lung_without_a_pressure():
    found = compared(*pair({}, {"po2": None, "so2": 0.80}), [0], [1])
    assert found.residual[0] == 0.0
    assert found.function[0] == pytest.approx(0.0, abs=1e-12)
    assert found.parts["po2"][0] == pytest.approx(found.total[0])
    assert found.sd["lung"][0] == pytest.approx(found.sd["saturation"][0])
    seen = compared(*pair({}, {"po2": 48.0, "so2": 0.80}), [0], [1])
    assert seen.residual[0] != 0.0
    assert seen.sd["lung"][0] != pytest.approx(seen.sd["saturation"][0])
    assert set(found.sd) == set(seen.sd)
    assert set(found.sd) >= {"lung", "haemoglobin", "function", "flow", "total", "residual", "shift", "saturation"}


def test_uncertainties_in_force_are_the_ones_used():
    world = pair({}, {"hb": 8.0})
    coarse = replace(SETTINGS, quantities={**SETTINGS.quantities, "hb": (0.0, 0.08)})
    usual = ledger.consecutive(*world, DEFAULT).sd["haemoglobin"][1]
    assert ledger.consecutive(*world, DEFAULT, coarse).sd["haemoglobin"][1] > 2 * usual
    assert compared(*world, [0], [1], settings=coarse).sd["haemoglobin"][0] > 2 * usual


def ends(world, **window):
    stays, start, end = ledger.window_ends(*world, **window)
    return list(zip(stays.tolist(), start.tolist(), end.tolist(), strict=True))


FIVE = tuple({"time": 4.0 * n} for n in range(5))


@pytest.mark.parametrize(
    ("window", "start", "end"),
    [
        ({}, 0, 4),
        ({"since": 4.0}, 1, 4),  # at since
        ({"since": 4.0, "until": 12.0}, 1, 3),  # at until
        ({"since": 3.9}, 0, 4),  # the last one before
        ({"since": 3.9, "until": 11.9}, 0, 2),
        ({"since": 7.9, "before": 3.9}, 1, 4),  # just as old as allowed
        ({"since": 7.9, "before": 3.8}, 2, 4),  # too old: the first one after
        ({"since": 3.9, "before": 3.8}, 1, 4),
        ({"since": 0.0}, 0, 4),
        ({"since": -1.0}, 0, 4),
        ({"since": 14.0}, 3, 4),
        ({"since": 16.0}, -1, -1),
        ({"since": 22.0}, -1, -1),
        ({"until": 4.0}, 0, 1),
        ({"until": 3.9}, -1, -1),
        ({"until": -1.0}, -1, -1),
        ({"since": 12.0, "until": 4.0}, -1, -1),
    ],
)
def test_ends_of_a_window(window, start, end):
    world = pair(*FIVE)
    assert ends(world, **window) == [(1, start, end)]
    # beside other stays, one before and one after it in the table
    around = pair(
        *({"stay": 0, "time": 100.0 + n} for n in range(3)), *FIVE, *({"stay": 7, "time": -90.0 + n} for n in (0, 1))
    )
    found = {stay: (a, b) for stay, a, b in ends(around, **window)}
    assert found[1] == ((start + 3, end + 3) if start >= 0 else (-1, -1))


def test_how_old_the_start_may_be_unless_said():
    world = pair({"time": 0.0}, {"time": 20.0}, {"time": 30.0})
    assert ends(world, since=6.0) == [(1, 0, 2)]
    assert ends(world, since=6.1) == [(1, 1, 2)]


def test_each_stay_has_its_own_window():
    world = pair(*({"stay": stay, "time": 4.0 * n} for stay in (3, 5) for n in range(4)))
    assert ends(world, since=np.array([4.0, 8.0]), until=np.array([8.0, 12.0])) == [(3, 1, 2), (5, 6, 7)]
    assert ends(world, since=4, until=12) == [(3, 1, 3), (5, 5, 7)]


def test_only_rows_that_may_be_ends_are():
    world = pair(*FIVE)
    allowed = np.array([False, True, True, False, True])
    assert ends(world, rows=allowed) == [(1, 1, 4)]
    assert ends(world, rows=allowed, since=9.0, until=20.0) == [(1, 2, 4)]
    assert ends(world, rows=np.zeros(5, dtype=bool)) == [(1, -1, -1)]
    assert ends(world, rows=np.array([True, False, False, False, False])) == [(1, -1, -1)]


def test_rows_without_content_and_venous_rows_are_no_ends():
    venous = {"site": Site.MIXED_VENOUS, "po2": 38.0, "so2": 0.70, "ph": 7.36, "pco2": 45.0}
    world = pair(
        {"hb": None, "time": 0.0}, {"time": 4.0}, {**venous, "time": 4.1}, {"time": 8.0}, {**venous, "time": 8.1}
    )
    assert ends(world) == [(1, 1, 3)]


def test_a_stay_without_a_usable_row_beside_one_with():
    world = pair({"stay": 1, "hb": None}, {"stay": 2}, {"stay": 2}, {"stay": 3, "hb": None})
    assert ends(world) == [(1, -1, -1), (2, 1, 2), (3, -1, -1)]


LACKING = {
    "flow": {"cardiac_output": None, "time": 30.0},
    "dyshaemoglobins": {"cohb": None, "methb": None, "time": 30.0},
    "saturation": {"so2": None},
    "pressure": {"po2": None},
    "ph": {"ph": None},
    "pco2": {"pco2": None},
}


@pytest.mark.parametrize("what", LACKING)
def test_a_row_that_knows_less_than_both_ends_is_passed_over(what):
    full, later = {"time": 0.0}, {"time": 60.0, "hb": 8.0, "cardiac_output": 5.0, "po2": 70.0, "so2": 0.93, "ph": 7.3}
    poor = {"time": 30.0, **LACKING[what]}
    world = pair(full, poor, later)
    each = ledger.intervals(*world, 0, 2, DEFAULT)
    assert list(zip(each.start_row.tolist(), each.end_row.tolist(), strict=True)) == [(0, 2)]
    whole = ledger.window(*world, np.array([0]), np.array([2]), DEFAULT)
    direct = compared(*world, [0], [2])
    for name in (*ledger.STEPS, "total", "residual"):
        assert getattr(whole, name)[0] == pytest.approx(getattr(direct, name)[0], abs=1e-9)
    for name, part in direct.parts.items():
        assert whole.parts[name][0] == pytest.approx(part[0], abs=1e-9)


@pytest.mark.parametrize("what", [name for name in LACKING if name != "flow"])
@pytest.mark.parametrize("poor_end", [0, 2])
def test_a_row_that_knows_as_much_as_the_poorer_end_is_not(what, poor_end):
    rows = [{"time": 0.0}, {"time": 30.0, "hb": 9.0}, {"time": 60.0, "hb": 8.0}]
    for row in {1, poor_end}:
        rows[row] = {**rows[row], **LACKING[what], "time": rows[row]["time"]}
    each = ledger.intervals(*pair(*rows), 0, 2, DEFAULT)
    assert list(zip(each.start_row.tolist(), each.end_row.tolist(), strict=True)) == [(0, 1), (1, 2)]


def test_windows_of_several_stays_keep_to_themselves():
    rows = [{"stay": stay, "time": 4.0 * n, "hb": 10.0 - n - stay} for stay in (1, 2, 3) for n in range(3)]
    world = pair(*rows)
    whole = ledger.window(*world, np.array([0, -1, 6]), np.array([2, -1, 7]), DEFAULT)
    assert list(whole.level) == [Level.DO2I, Level.NONE, Level.DO2I]
    change = world[1]["do2i"]
    assert whole.total[0] == pytest.approx(change[2] - change[0])
    assert np.isnan(whole.total[1])
    assert np.isnan(whole.lung[1])
    assert whole.total[2] == pytest.approx(change[7] - change[6])
    assert whole.haemoglobin[2] == pytest.approx(whole.total[2])


def test_a_window_can_be_of_what_can_be_unloaded():
    world = pair({}, {"cohb": 0.15}, {"cohb": 0.30, "so2": 0.97})
    unload = ledger.window(*world, np.array([0]), np.array([2]), DEFAULT, unloading=True)
    content = ledger.window(*world, np.array([0]), np.array([2]), DEFAULT)
    assert unload.function[0] / unload.start_supply[0] < content.function[0] / content.start_supply[0] - 0.05
    assert sum(unload.step(name)[0] for name in ledger.STEPS) == pytest.approx(unload.total[0])


def test_uncertainties_reach_the_window():
    world = pair({}, {"hb": 9.0}, {"hb": 8.0})
    coarse = replace(SETTINGS, quantities={**SETTINGS.quantities, "hb": (0.0, 0.08)})
    rows = np.array([0]), np.array([2])
    usual = ledger.window(*world, *rows, DEFAULT).sd["haemoglobin"][0]
    assert ledger.window(*world, *rows, DEFAULT, coarse).sd["haemoglobin"][0] > 2 * usual
    assert ledger.intervals(*world, 0, 2, DEFAULT, coarse).sd["haemoglobin"][0] > 1.5 * usual


def two_ends():
    random = np.random.default_rng(11)
    return random_factors(random, 3), random_factors(random, 3)


def test_outside_the_curves_domain_saturation_counts_for_pressure_as_a_whole():
    start, end = two_ends()
    usual = split(start, end, DEFAULT)
    lost = replace(end, pco2=np.array([end.pco2[0], 0.0, end.pco2[2]]))  # no displacement at a PCO2 of 0
    found = split(start, lost, DEFAULT)
    for name, part in found.terms.items():
        np.testing.assert_allclose(np.delete(part, 1), np.delete(usual.terms[name], 1), atol=1e-9, err_msg=name)
        assert np.isfinite(part[1]), name
    for name in found.slopes:
        np.testing.assert_allclose(np.delete(found.slopes[name], 1), np.delete(usual.slopes[name], 1), atol=1e-9)
        assert found.slopes[name][1] == 0.0, name
    change = end.saturation[1] - start.saturation[1]
    parts = {name: part[1] for name, part in found.saturation_parts.items()}
    assert parts.pop("po2") == pytest.approx(change, abs=1e-12)
    assert all(abs(part) < 1e-12 for part in parts.values())
    np.testing.assert_allclose(found.total, lost.supply(DEFAULT) - start.supply(DEFAULT), rtol=1e-9)


@pytest.mark.parametrize(
    ("first", "last", "kept"), [(True, True, 1), (True, False, 1), (False, True, 1), (False, False, 0)]
)
def test_residual_needs_a_measured_saturation_at_either_end(first, last, kept):
    start, end = two_ends()
    whole = split(start, end, DEFAULT).saturation_parts["residual"]
    start, end = replace(start, measured=np.full(3, first)), replace(end, measured=np.full(3, last))
    np.testing.assert_array_equal(split(start, end, DEFAULT).saturation_parts["residual"], kept * whole)


def test_what_stays_behind_is_taken_from_both_terms():
    start, end = two_ends()
    start = replace(start, bound=np.full(3, 0.2), held=np.full(3, 20.0))
    end = replace(end, bound=np.full(3, 0.3), held=np.full(3, 38.0))
    found = split(start, end, DEFAULT)
    np.testing.assert_allclose(found.total, end.supply(DEFAULT) - start.supply(DEFAULT), rtol=1e-9)
    np.testing.assert_allclose(found.saturation_parts["unloading"], -0.1, atol=1e-12)
    np.testing.assert_allclose(
        sum(found.saturation_parts.values()), (end.saturation - 0.3) - (start.saturation - 0.2), atol=1e-12
    )
