"""How numbers and times are shown: units, decimals, decimal sign, zone; and a way back without loss."""

from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from worksheet.oxygen.quantities import CATALOGUE
from worksheet.review import numbers
from worksheet.ward.display import FOLLOWERS, MISSING, Display, age_words
from worksheet.ward.models import Unit, User

UTC_ZONE = ZoneInfo("UTC")


def shown(units=None, **more):
    return Display(UTC_ZONE, units or {}, **more)


@pytest.mark.parametrize(
    ("name", "unit", "canonical", "text"),
    [
        ("po2", "kPa", 100.0, "13.3 kPa"),  # 100 mmHg = 13.332 kPa: NIST SP 811 (2008), table B.8
        ("po2", "mm[Hg]", 100.0, "100 mmHg"),
        ("hb", "g/L", 12.34, "123 g/L"),
        ("hb", "mmol/L", 16.114, "10.0 mmol/L"),
        ("temperature", "[degF]", 37.0, "98.6 °F"),
        ("temperature", "Cel", 38.25, "38.2 °C"),
        ("so2", "%", 0.964, "96.4 %"),
        ("fio2", "1", 0.4, "0.40 fraction"),
        ("cao2", "mmol/L", 20.0, "8.9 mmol/L"),
        ("ph", "[pH]", 7.4, "7.40"),
    ],
)
def test_values_in_the_chosen_unit(name, unit, canonical, text):
    assert shown({name: unit}).value(name, canonical, with_unit=True) == text


def test_gas_pressures_never_mix_units_and_map_is_apart():
    display = shown({"po2": "kPa"})
    gas = {name for name in CATALOGUE if CATALOGUE[name].unit.ucum == "mm[Hg]"} - {"mean_arterial_pressure"}
    assert {display.unit(name).ucum for name in gas} == {"kPa"}
    assert display.unit("mean_arterial_pressure").ucum == "mm[Hg]"
    assert {display.unit(n).ucum for n in ("cvo2", "avdo2", "extractable_o2")} == {"mL/dL"}
    assert {shown({"cao2": "mmol/L"}).unit(n).ucum for n in ("cvo2", "avdo2", "extractable_o2")} == {"mmol/L"}


def test_followers_have_the_units_of_what_they_follow():
    for name, leader in FOLLOWERS.items():
        assert {u.ucum for u in CATALOGUE[leader].units} <= {u.ucum for u in CATALOGUE[name].units}


def test_differences_have_no_offset():
    assert shown({"temperature": "[degF]"}).value("temperature", 1.0, signed=True) == "+1.8"


@pytest.mark.parametrize("value", [None, float("nan"), float("inf")])
def test_what_is_missing_is_a_dash(value):
    assert shown().value("po2", value) == MISSING
    assert shown().number(value, 1) == MISSING


def test_signs():
    assert shown().number(-0.04, 1) == "0.0"
    assert shown().number(-0.04, 1, signed=True) == "±0.0"
    assert shown(decimal_comma=True).number(-12.34, 1) == "−12,3"
    assert shown().number(3.0, 0, signed=True) == "+3"


def test_the_readers_choices_go_over_the_units():
    unit = Unit(name="U", time_zone="Europe/Zurich", units={"po2": "kPa", "hb": "g/L"}, decimal_comma=True)
    assert Display.of(None, unit) == Display(ZoneInfo("Europe/Zurich"), {"po2": "kPa", "hb": "g/L"}, True)
    user = User(
        preferences={"units": {"hb": "g/dL"}, "decimal_comma": False, "time_zone": "Asia/Tokyo", "theme": "dark"}
    )
    mine = Display.of(user, unit)
    assert mine.units == {"po2": "kPa", "hb": "g/dL"}
    assert (mine.decimal_comma, mine.zone.key, mine.theme) == (False, "Asia/Tokyo", "dark")


@pytest.mark.parametrize(
    "preferences",
    [
        {"time_zone": "Mars/Base"},
        {"units": None},
        {"units": {"po2": "psi"}},
        {"units": "kPa"},
        {"theme": 3},
        {"decimal_comma": None},
    ],
)
def test_broken_preferences_do_not_break_a_page(preferences):
    display = Display.of(User(preferences=preferences), Unit(name="U", time_zone="Europe/Zurich"))
    assert display.value("po2", 100.0, with_unit=True) == "100 mmHg"
    assert display.zone.key == "Europe/Zurich"


def test_times_are_of_the_zone_on_a_24_h_clock():
    display = Display(ZoneInfo("Europe/Zurich"))
    night = datetime(2026, 10, 25, 0, 30, tzinfo=UTC)
    assert display.stamp(night) == "2026-10-25 02:30 CEST"
    assert display.stamp(night.replace(hour=1)) == "2026-10-25 02:30 CET"
    assert display.clock(datetime(2026, 6, 1, 20, 5, tzinfo=UTC)) == "22:05"
    assert display.clock(night.timestamp() / 3600) == "02:30"


@pytest.mark.parametrize(
    ("hours", "words"),
    [
        (0.4, "24 min"),
        (0, "0 min"),
        (1, "1 h"),
        (3.17, "3 h 10"),
        (47.99, "47 h 59"),
        (52, "2 d 4 h"),
        (48, "2 d"),
        (np.nan, MISSING),
    ],
)
def test_ages(hours, words):
    assert age_words(hours) == words


@given(st.sampled_from(sorted(CATALOGUE)), st.floats(0.01, 300), st.booleans(), st.data())
def test_what_is_shown_can_be_typed_again(name, canonical, comma, data):
    """Round trip within the rounding of the shown decimals, in every unit and with both decimal signs."""
    unit = data.draw(st.sampled_from(CATALOGUE[name].units))
    display = shown({name: unit.ucum, FOLLOWERS.get(name, name): unit.ucum}, decimal_comma=comma)
    text = display.value(name, canonical)
    number = numbers.parse(text)
    step = 0.5 * 10.0 ** -display.decimals(name)
    assert number.value is not None
    assert abs(number.value - float(unit.from_canonical(canonical))) <= step * (1 + 1e-9)
