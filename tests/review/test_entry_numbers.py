"""Numbers and times as they are typed: what is read, and the sentence for what is not."""

from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given
from hypothesis import strategies as st

from worksheet.oxygen.quantities import CATALOGUE
from worksheet.review import moments, numbers

ZURICH = ZoneInfo("Europe/Zurich")
NOW = datetime(2026, 12, 1, 14, 0, tzinfo=UTC)


@pytest.mark.parametrize(
    ("text", "value", "comparator"),
    [
        ("7.31", 7.31, ""), ("7,31", 7.31, ""), (" 40 ", 40, ""), ("−2", -2, ""), (".5", 0.5, ""),
        (">500", 500, ">"), ("< 0,3", 0.3, "<"), ("≤2", 2, "<="), ("\u00a012\u00a0", 12, ""),
    ],
)  # fmt: skip
def test_numbers_that_are_read(text, value, comparator):
    number = numbers.parse(text)
    assert (number.value, number.comparator, number.problem) == (value, comparator, "")


@pytest.mark.parametrize(
    "text", ["abc", "1.2.3", "nan", "inf", "٣", "5..3", "--4", "12-14", "=2+2", "½", "7.3l x" * 20]
)
def test_text_in_a_number_field_is_a_sentence(text):
    number = numbers.parse(text)
    refused = number.problem or numbers.read(text, CATALOGUE["ph"], CATALOGUE["ph"].unit).problem
    assert "is not a number" in refused or "not a unit" in refused


@pytest.mark.parametrize("text", ["1 234", "1'234", "1,234.5", "1.234,5", "1.234.567"])
def test_thousands_are_refused(text):
    assert numbers.parse(text).value is None
    assert "thousands" in numbers.parse(text).problem


@pytest.mark.parametrize("text", ["7.", "7,", ">7."])
def test_a_number_that_is_half_typed_is_no_number(text):
    assert "ends with the decimal sign" in numbers.parse(text).problem


def test_nothing_typed_is_nothing():
    assert numbers.parse("   ").empty


def test_a_number_with_two_readings_is_asked_back():
    vo2 = CATALOGUE["vo2_measured"]
    assert "1234 or 1.234" in numbers.read("1,234", vo2, vo2.unit).problem
    assert "1234 or 1,234" in numbers.read("1.234", vo2, vo2.unit, decimal_comma=True).problem
    assert numbers.read("7,312", CATALOGUE["ph"], CATALOGUE["ph"].unit).value == 7.312  # 7312 is no pH


def test_a_unit_behind_the_number_must_be_the_one_chosen():
    po2 = CATALOGUE["po2"]
    kpa = po2.unit_named("kPa")
    assert numbers.read("11.2 kPa", po2, kpa).value == 11.2
    assert "kPa" in numbers.read("11.2 kPa", po2, po2.unit).problem
    assert "not a unit" in numbers.read("11.2 bananas", po2, kpa).problem


@given(st.floats(-1e6, 1e6, allow_nan=False), st.sampled_from([".", ","]))
def test_what_is_written_is_read_back(value, sign):
    text = f"{value:.3f}"
    assert numbers.parse(text.replace(".", sign)).value == float(text)


@given(st.text(max_size=60))
def test_no_text_breaks_the_reader(text):
    number = numbers.parse(text)
    assert number.value is None or abs(number.value) < 1e41
    assert number.empty or number.problem or number.value is not None


@pytest.mark.parametrize("text", ["06:35", "6:35", "6.35", "0635", "635", "06:35:00", "6h35"])
def test_clock_times(text):
    moment = moments.read("2026-11-30", text, "", ZURICH, NOW)
    assert moment.at == datetime(2026, 11, 30, 5, 35, tzinfo=UTC)


@pytest.mark.parametrize(
    ("date", "clock", "field", "words"),
    [
        ("2026-12-01", "23:50", "clock", "in the future"),
        ("2026-12-01", "24:10", "clock", "24 h clock"),
        ("2026-12-01", "six", "clock", "24 h clock"),
        ("2026-12-01", "", "clock", "missing"),
        ("2026-13-01", "06:35", "date", "not a date"),
        ("1.2.2026", "06:35", "date", "2026-03-29"),
        ("1889-01-01", "06:35", "date", "before 1990"),
    ],
)
def test_times_that_cannot_be(date, clock, field, words):
    moment = moments.read(date, clock, "", ZURICH, NOW)
    assert moment.at is None
    assert moment.field == field
    assert words in moment.problem


def test_just_after_midnight_yesterday_is_offered():
    now = datetime(2026, 11, 30, 23, 20, tzinfo=UTC)  # 00:20 in Zurich
    assert "2026-11-30" in moments.read("2026-12-01", "23:50", "", ZURICH, now).problem


def test_an_hour_that_does_not_exist_is_refused():
    moment = moments.read("2026-03-29", "02:30", "", ZURICH, NOW)
    assert moment.at is None
    assert "does not exist" in moment.problem


def test_an_hour_that_comes_twice_is_asked_and_both_are_offered():
    asked = moments.read("2026-10-25", "02:30", "", ZURICH, NOW)
    assert asked.at is None
    assert asked.field == "fold"
    assert [value for value, _ in asked.choices] == ["0", "1"]
    assert "UTC+02:00" in asked.choices[0][1]
    assert "UTC+01:00" in asked.choices[1][1]
    first = moments.read("2026-10-25", "02:30", "0", ZURICH, NOW)
    second = moments.read("2026-10-25", "02:30", "1", ZURICH, NOW)
    assert (second.at - first.at).total_seconds() == 3600
    assert second.ambiguous, "the choice stays on the form"
    assert moments.read("2026-10-25", "02:30 A", "", ZURICH, NOW).at == first.at
    assert moments.read("2026-10-25", "0230b", "", ZURICH, NOW).at == second.at
    assert moments.letter(second.at.astimezone(ZURICH)) == " B"


@given(st.datetimes(datetime(2000, 1, 1), datetime(2026, 11, 30)))
def test_every_moment_of_a_zone_is_reached(wall):
    utc = wall.replace(second=0, microsecond=0, tzinfo=UTC)
    local = utc.astimezone(ZURICH)
    moment = moments.read(f"{local:%Y-%m-%d}", f"{local:%H:%M}", str(local.fold), ZURICH, NOW)
    assert moment.at == utc
