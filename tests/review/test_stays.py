"""Taking a patient in, changing the facts of a stay, ending it."""

import pytest
from django.utils import timezone

from worksheet.ward.models import AuditEvent, Bed, Patient, Stay


def form(world, **more):
    at = timezone.now().astimezone(world.unit.zone)
    return {"identifier": "T-2", "date": f"{at:%Y-%m-%d}", "clock": f"{at:%H:%M}", **more}


def take_in(world, **more):
    return world.client.post("/u/north/stay/new", form(world, **more))


def test_a_patient_is_taken_in(world):
    bed = Bed.objects.get(name="2")
    answer = take_in(
        world, bed=str(bed.pk), height="1,72", height_unit="m", weight="165", weight_unit="[lb_av]", age="61"
    )
    assert answer.headers["Location"] == "/u/north/stay/T-2/entry/new"
    stay = Stay.objects.get(reference="T-2")
    assert stay.height == pytest.approx(172)
    assert stay.weight == pytest.approx(165 * 0.45359237)
    assert (stay.bed, stay.patient.identifier, stay.discharged_at) == (bed, "T-2", None)
    assert AuditEvent.objects.get(action="taken in").detail["age"] == 61


@pytest.mark.parametrize(
    ("fields", "words"),
    [
        ({"identifier": ""}, "Type the patient's identifier"),
        ({"identifier": "a/b"}, "cannot be a reference"),
        ({"reference": "new"}, "cannot be a reference"),
        ({"identifier": "T-1"}, "is here already, in bed 1"),
        ({"reference": "T-1"}, "call this one T-1-2"),
        ({"bed": "999999"}, "Choose a bed of this unit"),
        ({"height": "1.72"}, "Height 1.72 cm is impossible"),
        ({"height": "tall"}, "is not a number"),
        ({"clock": "25:00"}, "24 h clock"),
        ({"date": "2999-01-01"}, "in the future"),
    ],
)
def test_what_cannot_be_is_said(world, fields, words):
    answer = take_in(world, **fields)
    assert answer.status_code == 422
    assert words in answer.content.decode().replace("&#x27;", "'")
    assert Stay.objects.count() == 1
    assert Patient.objects.count() == 1


def test_a_taken_bed_is_refused(world):
    assert "Bed 1 is taken by T-1" in take_in(world, bed=str(world.stay.bed.pk)).content.decode()


def test_a_patient_who_comes_back_keeps_the_identifier(world):
    world.stay.discharged_at = timezone.now()
    world.stay.save()
    assert take_in(world, identifier="T-1", reference="T-1-2").status_code == 302
    assert Patient.objects.count() == 1
    assert Stay.objects.count() == 2


def test_facts_are_changed_and_the_stay_ended_and_opened_again(world):
    page = world.client.get(world.url("stay_edit"))
    assert 'value="170"' in page.content.decode()
    sent = form(world, height="171", weight="70", age="60", note="n")
    at = timezone.now().astimezone(world.unit.zone)
    world.client.post(world.url("stay_edit"), {**sent, "date": "2026-01-01", "clock": "10:00"})
    world.stay.refresh_from_db()
    assert world.stay.height == 171
    ended = {**sent, "date": "2026-01-01", "clock": "10:00", "end_date": f"{at:%Y-%m-%d}", "end_clock": f"{at:%H:%M}"}
    world.client.post(world.url("stay_edit"), ended)
    world.stay.refresh_from_db()
    assert world.stay.discharged_at is not None
    assert not Stay.objects.present().exists()
    other = Stay.objects.create(
        unit=world.unit, patient=Patient.objects.create(identifier="X"), reference="X", bed=world.stay.bed
    )
    again = {**sent, "date": "2026-01-01", "clock": "10:00"}
    assert "taken by X" in world.client.post(world.url("stay_edit"), again).content.decode()
    other.discharged_at = timezone.now()
    other.save()
    assert world.client.post(world.url("stay_edit"), again).status_code == 302
    assert Stay.objects.present().count() == 1
    assert AuditEvent.objects.filter(action="stay changed").count() == 3


def test_an_hour_that_comes_twice_is_asked_and_kept(world):
    sent = form(world, date="2025-10-26", clock="02:30", height="170", weight="70", age="60")
    assert "comes twice" in world.client.post(world.url("stay_edit"), sent).content.decode()
    assert world.client.post(world.url("stay_edit"), {**sent, "clock": "02:30 B"}).status_code == 302
    world.stay.refresh_from_db()
    assert world.stay.admitted_at.isoformat() == "2025-10-26T01:30:00+00:00"
    assert 'value="02:30 B"' in world.client.get(world.url("stay_edit")).content.decode()


def test_the_end_is_not_before_the_start(world):
    sent = form(world, end_date="2020-01-01", end_clock="10:00")
    assert "before the admission" in world.client.post(world.url("stay_edit"), sent).content.decode()


@pytest.mark.parametrize(("who", "status"), [("reader", 403), ("stranger", 404)])
def test_who_may_not(world, who, status):
    world.as_(who)
    assert take_in(world).status_code == status
    assert Stay.objects.count() == 1
