"""Events between samples: what they need, what they change, and that they are stored once."""

from datetime import timedelta

import pytest
from django.utils import timezone

from worksheet.oxygen.readings import Device, Event, Site
from worksheet.ward import record
from worksheet.ward.models import AuditEvent, Bed, Entry, Patient, Stay


def send(world, **more):
    return world.client.post(world.url("event_new"), world.blank(site="", **more))


def test_a_transfusion_has_units(world):
    assert send(world, kind="1", amount="2", note="O negative").status_code == 302
    entry = Entry.objects.get()
    assert (entry.event, entry.event_amount, entry.note) == (Event.TRANSFUSION, 2.0, "O negative")
    assert entry.typed["event_amount"] == {"text": "2", "unit": "units"}


@pytest.mark.parametrize(
    ("fields", "words"),
    [
        ({"kind": ""}, "Choose what happened"),
        ({"kind": "9"}, "Choose what happened"),
        ({"kind": "1"}, "How many units"),
        ({"kind": "1", "amount": "two"}, "is not a number"),
        ({"kind": "1", "amount": "300"}, "300 units is impossible"),
        ({"kind": "1", "amount": "2 mL"}, "write the number alone"),
        ({"kind": "2", "amount": "90000"}, "90000 mL is impossible"),
        ({"kind": "3"}, "Choose the device"),
        ({"kind": "3", "device": "7", "fio2": "140"}, "FiO2 140 % is impossible"),
        ({"kind": "4"}, "Choose the bed"),
        ({"kind": "5"}, "Say in the note"),
        ({"kind": "2", "clock": "xx"}, "24 h clock"),
    ],
)
def test_what_is_missing_or_impossible_is_said(world, fields, words):
    answer = send(world, **fields)
    assert answer.status_code == 422
    assert words in answer.content.decode()
    assert not Entry.objects.exists()


def test_a_bleed_may_be_recorded_before_it_is_measured(world):
    assert send(world, kind="2").status_code == 302
    assert Entry.objects.get().event_amount is None


def test_a_large_transfusion_is_asked_once(world):
    answer = send(world, kind="1", amount="14")
    assert "14 units is unlikely" in answer.content.decode()
    token = [s.notice.token for s in answer.context["summary"]]
    assert send(world, kind="1", amount="14", confirm=token).status_code == 302


def test_haemoglobin_is_not_carried_across_a_recorded_bleed(world):
    hb = record.NewEntry(timezone.now() - timedelta(hours=2), Site.ARTERIAL, {"hb": 8.2, "po2": 80.0})
    record.record(world.stay, world.people["nurse"], hb)
    at = (timezone.now() - timedelta(hours=1)).astimezone(world.unit.zone)
    send(world, kind="2", amount="800", date=f"{at:%Y-%m-%d}", clock=f"{at:%H:%M}")
    html = world.client.post(world.url("entry_live"), world.gas(hb="")).content.decode()
    assert "Carried: Hb" not in html
    assert "no haemoglobin" in html


def test_a_device_change_keeps_its_settings(world):
    send(world, kind="3", device="5", fio2="0,6", oxygen_flow="50")
    entry = Entry.objects.get()
    assert (entry.event, entry.device, entry.fio2, entry.oxygen_flow) == (
        Event.DEVICE_CHANGE,
        Device.HIGH_FLOW,
        0.6,
        50,
    )


def test_a_bed_move_moves_the_stay(world):
    bed = Bed.objects.get(name="2")
    sent = world.blank(site="", kind="4", bed=str(bed.pk))
    for _ in range(2):
        assert world.client.post(world.url("event_new"), sent).status_code == 302, "sent again: moved once"
    world.stay.refresh_from_db()
    assert world.stay.bed == bed
    assert Entry.objects.get().note == "to bed 2"
    assert AuditEvent.objects.get(action="moved").detail == {"before": "1", "after": "2"}


def test_a_taken_bed_is_refused(world):
    bed = Bed.objects.get(name="2")
    Stay.objects.create(unit=world.unit, patient=Patient.objects.create(identifier="T-2"), bed=bed, reference="T-2")
    assert "Bed 2 is taken by T-2" in send(world, kind="4", bed=str(bed.pk)).content.decode()
    assert "in bed 1 already" in send(world, kind="4", bed=str(world.stay.bed.pk)).content.decode()
    assert not Entry.objects.exists()


def test_an_event_is_corrected_on_its_own_form(world):
    send(world, kind="1", amount="2")
    entry = Entry.objects.get()
    url = world.url("entry_correct", entry.pk)
    page = world.client.get(url)
    assert "Correct an event" in page.content.decode()
    assert page.context["form"].amount_text == "2"
    slip = page.context["slip"]
    sent = {"kind": "1", "amount": "3", "date": slip.date, "clock": slip.clock, "key": slip.key, "begun_by": "nurse"}
    assert "why the entry is corrected" in world.client.post(url, sent).content.decode()
    assert world.client.post(url, {**sent, "reason": "three, not two"}).status_code == 302
    assert Entry.objects.current().get().event_amount == 3
    strike = world.client.get(world.url("entry_strike", Entry.objects.current().get().pk)).content.decode()
    assert "transfusion of red cells" in strike
    assert "3 units" in strike
    late = {**sent, "amount": "4", "reason": "four", "key": "late"}
    told = world.client.post(url, late).content.decode()
    assert "nurse corrected this event in the meantime" in told
    assert Entry.objects.current().get().event_amount == 3
