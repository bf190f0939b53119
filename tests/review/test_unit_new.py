"""A unit is made by an administrator, with its beds; its lead changes them later."""

import pytest

from worksheet.ward import beds
from worksheet.ward.models import AuditEvent, Membership, Patient, Role, Stay, Unit, User

pytestmark = pytest.mark.django_db
FORM = {"name": "Unit 9", "slug": "unit-9", "time_zone": "Europe/Zurich", "beds": "1-3, side room"}


def test_an_administrator_makes_a_unit_and_goes_on_to_invite(client):
    client.force_login(User.objects.create_superuser("admin"))
    answer = client.post("/units/new/", FORM)
    assert answer.url == "/u/unit-9/members/"
    unit = Unit.objects.get(slug="unit-9")
    assert [bed.name for bed in unit.beds.all()] == ["1", "2", "3", "side room"]
    assert AuditEvent.objects.filter(action="made the unit", actor="admin").exists()
    assert "Unit 9" in client.get("/u/unit-9/").content.decode()


@pytest.mark.parametrize(
    ("field", "value", "words"),
    [
        ("beds", "", "required"),
        ("beds", "1, 1", "Bed 1 is there twice"),
        ("beds", "12-1", "not a range"),
        ("beds", "1-900", "not a range"),
        ("beds", "x" * 21, "too long"),
        ("time_zone", "Mars/Base", "not a time zone"),
        ("slug", "new", "taken"),
        ("slug", "a b", "slug"),
        ("name", "", "required"),
    ],
)
def test_what_cannot_be_is_said_and_nothing_is_made(client, field, value, words):
    client.force_login(User.objects.create_superuser("admin"))
    answer = client.post("/units/new/", {**FORM, field: value})
    assert answer.status_code == 400
    assert words in answer.content.decode()
    assert not Unit.objects.exists()


def test_a_bed_with_a_patient_in_it_stays():
    unit = Unit.objects.create(name="Unit 9", slug="unit-9")
    beds.set_beds(unit, ["1", "2"])
    Stay.objects.create(
        unit=unit, patient=Patient.objects.create(identifier="K-1"), reference="K-1", bed=unit.beds.get(name="2")
    )
    with pytest.raises(ValueError, match="patient in bed 2"):
        beds.set_beds(unit, ["1", "3"])
    beds.set_beds(unit, ["2", "3", "1"])
    assert [bed.name for bed in unit.beds.all()] == ["2", "3", "1"]
    assert Stay.objects.get().bed.name == "2"


def test_the_lead_changes_the_beds(client):
    unit = Unit.objects.create(name="Unit 9", slug="unit-9")
    beds.set_beds(unit, ["1", "2"])
    lead = User.objects.create_user("lead")
    Membership.objects.create(user=lead, unit=unit, role=Role.LEAD)
    client.force_login(lead)
    form = client.get("/u/unit-9/settings/").context["form"]
    values = {name: item.initial if item.initial is not None else "" for name, item in form.fields.items()}
    values |= {"time_zone": "UTC", "paper": "a4", "beds": "1-4"}
    for box in ("decimal_comma", "second_factor"):
        values.pop(box)
    assert client.post("/u/unit-9/settings/", values).status_code == 302
    assert unit.beds.count() == 4
    assert AuditEvent.objects.get(action="changed the unit").detail["changed"]["beds"] == [
        ["1", "2"],
        ["1", "2", "3", "4"],
    ]
