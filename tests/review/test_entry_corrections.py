"""Corrections and strike-outs: a reason, both versions kept, and the second of two people is told."""

from datetime import timedelta

import pytest
from django.utils import timezone

from worksheet.oxygen.readings import Device, Event, Site
from worksheet.ward import record
from worksheet.ward.models import AuditEvent, Entry


@pytest.fixture
def entry(world):
    at = (timezone.now() - timedelta(hours=1)).replace(second=0, microsecond=0)
    typed = {"po2": {"text": "11,7", "unit": "kPa"}}
    new = record.NewEntry(
        at, Site.ARTERIAL, {"po2": 11.7 * 7.500617, "ph": 7.4, "hb": 9.8}, typed, note="from the slip"
    )
    return record.record(world.stay, world.people["nurse"], new)[0]


def form_of(answer, **more):
    """What the page would send back."""
    slip = answer.context["slip"]
    fields = {f.name: f.text for f in slip.fields.values()} | {
        f"{f.name}_unit": f.unit.ucum for f in slip.fields.values()
    }
    return fields | {
        "date": slip.date, "clock": slip.clock, "site": slip.site, "device": slip.device, "sample": slip.sample,
        "note": slip.note, "key": slip.key, "begun_by": slip.begun_by, **more,
    }  # fmt: skip


def test_the_form_opens_with_what_was_typed(world, entry):
    answer = world.client.get(world.url("entry_correct", entry.pk))
    html = answer.content.decode()
    assert 'value="11,7"' in html
    assert '<option value="kPa" selected>' in html
    assert "from the slip" in html


def test_a_correction_keeps_both(world, entry):
    sent = form_of(world.client.get(world.url("entry_correct", entry.pk)), hb="8.9", reason="read the wrong line")
    assert world.client.post(world.url("entry_correct", entry.pk), sent).status_code == 302
    new = Entry.objects.get(replaces=entry)
    assert (new.hb, new.reason, new.time) == (8.9, "read the wrong line", entry.time)
    assert new.po2 == pytest.approx(entry.po2)
    assert list(Entry.objects.current()) == [new]
    assert AuditEvent.objects.filter(action="corrected").count() == 1


def test_a_correction_needs_a_reason(world, entry):
    sent = form_of(world.client.get(world.url("entry_correct", entry.pk)), hb="8.9", reason="  ")
    answer = world.client.post(world.url("entry_correct", entry.pk), sent)
    assert "why the entry is corrected" in answer.content.decode()
    assert 'value="8.9"' in answer.content.decode()
    assert Entry.objects.count() == 1


def test_a_correction_sent_twice_is_stored_once(world, entry):
    sent = form_of(world.client.get(world.url("entry_correct", entry.pk)), hb="8.9", reason="wrong line")
    assert [world.client.post(world.url("entry_correct", entry.pk), sent).status_code for _ in range(2)] == [302, 302]
    assert Entry.objects.count() == 2


def test_the_second_of_two_correctors_sees_both_versions_and_loses_nothing(world, entry):
    mine = form_of(world.client.get(world.url("entry_correct", entry.pk)), hb="8.9", reason="wrong line")
    record.correct(
        entry,
        world.people["other"],
        record.NewEntry(entry.time, Site.ARTERIAL, {"hb": 9.1, "po2": 88.0, "ph": 7.31}),
        "clot",
    )
    answer = world.client.post(world.url("entry_correct", entry.pk), mine)
    html = answer.content.decode()
    assert answer.status_code == 422
    assert "other was faster" in html
    assert "clot" in html
    rows = {label: texts for label, *texts in answer.context["conflict_rows"]}
    assert rows["Hb"] == ["9.8 g/dL", "9.1 g/dL", "8.9 g/dL"]
    theirs = Entry.objects.get(replaces=entry)
    assert world.url("entry_correct", theirs.pk) in html, "saving again corrects the newer version"
    assert rows["pH"] == ["7.40", "7.31", "not changed; theirs is in the form now"]
    again = form_of(answer, reason="wrong line")
    assert (again["hb"], again["ph"]) == ("8.9", "7.31"), "mine where I changed it, theirs where I did not"
    assert world.client.post(world.url("entry_correct", theirs.pk), again).status_code == 302
    assert (Entry.objects.current().get().hb, Entry.objects.current().get().ph) == (8.9, 7.31)


def test_correcting_what_was_struck_out_meanwhile_becomes_a_new_entry(world, entry):
    mine = form_of(world.client.get(world.url("entry_correct", entry.pk)), hb="8.9", reason="wrong line")
    record.strike_out(entry, world.people["other"], "another patient")
    html = world.client.post(world.url("entry_correct", entry.pk), mine).content.decode()
    assert "was struck out" in html
    assert f'action="{world.url("entry_new")}"' in html
    assert Entry.objects.count() == 2


def test_an_old_version_leads_to_the_newest(world, entry):
    newer = record.correct(
        entry, world.people["other"], record.NewEntry(entry.time, Site.ARTERIAL, {"hb": 9.1}), "clot"
    )
    answer = world.client.get(world.url("entry_correct", entry.pk))
    assert answer.headers["Location"] == world.url("entry_correct", newer.pk)


def test_an_estimate_is_not_shown_as_if_it_was_measured(world):
    sent = world.gas(fio2="", device="2", oxygen_flow="4", use_estimate="1")
    world.client.post(world.url("entry_new"), sent)
    entry = Entry.objects.get()
    answer = world.client.get(world.url("entry_correct", entry.pk))
    assert answer.context["slip"].fields["fio2"].text == ""
    assert answer.context["slip"].use_estimate
    assert 'name="use_estimate" value="1" checked' in answer.content.decode()


def test_a_value_received_by_file_opens_in_its_own_unit_without_loss(world):
    new = record.NewEntry(timezone.now() - timedelta(hours=1), Site.ARTERIAL, {"po2": 88.3},
                          {"po2": {"text": "88.3", "unit": "mm[Hg]"}})  # fmt: skip
    entry, _ = record.record(world.stay, world.people["nurse"], new)
    slip = world.client.get(world.url("entry_correct", entry.pk)).context["slip"]
    assert slip.fields["po2"].text == "88.3"


def test_an_entry_that_marks_an_event_too_keeps_it(world):
    new = record.NewEntry(timezone.now() - timedelta(hours=1), Site.ARTERIAL, {"hb": 9.0, "po2": 80.0},
                          event=Event.DEVICE_CHANGE, device=Device.VENTILATOR)  # fmt: skip
    entry, _ = record.record(world.stay, world.people["nurse"], new)
    sent = form_of(world.client.get(world.url("entry_correct", entry.pk)), hb="9.2", reason="typo")
    world.client.post(world.url("entry_correct", entry.pk), sent)
    assert Entry.objects.get(replaces=entry).event == Event.DEVICE_CHANGE


def test_strike_out(world, entry):
    url = world.url("entry_strike", entry.pk)
    assert "stays readable" in world.client.get(url).content.decode()
    assert "why the entry is struck out" in world.client.post(url, {"reason": " "}).content.decode()
    assert Entry.objects.current().count() == 1
    assert world.client.post(url, {"reason": "another patient", "key": "s1"}).status_code == 302
    assert world.client.post(url, {"reason": "another patient", "key": "s1"}).status_code == 302, (
        "sent again: stored once"
    )
    assert Entry.objects.current().count() == 0
    assert Entry.objects.get(struck=True).reason == "another patient"


def test_striking_out_what_was_corrected_meanwhile_is_told(world, entry):
    record.correct(entry, world.people["other"], record.NewEntry(entry.time, Site.ARTERIAL, {"hb": 9.1}), "clot")
    html = world.client.post(world.url("entry_strike", entry.pk), {"reason": "double", "key": "s2"}).content.decode()
    assert "Somebody was faster" in html
    assert "other corrected this entry" in html
    assert Entry.objects.current().get().hb == 9.1


def test_another_stays_entry_is_not_reached(world, entry):
    from worksheet.ward.models import Patient, Stay

    Stay.objects.create(unit=world.unit, patient=Patient.objects.create(identifier="T-2"), reference="T-2")
    for name in ("entry_correct", "entry_strike"):
        from django.urls import reverse

        assert world.client.get(reverse(name, args=["north", "T-2", entry.pk])).status_code == 404
