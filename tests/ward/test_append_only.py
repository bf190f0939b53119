"""What was entered stays: the database refuses UPDATE and DELETE, and the chain shows tampering."""

from datetime import UTC, datetime, timedelta

import pytest
from django.core.management import CommandError, call_command
from django.db import DatabaseError, IntegrityError, connection, transaction

from worksheet.oxygen.readings import Site
from worksheet.ward import audit, record
from worksheet.ward.models import AuditEvent, Entry, Patient, ReviewMark, Stay, Unit, User

pytestmark = pytest.mark.django_db
T0 = datetime(2026, 3, 1, 6, 0, tzinfo=UTC)


@pytest.fixture
def stay():
    unit = Unit.objects.create(name="Unit 7", slug="unit-7")
    return Stay.objects.create(
        unit=unit, patient=Patient.objects.create(identifier="K-1"), reference="K-1", admitted_at=T0
    )


@pytest.fixture
def nurse():
    return User.objects.create_user("nurse")


def slip(key="a", **values):
    return record.NewEntry(T0 + timedelta(hours=1), Site.ARTERIAL, {"po2": 90.0, **values}, key=key)


def refused(action):
    with pytest.raises(DatabaseError, match="append-only"), transaction.atomic():
        action()


def test_an_entry_cannot_be_changed_or_deleted(stay, nurse):
    entry, _ = record.record(stay, nurse, slip())
    refused(lambda: Entry.objects.filter(pk=entry.pk).update(po2=50.0))
    refused(lambda: Entry.objects.filter(pk=entry.pk).delete())

    def save():
        entry.po2 = 50.0
        entry.save()

    refused(save)
    assert Entry.objects.get(pk=entry.pk).po2 == 90.0


def test_raw_sql_is_refused_too(stay, nurse):
    entry, _ = record.record(stay, nurse, slip())
    with connection.cursor() as cursor:
        refused(lambda: cursor.execute("UPDATE ward_entry SET po2 = 1 WHERE id = %s", [entry.pk]))
        refused(lambda: cursor.execute("DELETE FROM ward_auditevent"))
        if connection.vendor == "sqlite":
            refused(lambda: cursor.execute("REPLACE INTO ward_auditevent SELECT * FROM ward_auditevent"))
            columns = ", ".join(f.column for f in Entry._meta.fields if f.column != "id")
            again = (
                f"REPLACE INTO ward_entry ({columns}) SELECT {columns} FROM ward_entry"  # a new number, the same key
            )
            refused(lambda: cursor.execute(again))
        else:
            refused(lambda: cursor.execute("TRUNCATE ward_auditevent"))


def test_review_marks_stay(stay, nurse):
    mark = ReviewMark.objects.create(stay=stay, user=nurse, at=T0)
    refused(lambda: ReviewMark.objects.filter(pk=mark.pk).delete())


def test_a_correction_keeps_both_and_says_why(stay, nurse):
    entry, _ = record.record(stay, nurse, slip())
    corrected = record.correct(entry, nurse, slip("b", po2=95.0), "typed the wrong line")
    assert [e.pk for e in Entry.objects.filter(stay=stay).current()] == [corrected.pk]
    assert Entry.objects.get(pk=entry.pk).po2 == 90.0
    event = AuditEvent.objects.get(action="corrected")
    assert event.detail["before"]["po2"] == 90.0
    assert event.detail["after"]["po2"] == 95.0
    assert event.detail["reason"] == "typed the wrong line"


def test_the_second_of_two_corrections_is_told(stay, nurse):
    entry, _ = record.record(stay, nurse, slip())
    first = record.correct(entry, nurse, slip("b", po2=95.0), "air bubble")
    with pytest.raises(record.AlreadyReplaced) as told:
        record.correct(entry, nurse, slip("c", po2=99.0), "air bubble")
    assert told.value.by == first
    assert not Entry.objects.filter(po2=99.0).exists()


def test_a_correction_needs_a_reason(stay, nurse):
    entry, _ = record.record(stay, nurse, slip())
    with pytest.raises(ValueError, match="reason"):
        record.correct(entry, nurse, slip("b"), "  ")
    with pytest.raises(IntegrityError), transaction.atomic():
        record.build(stay, nurse, slip("d"), replaces=entry, reason="").save()


def test_a_struck_entry_is_not_current_and_stays_readable(stay, nurse):
    entry, _ = record.record(stay, nurse, slip())
    record.strike_out(entry, nurse, "sample of another patient")
    assert not Entry.objects.filter(stay=stay).current().exists()
    assert Entry.objects.get(pk=entry.pk).po2 == 90.0


def test_the_same_form_sent_again_stores_nothing_twice(stay, nurse):
    first, new = record.record(stay, nurse, slip())
    again, newer = record.record(stay, nurse, slip())
    assert (new, newer, first.pk) == (True, False, again.pk)
    assert AuditEvent.objects.filter(action="recorded").count() == 1


def write_three():
    return [audit.write("nurse", "viewed", unit="Unit 7", subject=f"K-{n}", number=n) for n in range(3)]


def without_triggers(statement, *values):
    """Somebody with the keys of the database takes the triggers off first."""
    with connection.cursor() as cursor:
        if connection.vendor == "sqlite":
            for name in ("update", "delete", "replace"):
                cursor.execute(f"DROP TRIGGER ward_auditevent_no_{name}")
        else:
            cursor.execute("ALTER TABLE ward_auditevent DISABLE TRIGGER USER")
        cursor.execute(statement, values)


def test_verify_audit_says_that_an_untouched_chain_holds(capsys):
    write_three()
    call_command("verify_audit")
    assert "3 events" in capsys.readouterr().out


def test_verify_audit_finds_a_changed_event():
    events = write_three()
    without_triggers("UPDATE ward_auditevent SET actor = 'somebody' WHERE id = %s", events[1].pk)
    with pytest.raises(CommandError, match=f"event {events[1].pk}: this event was changed"):
        call_command("verify_audit")


def test_verify_audit_finds_content_that_was_changed_or_erased_without_telling():
    events = write_three()
    without_triggers("UPDATE ward_auditevent SET subject = 'K-9' WHERE id = %s", events[1].pk)
    with pytest.raises(CommandError, match=f"event {events[1].pk}: the content of this event was changed"):
        call_command("verify_audit")
    with connection.cursor() as cursor:
        cursor.execute(
            "UPDATE ward_auditevent SET subject = '', detail = '{}', salt = '' WHERE id = %s", [events[1].pk]
        )
    with pytest.raises(CommandError, match=f"event {events[1].pk}: the content of this event was erased"):
        call_command("verify_audit")


@pytest.mark.parametrize(
    ("statement", "wrong"),
    [("UPDATE ward_entry SET po2 = 55 WHERE id = %s", "is not what was recorded"),
     ("UPDATE ward_entry SET time = '2026-03-02 06:00:00+00:00' WHERE id = %s", "is not what was recorded"),
     ("DELETE FROM ward_entry WHERE id = %s", "is gone")],
)  # fmt: skip
def test_verify_audit_finds_an_entry_that_was_changed_past_the_program(stay, nurse, statement, wrong):
    entry, _ = record.record(stay, nurse, slip())
    second, _ = record.record(stay, nurse, slip("b", po2=70.0))
    record.correct(second, nurse, slip("c", po2=71.0), "typed the wrong line")
    call_command("verify_audit")
    with connection.cursor() as cursor:
        if connection.vendor == "sqlite":
            cursor.execute("DROP TRIGGER ward_entry_no_update")
            cursor.execute("DROP TRIGGER ward_entry_no_delete")
        else:
            cursor.execute("SET CONSTRAINTS ALL IMMEDIATE")  # no trigger may wait while others are switched off
            cursor.execute("ALTER TABLE ward_entry DISABLE TRIGGER USER")
        cursor.execute(statement, [entry.pk])
    with pytest.raises(CommandError, match=f"entry {entry.pk} {wrong}"):
        call_command("verify_audit")


def test_events_written_before_their_content_had_a_digest_still_hold():
    old = AuditEvent(at=T0, actor="nurse", action="viewed", subject="K-1", detail={"b": 1, "a": [2]})
    old.hash = audit.digest(old)
    old.save(force_insert=True)
    write_three()
    call_command("verify_audit")


def test_verify_audit_finds_a_removed_event():
    events = write_three()
    without_triggers("DELETE FROM ward_auditevent WHERE id = %s", events[1].pk)
    with pytest.raises(CommandError, match=f"event {events[2].pk}"):
        call_command("verify_audit")


def test_verify_audit_finds_an_inserted_event():
    events = write_three()
    AuditEvent.objects.create(at=T0, actor="x", action="viewed", previous_hash=events[-1].hash, hash="0" * 64)
    with pytest.raises(CommandError, match="this event was changed"):
        call_command("verify_audit")


def test_verify_audit_finds_that_the_last_events_were_cut_off():
    """A chain cut at its end still links; the number and hash of the head, kept apart, tell."""
    events = write_three()
    without_triggers("DELETE FROM ward_auditevent WHERE id = %s", events[2].pk)
    call_command("verify_audit")
    with pytest.raises(CommandError, match="ends before"):
        call_command("verify_audit", head=events[2].hash)
