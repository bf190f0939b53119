"""The constants of a document: every one told, with what the unit changed."""

from dataclasses import fields, replace

import pytest

from tests.report import world
from worksheet.oxygen.constants import DEFAULT, CarryLimits, Constants
from worksheet.oxygen.quantities import CATALOGUE
from worksheet.report import methods
from worksheet.report.timeline import timeline
from worksheet.ward.models import Unit


def test_every_constant_and_limit_is_told():
    assert {*methods.CONSTANTS, *methods.CHOICES, "carry"} == {item.name for item in fields(Constants)}
    assert set(methods.CARRIES) == {item.name for item in fields(CarryLimits)}


def test_table_holds_what_is_in_force():
    table = methods.constants_table(DEFAULT, world.DISPLAY)
    told = {row[0]: row[1] for row in table["rows"]}
    assert told["Oxygen bound by active haemoglobin"] == "1.39 mL/g"
    assert told["Oxygen solubility of blood, 37 °C"] == "0.0031 mL/dL/mmHg"
    assert told["Haemoglobin carried (not across a transfusion or bleed)"] == "12 h"


def test_what_a_unit_changed_is_said():
    changed = replace(DEFAULT, hufner=1.34, curve="severinghaus", carry=replace(CarryLimits(), hb=6.0))
    rows = {row[0]: row for row in methods.constants_table(changed, world.DISPLAY)["rows"]}
    assert rows["Oxygen bound by active haemoglobin"][1:] == ["1.34 mL/g", "chosen by the unit (usual: 1.39)"]
    assert rows["Dissociation curve"][2] == "chosen by the unit"
    assert rows["Haemoglobin carried (not across a transfusion or bleed)"][1:] == ["6 h", "chosen by the unit"]


@pytest.mark.django_db
def test_equations_of_every_derived_column_and_uncertainties_in_force():
    stay = world.make_stay()
    Unit.objects.filter(pk=stay.unit.pk).update(uncertainties={"hb": [0.0, 0.05]})
    stay.unit.refresh_from_db()
    world.add_gases(stay, 2)
    payload = timeline(world.order(stay), "0" * 64)
    head = [name.split("\n")[0] for name in payload["entries"]["head"]]
    told = {row[0].split(" (")[0] for row in payload["equations"]["rows"]}
    derived = {quantity.symbol for quantity in CATALOGUE.values() if quantity.derived}
    assert {name for name in head if name in derived} <= told
    assert all(row[1] and row[2] for row in payload["equations"]["rows"])
    sds = {row[0]: row[1] for row in payload["uncertainties"]["rows"]}
    assert sds["Hb (g/dL)"] == "5 %"
