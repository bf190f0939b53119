"""Findings: for each kind a case that triggers it and a near miss that does not, and words that hold the numbers."""

import re

import numpy as np
import pytest

from worksheet.oxygen.align import align
from worksheet.oxygen.derive import derive
from worksheet.oxygen.finding_kinds import KINDS, Severity
from worksheet.oxygen.plausibility import check_value, findings, without_impossible
from worksheet.oxygen.quantities import CATALOGUE, MEASURED
from worksheet.oxygen.readings import Device, Event, Readings, Site

from .builders import codes, readings, snapshots

MIXED = Site.MIXED_VENOUS
GAS = {"ph": 7.40, "pco2": 40.0, "po2": 90.0}
CO_OXIMETRY = {"so2": 0.966, "cohb": 0.01, "methb": 0.01}
VENOUS = {"site": MIXED, "ph": 7.37, "pco2": 46.0, "po2": 37.0, "so2": 0.70}
BOTH = [GAS | CO_OXIMETRY | {"hb": 10.0}, VENOUS | {"hb": 10.0}]
HB = {"site": 0, "minute": -120, "hb": 12.0}

# code: (rows that trigger it on the first row, rows of a near miss)
CASES = {
    "po2-above-alveolar": ([GAS | {"fio2": 0.21, "po2": 125.0}], [GAS | {"fio2": 0.21, "po2": 102.0}]),
    "po2-looks-like-kpa": ([GAS | {"po2": 12.0, "so2": 0.97}], [GAS | {"po2": 22.0, "so2": 0.38}]),
    "pco2-looks-like-kpa": ([GAS | {"pco2": 5.3}], [GAS | {"ph": 7.05, "pco2": 9.0}]),
    "po2-looks-like-mmhg": ([GAS | {"po2": 450.0, "so2": 0.90}], [GAS | {"po2": 450.0, "so2": 0.99}]),
    "pco2-looks-like-mmhg": ([GAS | {"pco2": 280.0}], [GAS | {"ph": 6.95, "pco2": 140.0}]),
    "fio2-fraction-or-percent": ([GAS | {"fio2": 0.0045}], [GAS | {"fio2": 0.45}]),
    "saturation-like-fraction": ([GAS | {"so2": 0.0097}], [GAS | {"so2": 0.97}]),
    "so2-against-curve": ([GAS | {"so2": 0.91}], [GAS | {"so2": 0.945}]),
    "arterial-looks-venous": (
        [GAS | {"po2": 38.0, "so2": 0.72, "spo2": 0.95}], [GAS | {"po2": 48.0, "so2": 0.83, "spo2": 0.85}],
    ),
    "fractions-do-not-add": (
        [GAS | CO_OXIMETRY | {"o2hb": 0.966, "cohb": 0.03}], [GAS | CO_OXIMETRY | {"o2hb": 0.947}],
    ),
    "venous-above-arterial": ([BOTH[0], VENOUS | {"so2": 0.98}], BOTH),
    "hb-jump": ([{"hb": 7.9}, HB], [{"hb": 7.9}, HB, {"site": 0, "minute": -60, "event": Event.BLEED}]),
    "ph-pco2-hco3-disagree": ([GAS | {"bicarbonate": 30.0}], [GAS | {"bicarbonate": 27.0}]),
    "calculated-as-measured": ([GAS | {"so2": 0.96753}], [GAS | {"so2": 0.96653}]),
    "co-and-ci-disagree": (
        [GAS | {"cardiac_output": 5.0, "cardiac_index": 3.2, "height": 180.0, "weight": 80.0}],
        [GAS | {"cardiac_output": 5.0, "cardiac_index": 2.6, "height": 180.0, "weight": 80.0}],
    ),
    "p50-out-of-range": ([GAS | {"po2": 200.0, "so2": 0.95}], [GAS | {"po2": 75.0, "so2": 0.93}]),
    "o2er-out-of-range": ([BOTH[0], VENOUS | {"so2": 0.955}], [BOTH[0], VENOUS | {"so2": 0.88}]),
    "room-air-with-oxygen": (
        [GAS | {"device": Device.ROOM_AIR, "fio2": 0.4}], [GAS | {"device": Device.ROOM_AIR, "fio2": 0.21}],
    ),
    "duplicate-sample": (
        [GAS | {"minute": 30, "hb": 9.0}, GAS | {"hb": 9.0}], [GAS | {"minute": 30, "hb": 9.0}, GAS | {"hb": 9.4}],
    ),
    "gap-reading-false": ([GAS | CO_OXIMETRY | {"spo2": 0.88}], [GAS | CO_OXIMETRY | {"spo2": 0.93}]),
    "gap-dyshaemoglobin": (
        [GAS | {"o2hb": 0.72, "cohb": 0.01, "methb": 0.25, "spo2": 0.86}], [GAS | CO_OXIMETRY | {"spo2": 0.86}],
    ),
    "gap-send-co-oximetry": ([GAS | {"spo2": 0.85}], [GAS | {"spo2": 0.93}]),
    "gap-beyond-methb": ([GAS | {"spo2": 0.68}], [GAS | {"spo2": 0.85}]),
    "cohb-hidden": ([GAS | {"cohb": 0.20, "spo2": 0.97}], [GAS | {"cohb": 0.04, "spo2": 0.97}]),
    "hypoxaemia-agreed": (
        [GAS | {"po2": 50.0, "so2": 0.84, "spo2": 0.85}], [GAS | {"po2": 62.0, "so2": 0.91, "spo2": 0.89}],
    ),
    "hypoxaemia-occult": (
        [GAS | {"po2": 55.0, "so2": 0.88, "spo2": 0.93}], [GAS | {"po2": 55.0, "so2": 0.88, "spo2": 0.92}],
    ),
    "pf-from-estimated-fio2": (
        [GAS | {"fio2": 0.36, "device": Device.NASAL_CANNULA}], [GAS | {"fio2": 0.36, "device": Device.VENTILATOR}],
    ),
    "spo2-above-97": ([GAS | {"spo2": 0.98, "fio2": 0.4}], [GAS | {"spo2": 0.97, "fio2": 0.4}]),
}  # fmt: skip
ELSEWHERE = {
    "time-in-future",
    "before-admission",
    "values-of-another-patient",
    "site-not-stated",
    "saturation-without-site",
}
LIMITS = {f"{name.replace('_', '-')}-{end}" for name in MEASURED for end in ("impossible", "unlikely")}


def test_every_kind_has_a_case_or_a_test_of_its_own():
    assert set(KINDS) == set(CASES) | ELSEWHERE | LIMITS


@pytest.mark.parametrize("code", CASES)
def test_triggers(code):
    assert code in codes(*CASES[code][0])


@pytest.mark.parametrize("code", CASES)
def test_a_near_miss_does_not(code):
    assert code not in codes(*CASES[code][1])


@pytest.mark.parametrize(
    ("code", "rows"),
    [
        ("po2-above-alveolar", [GAS | {"fio2": 0.50, "device": Device.NASAL_CANNULA, "po2": 330.0}]),  # FiO2 is a guess
        ("po2-looks-like-kpa", [VENOUS]),
        ("pco2-looks-like-kpa", [{"ph": 6.95, "pco2": 11.0, "po2": 110.0}]),  # severe metabolic acidosis
        ("pco2-looks-like-kpa", [{"ph": 7.22, "pco2": 11.0, "po2": 110.0}]),
        (
            "so2-against-curve",
            [GAS | {"po2": 45.0, "so2": 0.755}],
        ),  # 5 points, but on the steep part
        ("so2-against-curve", [VENOUS | {"so2": 0.64}]),
        ("arterial-looks-venous", [GAS | {"po2": 44.0, "so2": 0.80, "spo2": 0.82}]),  # true hypoxaemia
        ("fractions-do-not-add", [GAS | {"so2": 0.97, "o2hb": 0.96, "cohb": 0.01, "methb": 0.01}]),  # whole percents
        ("fractions-do-not-add", [GAS | {"so2": 0.97, "o2hb": 0.68, "cohb": 0.30, "methb": 0.01}]),
        ("hb-jump", [{"hb": 10.0}, HB]),  # two units' worth
        ("hb-jump", [{"hb": 7.9, "minute": 800}, HB]),  # over more than half a day
        ("calculated-as-measured", [GAS | {"so2": 0.97}]),  # whole percents say nothing
        ("calculated-as-measured", [GAS | {"so2": 0.968}]),  # nor does one with one decimal
        ("duplicate-sample", [GAS | {"minute": 30}, GAS | {"site": MIXED}]),
        ("duplicate-sample", [GAS | {"minute": 90}, GAS]),  # rounded gases of a steady patient do meet
        ("p50-out-of-range", [GAS | {"po2": 180.0, "so2": 0.97}]),  # the flat part: noise, and no P50 is reported
        ("duplicate-sample", [GAS | {"minute": 30}, GAS | {"stay": 2}]),
        ("gap-send-co-oximetry", [GAS | CO_OXIMETRY | {"spo2": 0.85}]),
        ("spo2-above-97", [GAS | {"spo2": 0.98}]),  # no FiO2, no S/F to speak of
    ],
)
def test_what_is_no_reason_to_ask(code, rows):
    assert code not in codes(*rows)


def test_a_methb_that_would_explain_is_told_in_whole_percent_or_not_at_all():
    """Barker, Tremper & Hyatt 1989: a MetHb of 35 % reads about 85 %; nothing of MetHb alone reads 68 %."""
    table = snapshots(GAS | {"spo2": 0.85}, GAS | {"spo2": 0.68, "stay": 2})
    found = findings(table, derive(table))
    told = [next(f for f in found.of_row(row) if f.code.startswith("gap-")) for row in (0, 1)]
    assert re.search(r"a MetHb of about \d\d % would", told[0].sentence)
    assert told[1].code == "gap-beyond-methb"
    assert "no share of MetHb alone would explain it" in told[1].sentence
    assert "not measured" not in told[0].sentence + told[1].sentence


def test_a_clean_pair_has_no_finding_at_all():
    bedside = {"fio2": 0.4, "device": Device.VENTILATOR, "spo2": 0.96, "cardiac_output": 5.0, "cardiac_index": 2.5,
               "height": 180.0, "weight": 80.0, "temperature": 37.2, "bicarbonate": 24.5, "o2hb": 0.947}  # fmt: skip
    for row in (0, 1):
        assert codes(BOTH[0] | bedside, BOTH[1], row=row) == set()


def test_three_saturations_in_a_row_that_equal_the_curve_to_one_decimal():
    times = [GAS | {"minute": 60 * i, "po2": po2} for i, po2 in enumerate((90.0, 75.0, 66.0))]
    table = derive(align(readings(*times)))
    calculated = [row | {"so2": round(float(so2), 3)} for row, so2 in zip(times, table["so2_from_po2"], strict=True)]
    assert "calculated-as-measured" in codes(*calculated, row=2)
    assert "calculated-as-measured" not in codes(*calculated, row=1)


def test_a_jump_is_said_again_on_the_first_gas_that_uses_it_only():
    rows = [HB, HB | {"minute": -60, "hb": 7.0}, GAS, GAS | {"minute": 30, "po2": 91.0}]
    assert ["hb-jump" in codes(*rows, row=i) for i in range(4)] == [False, True, True, False]


def test_kpa_is_seen_jointly_without_any_saturation():
    assert {"po2-looks-like-kpa", "pco2-looks-like-kpa"} <= codes({"ph": 7.40, "pco2": 5.3, "po2": 12.0})
    assert {"po2-looks-like-mmhg", "pco2-looks-like-mmhg"} <= codes({"ph": 7.40, "pco2": 285.0, "po2": 675.0})


def test_time_in_future_and_before_admission():
    rows = [GAS | {"minute": 10}]
    now = 400_000.0
    assert "time-in-future" in codes(*rows, now=now)
    assert "time-in-future" not in codes(GAS | {"minute": 5}, now=now)  # two clocks
    assert "time-in-future" not in codes(*rows)
    assert "before-admission" in codes(*rows, admitted=np.array([now + 0.2]))
    assert "before-admission" not in codes(*rows, admitted=np.array([now + 10 / 60]))
    assert "before-admission" not in codes(*rows, admitted=np.array([np.nan]))


def test_the_values_of_another_patient_in_one_batch():
    one, other = GAS | {"lactate": 2.1}, GAS | {"lactate": 2.1, "stay": 2, "minute": 300}
    assert "values-of-another-patient" in codes(one, other, across_stays=True)
    assert "values-of-another-patient" not in codes(one, other | {"lactate": 2.2}, across_stays=True)
    assert "values-of-another-patient" not in codes(one, other | {"minute": 1500}, across_stays=True)
    assert "values-of-another-patient" not in codes(one, other)
    assert "values-of-another-patient" not in codes(GAS, GAS | {"stay": 2}, across_stays=True)  # three are chance


LIMITED = [(name, end) for name in MEASURED for end in (0, 1) if np.isfinite(CATALOGUE[name].impossible[end])]


@pytest.mark.parametrize(("name", "end"), LIMITED)
def test_impossible_values_are_not_used_and_are_named(name, end):
    limit = CATALOGUE[name].impossible[end]
    beyond = limit + (1 if end else -1) * max(1e-6, abs(limit) * 1e-4)
    table, refused = without_impossible(readings({name: beyond}, {name: limit, "stay": 2}))
    assert np.isnan(table[name][0])
    assert refused[name][0] == beyond
    found = codes({name: beyond})
    assert found & {f"{name.replace('_', '-')}-impossible", "saturation-like-fraction"}
    assert f"{name.replace('_', '-')}-impossible" not in codes({name: limit})
    assert check_value(name, beyond).severity is Severity.IMPOSSIBLE


@pytest.mark.parametrize("name", MEASURED)
def test_unlikely_values_are_asked_about_and_used(name):
    (low, high), (least, most) = CATALOGUE[name].unlikely, CATALOGUE[name].impossible
    for limit, beyond in ((low, (low + least) / 2), (high, (high + most) / 2)):
        if beyond != limit:
            assert f"{name.replace('_', '-')}-unlikely" in codes({name: beyond})
            assert check_value(name, beyond).severity is Severity.UNLIKELY
        assert f"{name.replace('_', '-')}-unlikely" not in codes({name: limit})
        assert check_value(name, limit) is None


def test_a_saturation_typed_as_a_fraction_is_neither_used_nor_rescaled():
    table, refused = without_impossible(readings(GAS | {"so2": 0.0097, "cohb": 0.0097}))
    assert np.isnan(table["so2"][0])
    assert refused["so2"][0] == 0.0097
    assert table["cohb"][0] == 0.0097  # small dyshaemoglobins are the rule


@pytest.mark.parametrize(
    ("name", "value", "hint"),
    [("temperature", 98.6, "°F"), ("height", 1.78, "m"), ("hb", 95.0, "g/L"), ("so2", 0.0097, "fraction")],
)
def test_one_value_is_told_which_unit_was_probably_meant(name, value, hint):
    assert hint in check_value(name, value).settle


def test_one_value():
    assert check_value("po2", 90.0) is None
    assert check_value("po2", float("nan")) is None
    found = check_value(CATALOGUE["po2"], 0.0)
    assert found.code == "po2-impossible"
    assert found.sentence == "PO2 0 mmHg is impossible (1 mmHg to 800 mmHg)."
    assert check_value("fio2", 0.0045).code == "fio2-fraction-or-percent"
    assert check_value("fio2", 45.0).code == "fio2-fraction-or-percent"


def test_words_hold_the_numbers_in_the_readers_units():
    possible, refused = without_impossible(readings(GAS | {"fio2": 0.21, "po2": 125.0}))
    table = align(possible)
    found = findings(table, derive(table), refused=refused)
    (mine,) = (f for f in found.of_row(0) if f.code == "po2-above-alveolar")
    assert "PaO2 125 mmHg is above the alveolar" in mine.sentence
    assert "FiO2 21.0 %" in mine.sentence
    (kpa,) = (f for f in found.of_row(0, lambda name, value: f"<{name}>") if f.code == "po2-above-alveolar")
    assert kpa.sentence.startswith("PaO2 <po2> is above")
    assert found.worst()[0] == 2


@pytest.mark.parametrize("code", KINDS)
def test_kinds_are_complete_and_well_spelled(code):
    kind = KINDS[code]
    assert re.fullmatch(r"[a-z0-9]+(-[a-z0-9]+)*", code)
    assert kind.words.endswith(".")
    assert kind.settle
    assert kind.source


@pytest.mark.parametrize("code", CASES)
def test_sentences_are_finished(code):
    possible, refused = without_impossible(readings(*CASES[code][0]))
    table = align(possible)
    (mine,) = (f for f in findings(table, derive(table), refused=refused).of_row(0) if f.code == code)
    assert "{" not in mine.sentence
    assert "nan" not in mine.sentence


def test_codes_of_many_kinds_and_rows():
    rows = [CASES[code][0][0] | {"stay": i} for i, code in enumerate(CASES)]
    possible, refused = without_impossible(readings(*rows))
    table = align(possible)
    found = findings(table, derive(table), refused=refused)
    for row, text in enumerate(found.codes()):
        assert [c for c in text.split(";") if c] == [f.code for f in found.of_row(row)]
        assert [c for c in text.split(";") if c] == [code for code in KINDS if found.mask(code)[row]]


def test_nothing_measured_nothing_found():
    empty = Readings.build([1, 1], [0.0, 1.0], [1, 2], {})
    table = align(empty)
    assert findings(table, derive(table)).rows == {}
    none = align(Readings.build([], [], [], {}))
    assert findings(none, derive(none)).codes() == []
