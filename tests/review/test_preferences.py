"""Choices of one person: stored, refused with a sentence, and felt on the pages."""

import pytest


def send(world, **more):
    return world.client.post("/preferences/", {"theme": "system", "decimal": "", "time_zone": "", **more})


def test_choices_are_kept_and_shown(world):
    assert send(world, unit_po2="kPa", unit_hb="g/L", unit_temperature="[degF]", decimal="comma", theme="dark",
                time_zone="Europe/Lisbon").status_code == 302  # fmt: skip
    user = world.people["nurse"]
    user.refresh_from_db()
    assert user.preferences == {
        "units": {"po2": "kPa", "hb": "g/L", "temperature": "[degF]"}, "entry_units": {}, "theme": "dark",
        "time_zone": "Europe/Lisbon", "decimal_comma": True,
    }  # fmt: skip
    html = world.client.get("/preferences/").content.decode()
    assert '<option value="kPa" selected>' in html
    assert 'value="Europe/Lisbon"' in html
    assert 'data-theme="dark"' in html


def test_they_hold_while_typing(world):
    send(world, unit_po2="kPa", decimal="comma")
    html = world.client.post(world.url("entry_live"), world.gas(pco2_unit="mm[Hg]", po2_unit="mm[Hg]")).content.decode()
    assert ">kPa</td>" in html
    assert "29,3" in html  # P/F 88 / 0.40 = 220 mmHg


@pytest.mark.parametrize(
    ("field", "text", "words"),
    [
        ("unit_po2", "psi", "not a unit of PO2"),
        ("time_zone", "Mars/Base", "not a time zone"),
        ("theme", "pink", "Choose one"),
        ("decimal", "dot", "Choose one"),
    ],
)
def test_nonsense_is_refused_and_stays_in_the_form(world, field, text, words):
    answer = send(world, unit_hb="g/L", **{field: text})
    assert answer.status_code == 422
    assert words in answer.content.decode().replace("&#x27;", "'")
    assert '<option value="g/L" selected>' in answer.content.decode()
    world.people["nurse"].refresh_from_db()
    assert world.people["nurse"].preferences == {}


def test_a_new_choice_also_holds_for_the_next_slip(world):
    world.client.post(world.url("entry_new"), world.gas(hb="102", hb_unit="g/L"))
    assert '<option value="g/L" selected>' in world.client.get(world.url("entry_new")).content.decode()
    send(world, unit_hb="mmol/L")
    html = world.client.get(world.url("entry_new")).content.decode()
    assert '<option value="g/L" selected>' not in html


def test_an_empty_choice_is_the_units_own(world):
    send(world, decimal="comma", unit_po2="kPa")
    send(world)
    world.people["nurse"].refresh_from_db()
    assert world.people["nurse"].preferences == {"units": {}, "entry_units": {}, "theme": "system"}


def test_every_choice_of_the_page_can_be_stored(world):
    choices = world.client.get("/preferences/").context["choices"]
    assert {"po2", "hb", "cao2", "temperature", "lactate", "mean_arterial_pressure"} <= {c.name for c in choices}
    for choice in choices:
        for unit in choice.units:
            assert send(world, **{f"unit_{choice.name}": unit.ucum}).status_code == 302


def test_login_is_needed(client, db):
    assert "/login/" in client.get("/preferences/").headers["Location"]
