"""Explanations: the equation in words gives the number that the engine gives, and each input says where it is from."""

import html
import math
import re

import pytest
from django.urls import reverse
from django.utils import timezone

from tests.review.wards import add_gas, make_stay, make_unit, make_user
from worksheet.oxygen.constants import Constants
from worksheet.oxygen.quantities import CATALOGUE, DERIVED
from worksheet.oxygen.readings import Site
from worksheet.review.equations import EQUATIONS, equation_of, numbers_put_in, terms_of
from worksheet.ward import demo, record
from worksheet.ward.display import Display
from worksheet.ward.models import Role, Unit
from worksheet.ward.sheet import open_sheet

pytestmark = pytest.mark.django_db


@pytest.fixture
def ward(client):
    unit = make_unit()
    nurse = make_user(unit)
    client.force_login(nurse)
    stay = make_stay(unit, 1)
    add_gas(stay, nurse, 3)
    entry = add_gas(stay, nurse, 0.5, hb=None)
    add_gas(stay, nurse, 0.45, Site.CENTRAL_VENOUS, ph=7.35, pco2=46.0, po2=36.0, so2=0.66)
    return unit, nurse, client, stay, entry


def page(client, stay, entry, name, **headers):
    answer = client.get(reverse("explain", args=[stay.unit.slug, stay.reference, entry.pk, name]), headers=headers)
    assert answer.status_code == 200
    return html.unescape(answer.content.decode())


def test_p50_names_the_pair_that_it_was_solved_from(ward):
    """Venous where there is a paired sample with a saturation, else arterial; and the numbers are that pair's."""
    _unit, nurse, client, stay, entry = ward
    venous = page(client, stay, entry, "p50")
    assert "measured venous PO2 and saturation" in venous
    assert "0.660" in venous
    assert "central venous sample of" in venous
    alone = add_gas(stay, nurse, 20, so2=0.93, po2=65.0)
    arterial = page(client, stay, alone, "p50")
    assert "measured PaO2 and sO2" in arterial
    assert "0.930" in arterial
    assert "venous sample of" not in arterial


def test_every_derived_quantity_has_an_equation():
    assert set(EQUATIONS) == set(DERIVED)


@pytest.fixture(scope="module")
def demo_sheet(django_db_setup, django_db_blocker):
    """All invented patients of the demo, derived."""
    from django.db import transaction

    with django_db_blocker.unblock(), transaction.atomic():
        unit = demo.make(timezone.now(), "invented-password-1")
        yield open_sheet(unit, list(unit.stays.all()))
        transaction.set_rollback(True)


@pytest.mark.parametrize("name", [n for n, e in EQUATIONS.items() if e.right])
def test_the_equation_gives_the_engines_number_on_every_row(demo_sheet, name):
    sheet, seen = demo_sheet, 0
    equation = equation_of(name, sheet.constants)
    for row in range(len(sheet.readings)):
        value = float(sheet.derived[name][row])
        terms = terms_of(equation, sheet, row)
        if math.isfinite(value) and all(math.isfinite(t) for t in terms.values()):
            right = max(equation.right(terms), 0.0) if name == "shunt_fraction" else equation.right(terms)
            assert right == pytest.approx(value, rel=1e-9, abs=1e-9), row
            seen += 1
    assert seen >= 20


def test_numbers_put_in_work_out_by_hand():
    put = numbers_put_in(EQUATIONS["cao2"], {"k": 1.39, "hb": 15.0, "inactive": 0.0, "saturation": 1.0, "alpha": 0.0031,
                                             "po2": 100.0}, Display(Unit(time_zone="UTC").zone))  # fmt: skip
    assert put == "1.39 × 15.0 × (1 − 0.000) × 1.000 + 0.0031 × 100"


def test_a_page_shows_equation_numbers_and_uncertainty(ward):
    _, _, client, stay, entry = ward
    text = page(client, stay, entry, "do2i")
    assert "DO2I = 10 · CI · CaO2" in text
    assert re.search(r"10 × \d\.\d\d × \d+\.\d\d = \d+ mL/min/m²", text)
    assert re.search(r"\d+ ± \d+ mL/min/m²", text)
    assert re.search(r"cardiac output or index</th><td class=\"number\">\d+ %", text)


def test_a_carried_input_says_from_when_and_how_old(ward):
    _, _, client, stay, entry = ward
    text = page(client, stay, entry, "cao2")
    assert re.search(r"carried from 20\d\d-\d\d-\d\d \d\d:\d\d \w+, 2 h 30 old", text)
    assert "haemoglobin carried from an earlier sample" in text
    assert "Dominguez de Villota 1981" in text


def test_a_constant_that_the_unit_chose_is_the_one_put_in(ward):
    unit, _, client, stay, entry = ward
    unit.constants = {"hufner": 1.34}
    unit.save()
    assert "1.34 × 10.5" in page(client, stay, entry, "cao2")


def test_the_dialog_gets_the_part_and_the_page_the_whole(ward):
    _, _, client, stay, entry = ward
    assert "<html" in page(client, stay, entry, "o2er")
    part = page(client, stay, entry, "o2er", **{"HX-Request": "true"})
    assert "<html" not in part
    assert "central venous" in part


@pytest.mark.parametrize("name", sorted(DERIVED))
def test_every_quantity_opens(ward, name):
    _, _, client, stay, entry = ward
    assert CATALOGUE[name].label in page(client, stay, entry, name)


def test_what_may_not_be_seen_or_does_not_stand_is_404(ward):
    unit, nurse, client, stay, entry = ward
    where = reverse("explain", args=[unit.slug, stay.reference, entry.pk, "cao2"])
    assert client.get(where.replace("cao2", "hb")).status_code == 404
    assert client.get(where.replace(f"/{entry.pk}/", "/999999/")).status_code == 404
    record.strike_out(entry, nurse, "wrong patient")
    assert client.get(where).status_code == 404
    client.force_login(make_user(make_unit("other", "Other"), "bert", Role.LEAD))
    assert client.get(where).status_code == 404


def test_the_curve_in_force_is_the_one_explained():
    assert "23400" in equation_of("so2_from_po2", Constants(curve="severinghaus")).text
    assert "tanh" in equation_of("so2_from_po2", Constants()).text
    assert "0.425" in equation_of("bsa", Constants(bsa_formula="dubois")).text
