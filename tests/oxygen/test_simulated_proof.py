"""Proof by simulation: 2,000 courses with known causes, one pass, and what the worksheet says of each.

What counts as reported for a course is the ``limiting_step`` of its review window, from its first to its last arterial
gas. The courses come from a physiology of their own (worksheet.ward.simulated), which imports nothing from the
worksheet's. ``WORKSHEET_CONFUSION=FILE.md`` writes the table.
"""

import ast
import os
from pathlib import Path

import numpy as np
import pytest

from worksheet.oxygen import align, derive, judgement, uncertainty
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.ledger import STEPS
from worksheet.oxygen.quantities import CATALOGUE
from worksheet.oxygen.readings import FlowMethod, Readings, Site
from worksheet.ward import simulated, simulated_body, simulated_chart

N, SEED = 2000, 20
SITES = {"": Site.NONE, "arterial": Site.ARTERIAL, "central_venous": Site.CENTRAL_VENOUS}
METHODS = {"": 0, **{name: FlowMethod[name.upper()] for name in simulated.METHODS}}


def readings_of(charted):
    values = {name: CATALOGUE[name].unit.to_canonical(column) for name, column in charted.values.items()}
    return Readings.build(
        charted.course, charted.time, [SITES[str(s)] for s in charted.site], values,
        flow_method=[METHODS[str(m)] for m in charted.flow_method],
    )  # fmt: skip


class World:
    """2,000 courses, charted, aligned, derived and judged once."""

    def __init__(self):
        self.made = simulated.courses(N, SEED)
        self.snapshots = align.align(readings_of(simulated_chart.chart(self.made, SEED)))
        self.derived = derive.derive(self.snapshots, DEFAULT)
        self.sds = uncertainty.standard_uncertainties(self.snapshots, self.derived, DEFAULT)
        self.review = judgement.review(self.snapshots, self.derived, DEFAULT)
        self.step = self.review.judgement.step
        self.single = np.isin(self.made.cause, STEPS) & (self.made.fall >= 0.25)


@pytest.fixture(scope="module")
def world():
    return World()


def test_every_course_is_judged(world):
    assert list(world.review.stay) == list(range(N))
    assert {cause: int(np.sum(world.made.cause == cause)) >= 200 for cause in simulated.CAUSES} == dict.fromkeys(
        simulated.CAUSES, True
    )
    assert np.sum(world.single) >= 500


def test_single_causes_with_a_fall_of_a_quarter(world):
    """The right step in at least 97 %."""
    right = world.step[world.single] == world.made.cause[world.single]
    assert right.mean() >= 0.97


def test_no_change_is_called_none(world):
    """At least 95 %."""
    quiet = world.made.cause == "none"
    assert np.mean(world.step[quiet] == "none") >= 0.95


def test_mixed_causes(world):
    """The larger one, or undetermined, in at least 95 %; undetermined is not the easy way out."""
    mixed = world.made.cause == "mixed"
    larger, step = world.made.larger[mixed], world.step[mixed]
    assert np.mean((step == larger) | (step == "undetermined")) >= 0.95
    assert np.mean(step == "undetermined") <= 0.40


def test_intervals_of_delivery_cover_the_truth(world):
    """The 95 % interval of DO2I covers it in 93 to 97 %."""
    rows, true = gases_with_truth(world)
    low, high = uncertainty.interval("do2i", world.derived["do2i"][rows], world.sds["do2i"][rows])
    assert 0.93 <= np.mean((low <= true) & (true <= high)) <= 0.97


def gases_with_truth(world):
    snapshots, made = world.snapshots, world.made
    rows = np.flatnonzero(snapshots.arterial & ~np.isnan(world.derived["do2i"]))
    course = snapshots.readings.stay[rows]
    away = np.abs(made.time[course] - snapshots.readings.time[rows][:, np.newaxis])
    return rows, made.body.delivery[course, np.argmin(away, axis=1)]


def test_steps_have_the_right_sign(world):
    """In at least 97 % where the true contribution exceeds 2 SD."""
    right, total = signs(world)
    assert total > 1000
    assert right / total >= 0.97


def signs(world):
    """Contributions of the window's ledger with the right sign, of those that truly exceed 2 SD."""
    found, right, total = world.review.ledger, 0, 0
    for name in STEPS:
        true, sd = world.made.parts[name], found.sd[name] / found.start_supply
        clear = (np.abs(true) > 2.0 * sd) & ((name != "flow") | (found.level > 1))
        right += int(np.sum(np.sign(found.step(name)[clear]) == np.sign(true[clear])))
        total += int(np.sum(clear))
    return right, total


def test_deaf_to_the_order_of_rows(world):
    """The same courses with their rows shuffled are judged the same."""
    readings = world.snapshots.readings
    shuffled = readings.take(np.random.default_rng(0).permutation(len(readings)))
    snapshots = align.align(shuffled)
    again = judgement.review(snapshots, derive.derive(snapshots, DEFAULT), DEFAULT)
    np.testing.assert_array_equal(again.judgement.step, world.step)


@pytest.mark.parametrize("module", [simulated, simulated_body, simulated_chart])
def test_the_simulator_does_not_call_what_it_judges(module):
    tree = ast.parse(Path(module.__file__).read_text(encoding="utf-8"))
    names = [node.module or "" for node in ast.walk(tree) if isinstance(node, ast.ImportFrom)]
    names += [alias.name for node in ast.walk(tree) if isinstance(node, ast.Import) for alias in node.names]
    allowed = {"__future__", "collections.abc", "csv", "dataclasses", "datetime", "numpy", "numpy.typing", "pathlib"}
    assert set(names) - allowed <= {"simulated", "simulated_body"}


def test_confusion_table(world):
    """The table itself: every course in one cell."""
    lines = confusion(world)
    assert sum(int(cell) for line in lines[2:] for cell in line.split("|")[3:-1]) == N
    if target := os.environ.get("WORKSHEET_CONFUSION"):
        Path(target).write_text("\n".join([*lines, "", *summary(world), ""]), encoding="utf-8")


def confusion(world):
    heads = (*STEPS, "none", "undetermined")
    lines = ["| true cause | courses | " + " | ".join(heads) + " |", "| --- |" + " ---: |" * (len(heads) + 1)]
    made = world.made
    for cause in simulated.CAUSES:
        for label, chosen in _rows(cause, made):
            counts = [int(np.sum(world.step[chosen] == head)) for head in heads]
            lines.append(f"| {label} | {int(np.sum(chosen))} | " + " | ".join(map(str, counts)) + " |")
    return lines


def _rows(cause, made):
    own = made.cause == cause
    if cause == "none":
        return [("none", own)]
    if cause == "mixed":
        return [(f"mixed, larger: {step}", own & (made.larger == step)) for step in STEPS]
    return [
        (f"{cause}, fall ≥ 25 %", own & (made.fall >= 0.25)),
        (f"{cause}, smaller", own & (made.fall < 0.25)),
    ]


def summary(world):
    made, step = world.made, world.step
    quiet, mixed = made.cause == "none", made.cause == "mixed"
    rows, true = gases_with_truth(world)
    low, high = uncertainty.interval("do2i", world.derived["do2i"][rows], world.sds["do2i"][rows])
    right = np.mean(step[world.single] == made.cause[world.single])
    either = np.mean((step[mixed] == made.larger[mixed]) | (step[mixed] == "undetermined"))
    covered = np.mean((low <= true) & (true <= high))
    signed, clear = signs(world)
    return [
        f"- one cause and a true fall ≥ 25 %: right step in {right:.1%} of {int(world.single.sum())}",
        f"- no true change: none in {np.mean(step[quiet] == 'none'):.1%} of {int(quiet.sum())}",
        f"- mixed: the larger or undetermined in {either:.1%} of {int(mixed.sum())}",
        f"- 95 % interval of DO2I covers the truth in {covered:.1%} of {len(rows)} gases",
        f"- contributions beyond 2 SD: right sign in {signed / clear:.1%} of {clear}",
    ]
