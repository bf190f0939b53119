"""The constants a site may choose: frozen, and nonsense named in words."""

import dataclasses

import numpy as np
import pytest

from worksheet.oxygen.constants import CHOICES, DEFAULT, POSSIBLE, Constants


def test_defaults_have_no_problem_and_cannot_be_changed_in_place():
    assert DEFAULT.problems() == []
    with pytest.raises(dataclasses.FrozenInstanceError):
        DEFAULT.hufner = 1.34


def test_every_number_and_choice_is_judged():
    numbers = {field.name for field in dataclasses.fields(Constants) if field.type == "float"}
    assert set(POSSIBLE) == numbers
    assert set(CHOICES) == {field.name for field in dataclasses.fields(Constants) if field.type == "str"}


@pytest.mark.parametrize("name", sorted(POSSIBLE))
def test_a_number_is_possible_to_its_limits_and_not_beyond(name):
    for limit, beyond in zip(POSSIBLE[name], (-1.001, 1.001), strict=True):
        assert dataclasses.replace(DEFAULT, **{name: limit}).problems() == []
        (words,) = dataclasses.replace(DEFAULT, **{name: limit * beyond + np.sign(beyond) * 1e-6}).problems()
        assert words.startswith(f"{name}: ")
    assert dataclasses.replace(DEFAULT, **{name: np.nan}).problems() != []


@pytest.mark.parametrize("name", sorted(CHOICES))
def test_an_unknown_choice_is_named_with_the_known_ones(name):
    (words,) = dataclasses.replace(DEFAULT, **{name: "guess"}).problems()
    assert words == f"{name}: 'guess' is not one of {', '.join(CHOICES[name])}"
    for choice in CHOICES[name]:
        assert dataclasses.replace(DEFAULT, **{name: choice}).problems() == []


def test_a_mistyped_unit_is_caught():
    # 1013 hPa typed into mmHg, and a solubility in mL/L
    found = dataclasses.replace(DEFAULT, barometric_pressure=1013.0, o2_solubility=0.031).problems()
    assert found == [
        "o2_solubility: 0.031 is outside 0.0025 to 0.0035",
        "barometric_pressure: 1013 is outside 250 to 820",
    ]
