"""The methods page is read off the program: nothing of the catalogue is left out, and what a unit chose is said."""

import html

import pytest
from django.urls import reverse

from tests.review.wards import make_unit, make_user
from worksheet.oxygen.finding_kinds import KINDS
from worksheet.oxygen.quantities import derived, measured

pytestmark = pytest.mark.django_db


def page(client, *args):
    answer = client.get(reverse("unit_methods" if args else "methods", args=args))
    assert answer.status_code == 200
    return html.unescape(answer.content.decode())


@pytest.fixture
def unit(client):
    unit = make_unit()
    client.force_login(make_user(unit))
    return unit


def test_every_quantity_equation_and_source_is_there(client, unit):
    text = page(client)
    for quantity in derived():
        assert f'id="q-{quantity.name}"' in text
        assert quantity.source in text
    for quantity in measured():
        assert quantity.label in text
    assert "CaO2 = k · Hb · (1 − d) · S + α · PaO2" in text


def test_references_come_from_the_code(client, unit):
    text = page(client)
    assert "Siggaard-Andersen O, Wimberley PD" in text
    assert "JCGM 100:2008" in text
    assert ":class:" not in text
    assert "``" not in text


def test_findings_are_listed(client, unit):
    text = page(client)
    assert KINDS["gap-send-co-oximetry"].words in text


def test_what_the_unit_chose_is_in_force_and_said(client, unit):
    unit.constants, unit.carry = {"hufner": 1.34, "curve": "severinghaus"}, {"hb": 8.0}
    unit.save()
    text = page(client, unit.slug)
    assert "1.34 mL/g" in text
    assert "chosen by the unit (usual: 1.39" in text
    assert "23400" in text
    assert "chosen by the unit (usual: 12 h)" in text


def test_another_units_choices_are_not_shown(client, unit):
    other = make_unit("other", "Other")
    assert client.get(reverse("unit_methods", args=[other.slug])).status_code == 404
