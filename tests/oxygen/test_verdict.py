"""Verdicts: which step, in words, with what is assumed; no score, order or diagnosis."""

import re

import numpy as np
import pytest

from tests.oxygen.change_world import crowd, derived, table
from worksheet.oxygen import judgement, ledger, verdict
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.finding_kinds import KINDS
from worksheet.oxygen.plausibility import findings
from worksheet.oxygen.readings import FlowMethod, Site

COURSES = {
    "haemoglobin": {"hb": 7.0},
    "lung": {"po2": 45.0, "so2": 0.79},
    "function": {"cohb": 0.28, "so2": 0.97},
    "flow": {"cardiac_output": 3.6},
    "none": {"hb": 9.8, "po2": 86.0},
}


def verdict_of(*rows, stay=1, **more):
    snapshots, found = derived(table(*rows, **more))
    review = verdict.review(snapshots, found, DEFAULT)
    return verdict.verdict(snapshots, found, review, stay, DEFAULT)


@pytest.mark.parametrize("step", COURSES)
def test_each_step_is_named(step):
    said = verdict_of({}, COURSES[step])
    assert said.limiting_step == step
    assert 1 <= len(said.sentences) <= 2
    if step != "none":
        assert step in said.text.lower()
        assert "fell" in said.sentences[0]
        worst = min(said.evidence, key=lambda item: item.share)
        assert (worst.step, worst.real, worst.material) == (step, True, True)


VENOUS_LOOKING = {"po2": 39.0, "so2": 0.71, "pco2": 47.0, "ph": 7.33, "cohb": None, "methb": None}


@pytest.mark.parametrize(("rows", "where"), [((VENOUS_LOOKING, {}), "starts"), (({}, VENOUS_LOOKING), "ends")])
def test_a_gas_in_doubt_does_not_carry_the_verdict_unsaid(rows, where):
    snapshots, found = derived(table(*rows))
    review, asked = verdict.review(snapshots, found, DEFAULT), findings(snapshots, found)
    assert "arterial-looks-venous" in asked.rows
    said = verdict.verdict(snapshots, found, review, 1, DEFAULT, asked=asked)
    assert len(said.sentences) == 3
    assert f"with which the comparison {where}, is in doubt (it looks venous)" in said.sentences[0]
    assert said.sentences[1:] == verdict.verdict(snapshots, found, review, 1, DEFAULT).sentences
    sound = derived(table({}, {"hb": 8.0}))
    review, asked = verdict.review(*sound, DEFAULT), findings(*sound)
    assert len(verdict.verdict(*sound, review, 1, DEFAULT, asked=asked).sentences) == 2


def test_doubts_are_kinds_of_findings():
    assert set(verdict.DOUBTS) <= set(KINDS)


def test_words_of_a_bleed():
    said = verdict_of({"lactate": 1.5}, {"hb": 7.0, "lactate": 3.4}, {"hb": 6.8, "lactate": 6.1})
    assert "Delivery fell" in said.sentences[0]
    assert "haemoglobin (10.0 → 6.8 g/dL)" in said.sentences[1]
    assert "lactate rose to 6.1 mmol/L" in said.sentences[1]
    assert said.use.worse
    assert said.unit == "mL/min/m2"
    assert said.total.high < 0.0


def test_inside_noise_is_said():
    said = verdict_of({}, {"cardiac_output": 5.8})
    assert "inside measurement noise" in said.sentences[0]
    assert said.limiting_step == "none"


def test_a_certain_loss_does_not_drown_in_the_noise_of_flow():
    """Flow apparently down by 9 %, inside its noise; haemoglobin certainly down by 15 %."""
    said = verdict_of({}, {"hb": 8.5, "cardiac_output": 5.4}, method=FlowMethod.ULTRASOUND)
    assert said.limiting_step == "haemoglobin"


def test_a_loss_that_flow_made_up_for():
    said = verdict_of({}, {"hb": 7.5, "cardiac_output": 8.0})
    assert said.limiting_step == "haemoglobin"
    assert "inside measurement noise" in said.sentences[0]
    assert "made up for it" in said.sentences[1]


def test_probability_of_a_fall():
    said = verdict_of({}, {"hb": 7.0})
    assert said.probability_of_fall() > said.probability_of_fall(0.10) > said.probability_of_fall(0.30)
    assert said.probability_of_fall(-float(said.total.change) / said.start_supply) == pytest.approx(0.5)
    assert np.isnan(verdict_of({}).probability_of_fall())
    low, high = said.evidence[1].interval
    assert low < said.evidence[1].change < high < 0.0


def test_content_is_not_made_up_for_by_flow():
    """Flow known early only: its rise is judged, but does not explain a content."""
    said = verdict_of({"cardiac_output": 4.0}, {"cardiac_output": 7.5}, {"cardiac_output": None, "hb": 7.0})
    assert said.unit == "mL/dL"
    assert "made up" not in said.text


def test_two_losses_that_cannot_be_ordered():
    said = verdict_of({}, {"hb": 7.0, "cardiac_output": 5.0})
    assert said.limiting_step == "haemoglobin"
    said = verdict_of({}, {"hb": 7.4, "cardiac_output": 4.4})
    assert said.limiting_step == "undetermined"
    assert "cannot be told" in said.sentences[1]


def test_without_flow_the_content_is_judged_and_it_is_said():
    said = verdict_of({"cardiac_output": None}, {"cardiac_output": None, "hb": 7.0})
    assert said.limiting_step == "haemoglobin"
    assert said.unit == "mL/dL"
    assert "Arterial oxygen content fell" in said.sentences[0]
    assert any("flow not measured" in line for line in said.basis)


def test_what_is_missing_could_be_the_cause():
    quiet = verdict_of({"cardiac_output": None}, {"cardiac_output": None})
    worse = verdict_of({"cardiac_output": None}, {"cardiac_output": None, "lactate": 5.0})
    assert (quiet.limiting_step, worse.limiting_step) == ("none", "undetermined")
    assert "flow was not measured" in worse.sentences[1]


def test_newest_rows_that_know_a_step_decide_it():
    """Flow not written beside the last gas: judged from the gases that have it."""
    said = verdict_of({}, {"cardiac_output": 3.5}, {"cardiac_output": None})
    assert said.limiting_step == "flow"
    said = verdict_of({}, {"cohb": 0.28, "so2": 0.97}, {"time": 14.0, "cohb": None, "methb": None})
    assert said.limiting_step == "function"


def test_basis_says_what_is_carried_and_assumed():
    said = verdict_of(
        {"hb": None, "cohb": None, "methb": None}, {"hb": None, "cohb": None, "methb": None, "so2": None},
        {"site": Site.NONE, "time": -0.5, "hb": 9.0, "stay": 1}, method=FlowMethod.UNKNOWN,
    )  # fmt: skip
    text = " ".join(said.basis)
    for words in ("not re-measured", "usual share assumed", "calculated", "method of flow not recorded", "old"):
        assert words in text


def test_extraction_and_central_venous():
    venous = {"time": 4.0, "site": Site.CENTRAL_VENOUS, "so2": 0.42, "po2": 25.0}
    early = {"time": 0.0, "site": Site.CENTRAL_VENOUS, "so2": 0.72, "po2": 38.0}
    said = verdict_of({}, {"cardiac_output": 3.4}, early, venous)
    assert "extraction rose to" in said.sentences[1]
    assert said.use.worse
    assert any("central venous" in line for line in said.basis)


def test_nothing_to_compare():
    said = verdict_of({})
    assert said.limiting_step == ""
    assert "Nothing to compare" in said.text
    snapshots, found = derived(table({}))
    with pytest.raises(KeyError, match="no stay 9"):
        verdict.verdict(snapshots, found, verdict.review(snapshots, found, DEFAULT), 9, DEFAULT)


def test_no_order_no_diagnosis_no_score():
    forbidden = re.compile(
        r"\b(give|transfuse|increase|start|stop|should|must|score|shock|ards|sepsis)\b", re.IGNORECASE
    )
    snapshots, found = derived(crowd(stays=60, gases=3))
    review = verdict.review(snapshots, found, DEFAULT)
    for stay in review.stay:
        said = verdict.verdict(snapshots, found, review, int(stay), DEFAULT)
        assert not forbidden.search(said.text), said.text
        assert len(said.sentences) <= 2
        assert all(line.endswith(".") for line in said.sentences)


def test_consecutive_rows_in_words():
    snapshots, found = derived(table({}, {"hb": 7.5}, {"hb": 7.5}, {"stay": 2}))
    words = verdict.limiting_steps(snapshots, found, ledger.consecutive(snapshots, found, DEFAULT))
    assert list(words) == ["", "haemoglobin", "none", ""]


def test_residual_inside_its_noise_is_no_loss_of_function():
    """Hypoxia on the steep part: a PO2 read 3 mmHg too high leaves a negative residual; the lung is still named."""
    snapshots, found = derived(table({}, {"po2": 46.0, "so2": 0.785}))
    made = ledger.consecutive(snapshots, found, DEFAULT)
    part, _ = judgement.relative_parts(made)
    assert made.residual[1] < 0.0
    assert part["lung"][1] < made.lung[1] / made.start_supply[1]
    assert judgement.limiting_steps(snapshots, found, made)[1] == "lung"


def test_residual_beyond_its_noise_stays_with_function():
    snapshots, found = derived(table({}, {"po2": 90.0, "so2": 0.80}))
    made = ledger.consecutive(snapshots, found, DEFAULT)
    assert abs(made.residual[1]) > 1.96 * made.sd["residual"][1]
    assert judgement.limiting_steps(snapshots, found, made)[1] == "function"


def test_noise_alone_seldom_names_a_step():
    """2,000 stays without any change, measured twice with the worksheet's own noise: none in at least 95 %."""
    from tests.oxygen.test_ledger import drawn_pairs

    snapshots, found = derived(drawn_pairs(table({}, {}), 2000, np.random.default_rng(8)))
    words = judgement.limiting_steps(snapshots, found, ledger.consecutive(snapshots, found, DEFAULT))[1::2]
    assert np.mean(words == "none") >= 0.95


@pytest.mark.parametrize(("doubling", "words"), [(12.0, "doubling in 12 h"), (150.0, "lactate is rising slowly")])
def test_a_doubling_time_of_days_is_not_told_in_hours(doubling, words):
    rows = [{"lactate": 2.2 * 2.0 ** (4.0 * n / doubling)} for n in range(8)]
    said = verdict_of(*rows)
    assert words in said.text
    assert "in 150 h" not in said.text
