"""The change ledger: exact, additive, reversible, safe; against brute force, another split, and Monte Carlo."""

import itertools
import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.oxygen.change_world import checks, crowd, derived, printed_rounding, random_factors, table
from worksheet.oxygen import ledger
from worksheet.oxygen.constants import DEFAULT, Constants
from worksheet.oxygen.curve import co_share, displacement, saturation_with_co
from worksheet.oxygen.ledger import STEPS, Level, Note
from worksheet.oxygen.readings import Event, FlowMethod, Site
from worksheet.oxygen.shapley import Factors, split

TERMS = {
    "PaO2 -> S": "po2", "dysHb (capacity)": "active", "residual (measured-model)": "residual", "shift COHb": "cohb",
    "shift pCO2": "pco2", "shift pH": "ph", "shift T": "temperature", "shift MetHb": "methb", "Hb": "hb",
    "flow": "flow", "dissolved": "dissolved",
}  # fmt: skip
CASES = [row for row in checks("attribute_do2") if row[0] == "attribute_do2" and row[1]["component"] in TERMS]


def ends_of(inputs):
    return (
        Factors.of([e["Q"]], e["Hb"], 1 - e["FCO"] - e["FMet"], e["S"], e["PaO2"], e["pH"], e["pCO2"], e["FCO"],
                   e["FMet"], e["T"])
        for e in (inputs["A"], inputs["B"])
    )  # fmt: skip


@pytest.mark.parametrize(
    ("quantity", "inputs", "printed"), CASES, ids=lambda v: v["case"] if isinstance(v, dict) else ""
)
def test_second_implementation(quantity, inputs, printed):
    """Five clinical cases computed by an independent implementation (bleed, ARDS, CO, MetHb, rewarming)."""
    found = split(*ends_of(inputs), DEFAULT)
    tolerance = max(printed_rounding(printed), 1e-4)
    assert found.terms[TERMS[inputs["component"]]][0] == pytest.approx(float(printed), abs=tolerance)


@pytest.mark.parametrize(("quantity", "inputs", "printed"), checks("attribute_do2_total"))
def test_second_implementation_total(quantity, inputs, printed):
    case = next(row[1] for row in CASES if row[1]["case"] == inputs["case"])
    assert split(*ends_of(case), DEFAULT).total[0] == pytest.approx(float(printed), abs=printed_rounding(printed))


def brute_force(start, end):
    """Average over all orderings that keep the inputs of the saturation together (Owen 1977), one pair at a time."""
    curve_inputs = ("po2", "ph", "pco2", "methb", "cohb", "residual")
    value = {side: {k: float(v[0]) for k, v in vars(one).items()} for side, one in ((0, start), (1, end))}

    def curve(now):
        at = {name: value[now[name]][name] for name in curve_inputs[:5]}
        a = displacement(at["ph"], at["pco2"], at["methb"])
        return float(saturation_with_co(at["po2"], a, 37.0, co_share(at["cohb"], at["methb"])))

    whole = {side: curve(dict.fromkeys(curve_inputs, side)) for side in (0, 1)}
    residual = {side: value[side]["saturation"] - whole[side] for side in (0, 1)}

    def supply(now):
        bound = curve(now) + residual[now["residual"]]
        flow, hb, active = (value[now[name]][name] for name in ("flow", "hb", "active"))
        return 10 * flow * (1.39 * hb * active * bound)

    cache: dict = {}
    total = dict.fromkeys(("flow", "hb", "active", *curve_inputs), 0.0)
    orders = 0
    for outer in itertools.permutations(("flow", "hb", "active", "saturation")):
        for inner in itertools.permutations(curve_inputs):
            sequence = [x for one in outer for x in (inner if one == "saturation" else (one,))]
            now = dict.fromkeys(total, 0)
            before = cache.setdefault(tuple(now.values()), None) or supply(now)
            cache[tuple(now.values())] = before
            for name in sequence:
                now[name] = 1
                key = tuple(now.values())
                if cache.get(key) is None:
                    cache[key] = supply(now)
                total[name] += cache[key] - before
                before = cache[key]
            orders += 1
    return {name: part / orders for name, part in total.items()}


@pytest.mark.parametrize("seed", range(3))
def test_equals_average_over_all_orderings(seed):
    random = np.random.default_rng(seed)
    start, end = random_factors(random, 1), random_factors(random, 1)
    found, by_hand = split(start, end, DEFAULT).terms, brute_force(start, end)
    dissolved_by_flow = 10 * 0.0031 * (end.flow - start.flow)[0] * (start.po2 + end.po2)[0] / 2
    by_hand["flow"] += dissolved_by_flow
    size = abs(split(start, end, DEFAULT).total[0]) + 1.0
    for name, part in by_hand.items():
        assert found[name][0] == pytest.approx(part, abs=1e-9 * size), name


numbers = st.integers(0, 2**32 - 1)


@given(numbers)
@settings(max_examples=60, deadline=None)
def test_adds_up(seed):
    random = np.random.default_rng(seed)
    start, end = random_factors(random, 20), random_factors(random, 20)
    found = split(start, end, DEFAULT)
    change = end.supply(DEFAULT) - start.supply(DEFAULT)
    scale = np.maximum(np.abs(start.supply(DEFAULT)), np.abs(end.supply(DEFAULT)))
    assert np.all(np.abs(sum(found.terms.values()) - change) <= 1e-9 * scale)
    assert np.all(np.abs(found.total - change) <= 1e-9 * scale)


@given(numbers)
@settings(max_examples=40, deadline=None)
def test_reverses_sign_with_its_ends(seed):
    random = np.random.default_rng(seed)
    start, end = random_factors(random, 20), random_factors(random, 20)
    there, back = split(start, end, DEFAULT), split(end, start, DEFAULT)
    for name, part in there.terms.items():
        np.testing.assert_allclose(part, -back.terms[name], atol=1e-9, err_msg=name)


@given(numbers)
@settings(max_examples=40, deadline=None)
def test_sign_of_log_mean_divisia(seed):
    """Ang 2004, Energy Policy 32:1131: never a different sign from the log-mean split of the bound term."""
    random = np.random.default_rng(seed)
    start, end = random_factors(random, 200, cohb=False), random_factors(random, 200, cohb=False)
    found = split(start, end, DEFAULT)
    saturation = sum(found.saturation_parts.values())
    np.testing.assert_allclose(saturation, end.saturation - start.saturation, atol=1e-12)
    low, high = start.flow * start.hb * start.active * start.saturation, end.flow * end.hb * end.active * end.saturation
    mean = np.where(np.isclose(low, high), low, (high - low) / np.where(np.isclose(low, high), 1.0, np.log(high / low)))
    parts = {"hb": found.terms["hb"], "active": found.terms["active"]}
    for name, part in parts.items():
        other = mean * np.log(getattr(end, name) / getattr(start, name))
        assert np.all(np.sign(part) == np.sign(other)), name


def test_log_mean_value():
    """The log-mean split itself, against the independent implementation (factor 3 of a product of four)."""
    (_, inputs, printed) = checks("lmdi_product4")[0]
    x0, x1, i = np.array(inputs["x0"]), np.array(inputs["x1"]), inputs["i"]
    a, b = x0.prod(), x1.prod()
    assert (b - a) / math.log(b / a) * math.log(x1[i] / x0[i]) == pytest.approx(float(printed), rel=1e-5)


@pytest.mark.parametrize("name", ["flow", "hb", "active", "saturation", "po2"])
def test_zero_is_safe(name):
    start, end = (random_factors(np.random.default_rng(s), 5) for s in (1, 2))
    start = replace(start, **{name: np.zeros(5)})
    for a, b in ((start, end), (end, start), (start, start)):
        found = split(a, b, DEFAULT)
        assert np.all(np.isfinite(list(found.terms.values())))
        np.testing.assert_allclose(found.total, b.supply(DEFAULT) - a.supply(DEFAULT), rtol=1e-9, atol=1e-9)


def test_nothing_leaks_from_the_curve_into_flow_and_haemoglobin():
    """Nested: the part of flow, Hb and active share does not depend on the curve model."""
    start, end = (random_factors(np.random.default_rng(s), 50) for s in (3, 4))
    one, other = (split(start, end, replace(DEFAULT, curve=curve)) for curve in ("tanh", "severinghaus"))
    for name in ("flow", "hb", "active"):
        np.testing.assert_allclose(one.terms[name], other.terms[name], rtol=1e-12)
    np.testing.assert_allclose(one.total, other.total, rtol=1e-9)


def test_levels_and_units():
    rows = [{}, {"height": None}, {"cardiac_output": None}, {"hb": None, "event": Event.BLEED}]
    snapshots, found = derived(table(*(dict(row, stay=k) for k, row in enumerate(rows) for _ in (0, 1))))
    made = ledger.consecutive(snapshots, found, DEFAULT)
    assert made.unit[1::2] == ("mL/min/m2", "mL/min", "mL/dL", "")
    assert list(made.level[1::2]) == [Level.DO2I, Level.DO2, Level.CAO2, Level.NONE]
    assert np.all(made.start_row[0::2] == -1)
    assert np.isnan(made.total[7])
    assert made.notes[5] & Note.FLOW_MISSING
    assert made.flow[5] == 0.0


def test_total_is_the_change_of_what_was_derived():
    snapshots, found = derived(crowd())
    made = ledger.consecutive(snapshots, found, DEFAULT)
    there = made.level == Level.DO2I
    change = found["do2i"][made.end_row[there]] - found["do2i"][made.start_row[there]]
    np.testing.assert_allclose(made.total[there], change, rtol=1e-9, atol=1e-9)
    steps = sum(made.step(name) for name in STEPS)
    np.testing.assert_allclose(steps[there], change, rtol=1e-9, atol=1e-9)


def test_carried_value_contributes_nothing_and_is_marked():
    snapshots, found = derived(
        table({"hb": None}, {"hb": None}, {"site": Site.NONE, "time": -0.1, "hb": 9.0, "cardiac_output": None})
    )
    made = ledger.consecutive(snapshots, found, DEFAULT)
    assert made.haemoglobin[1] == 0.0
    assert made.notes[1] & Note.HB_NOT_REMEASURED
    # its value may have moved meanwhile: not certain, but less uncertain than two separate measurements
    assert 0.0 < made.sd["haemoglobin"][1] < 0.03 * made.start_supply[1]


def test_dyshaemoglobins_known_at_one_end_are_used_at_both():
    snapshots, found = derived(
        table({"cohb": None, "methb": None}, {"time": 1.0, "cohb": 0.15}, {"time": 9.0, "cohb": None, "methb": None})
    )
    made = ledger.consecutive(snapshots, found, DEFAULT)
    for row in (1, 2):
        assert made.notes[row] & Note.DYSHAEMOGLOBINS_NOT_REMEASURED
        assert made.parts["active"][row] == 0.0
    assert made.start_supply[1] == pytest.approx(made.end_supply[1])


def test_po2_missing_counts_saturation_for_the_lung():
    snapshots, found = derived(table({}, {"po2": None, "so2": 0.80}))
    made = ledger.consecutive(snapshots, found, DEFAULT)
    assert made.notes[1] & Note.PO2_MISSING
    assert made.lung[1] == pytest.approx(made.total[1])
    assert made.lung[1] / made.start_supply[1] == pytest.approx(0.80 / 0.965 - 1.0, abs=1e-9)


def test_calculated_saturation_has_no_residual():
    snapshots, found = derived(table({"so2": None}, {"so2": None, "po2": 55.0}))
    made = ledger.consecutive(snapshots, found, DEFAULT)
    assert made.residual[1] == 0.0
    assert made.notes[1] & Note.SATURATION_CALCULATED
    assert made.lung[1] == pytest.approx(made.total[1])


def test_windows_add_up():
    snapshots, found = derived(crowd())
    each = ledger.consecutive(snapshots, found, DEFAULT)
    stays, start, end = ledger.window_ends(snapshots, found)
    whole = ledger.window(snapshots, found, start, end, DEFAULT)
    for name in (*STEPS, "total", "residual"):
        by_stay = [np.nansum(getattr(each, name)[snapshots.readings.stay == stay]) for stay in stays]
        np.testing.assert_allclose(getattr(whole, name), by_stay, rtol=1e-9, atol=1e-9)
    np.testing.assert_allclose(whole.total, found["do2i"][end] - found["do2i"][start], rtol=1e-9, atol=1e-9)


def test_window_passes_over_rows_that_know_less():
    """A slip without co-oximetry or flow between two full ones must not swallow what changed meanwhile."""
    poor = {"time": 8.0, "cohb": None, "methb": None, "so2": None, "cardiac_output": None}
    snapshots, found = derived(table({}, poor, {"time": 16.0, "cohb": 0.25, "so2": 0.97, "cardiac_output": 5.0}))
    _, start, end = ledger.window_ends(snapshots, found)
    whole = ledger.window(snapshots, found, start, end, DEFAULT)
    assert whole.level[0] == Level.DO2I
    assert whole.total[0] == pytest.approx(found["do2i"][2] - found["do2i"][0])
    assert whole.function[0] < -0.15 * whole.start_supply[0]


def test_window_ends():
    snapshots, found = derived(table({}, {}, {}, {}, {"stay": 2}))
    _, start, end = ledger.window_ends(snapshots, found, since=5.0, until=9.0)
    assert (list(start), list(end)) == ([1, -1], [2, -1])
    _, start, end = ledger.window_ends(snapshots, found, since=5.0, before=0.5)
    assert (start[0], end[0]) == (2, 3)
    _, start, end = ledger.window_ends(snapshots, found, since=20.0)
    assert start[0] == -1


def test_extractable_ledger_shows_what_function_costs():
    """COHb 30 %: the share of content lost is that of capacity; of what can be unloaded, more (left shift)."""
    snapshots, found = derived(table({}, {"cohb": 0.30, "so2": 0.97}))
    content = ledger.between(snapshots, found, np.array([0]), np.array([1]), DEFAULT)
    unload = ledger.extractable(snapshots, found, np.array([0]), np.array([1]), DEFAULT)
    assert unload.function[0] / unload.start_supply[0] < content.function[0] / content.start_supply[0] - 0.05
    flow = 10 * found["do2i"] / (10 * found["cao2"])
    assert unload.total[0] == pytest.approx(np.diff(found["extractable_o2"] * flow)[0])
    assert sum(unload.step(name)[0] for name in STEPS) == pytest.approx(unload.total[0])


@pytest.mark.parametrize("constants", [Constants(curve="severinghaus"), Constants(hufner=1.36, bsa_formula="dubois")])
def test_site_choices_add_up(constants):
    snapshots, found = derived(crowd(stays=10), constants)
    made = ledger.consecutive(snapshots, found, constants)
    there = made.level == Level.DO2I
    change = found["do2i"][made.end_row[there]] - found["do2i"][made.start_row[there]]
    np.testing.assert_allclose(sum(made.step(n)[there] for n in STEPS), change, rtol=1e-9, atol=1e-9)


def test_empty_tables():
    snapshots, found = derived(table({}).take(np.zeros(0, dtype=np.int64)))
    assert len(ledger.consecutive(snapshots, found, DEFAULT)) == 0
    snapshots, found = derived(table({"site": Site.NONE}))
    assert np.all(ledger.consecutive(snapshots, found, DEFAULT).level == 0)
    _, start, end = ledger.window_ends(snapshots, found)
    assert (list(start), list(end)) == ([-1], [-1])
    assert np.isnan(ledger.window(snapshots, found, start, end, DEFAULT).total[0])


PAIRS = {
    "typical": ({}, {"hb": 8.5, "po2": 70.0, "so2": 0.935, "cardiac_output": 5.2}),
    "hypoxia": ({}, {"po2": 48.0, "so2": 0.83, "ph": 7.30}),
    "co-oximetry only": ({"o2hb": 0.95, "so2": None}, {"o2hb": 0.70, "so2": None, "cohb": 0.22}),
    "calculated": ({"so2": None}, {"so2": None, "po2": 60.0, "pco2": 55.0, "ph": 7.28}),
    "other flow method": ({}, {"method": FlowMethod.ULTRASOUND, "cardiac_output": 4.5}),
}


@pytest.mark.parametrize("name", PAIRS)
def test_step_uncertainty_against_monte_carlo(name):
    """First order within 6 % (and the noise of 6,000 draws) of drawing every input, shared parts drawn once."""
    n, random = 6000, np.random.default_rng(5)
    first, last = PAIRS[name]
    snapshots, found = derived(table(first, last))
    expected = ledger.between(snapshots, found, np.array([0]), np.array([1]), DEFAULT)
    drawn_snapshots, drawn = derived(drawn_pairs(table(first, last), n, random))
    rows = np.arange(0, 2 * n, 2)
    made = ledger.between(drawn_snapshots, drawn, rows, rows + 1, DEFAULT)
    for step in (*STEPS, "total"):
        got, want = np.nanstd(getattr(made, step)), expected.sd[step][0]
        assert want == pytest.approx(got, rel=0.06, abs=0.25), step


def drawn_pairs(pair, n, random):
    """Each of n stays holds the pair with its own errors: random ones for each row, systematic ones for both."""
    from worksheet.oxygen.measurement import DEFAULT as SETTINGS
    from worksheet.oxygen.readings import Readings

    values = {}
    same_method = pair.flow_method[0] == pair.flow_method[1]
    for name, column in pair.values.items():
        if name == "cardiac_output":
            table_sd = np.array([SETTINGS.flow.get(int(m), SETTINGS.flow_other) for m in pair.flow_method])
            scatter, fixed = table_sd[:, 0] * column, table_sd[:, 1] * column
        else:
            share, sd = SETTINGS.random.get(name, 1.0), SETTINGS.sd(name, column)
            scatter, fixed = share * sd, math.sqrt(1 - share**2) * sd
        own = random.standard_normal((n, 2))
        common = random.standard_normal((n, 1)) * np.ones(2)
        if name == "cardiac_output" and not same_method:
            common = random.standard_normal((n, 2))
        if name in ("height", "weight"):
            own, common = np.zeros((n, 2)), common * sd / np.where(fixed > 0, fixed, 1.0)
            scatter, fixed = 0 * sd, np.where(fixed > 0, fixed, 1.0)
            common = random.standard_normal((n, 1)) * np.ones(2) * sd
            fixed = 1.0
        drawn = column + scatter * own + fixed * common
        if name in ("so2", "o2hb"):
            drawn = np.minimum(drawn, 1.0)
        values[name] = drawn.ravel()
    if np.isnan(pair["so2"]).all() and np.isnan(pair["o2hb"]).all():
        values["ph"] = values["ph"] + np.repeat(random.standard_normal(n) * SETTINGS.curve / 0.88, 2)
    return Readings.build(
        np.repeat(np.arange(n), 2), np.tile(pair.time, n), np.tile(pair.site, n), values,
        flow_method=np.tile(pair.flow_method, n),
    )  # fmt: skip
