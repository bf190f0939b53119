"""A patient who is deleted on lawful order is gone from everywhere, and the chain still holds."""

from datetime import UTC, datetime

import pytest
from django.apps import apps
from django.core.management import CommandError, call_command
from django.db import DatabaseError, transaction

from worksheet.oxygen.readings import Site
from worksheet.transfer.models import QueuedRow, RawMessage
from worksheet.ward import audit, record
from worksheet.ward.models import AuditEvent, Draft, Entry, Patient, ReviewMark, Stay, Unit, User

pytestmark = pytest.mark.django_db
T0 = datetime(2026, 3, 1, 6, tzinfo=UTC)


@pytest.fixture
def two():
    """Two patients of one unit with entries, corrections, marks, drafts, waiting rows and messages."""
    unit, nurse = Unit.objects.create(name="Unit 7", slug="unit-7"), User.objects.create_user("nurse")
    for identifier, reference, name in (("MRN-31", "K-31", "Marker Person"), ("MRN-3", "K-3", "Other Person")):
        patient = Patient.objects.create(identifier=identifier, name=name)
        stay = Stay.objects.create(unit=unit, patient=patient, reference=reference)
        slip = record.NewEntry(T0, Site.ARTERIAL, {"po2": 90.0}, note=f"seen by {name}", key=f"{reference}-1")
        first, _ = record.record(stay, nurse, slip)
        record.correct(first, nurse, record.NewEntry(T0, Site.ARTERIAL, {"po2": 95.0}), f"mixed up with {reference}")
        ReviewMark.objects.create(stay=stay, user=nurse, at=T0)
        Draft.objects.create(stay=stay, user=nurse, data={"note": name})
        QueuedRow.objects.create(unit=unit, source="f", place="1", fate="x", reason="r", patient=identifier,
                                 digest=reference)  # fmt: skip
        RawMessage.objects.create(unit=unit, sender="s", control_id=reference, digest=reference,
                                  content=f"PID|||{identifier}^^^||{name}".encode())  # fmt: skip
        audit.write("nurse", "viewed", unit=unit.name, subject=reference)
    audit.write("nurse", "exported", unit=unit.name, subject="all stays", stays=["K-31", "K-3"])
    return unit


def everything():
    """All that is stored, as one text."""
    rows = [list(model._default_manager.values()) for model in apps.get_models()]
    return repr(rows)


def test_nothing_of_the_patient_is_left_and_the_chain_holds(two, capsys):
    call_command("forget_patient", "MRN-31", reason="order 12/2026", yes=True)
    assert "1 stays and 2 entries" in capsys.readouterr().out
    left = everything()
    for word in ("MRN-31", "K-31", "Marker Person"):
        assert word not in left
    assert Entry.objects.count() == 2
    assert Stay.objects.get().reference == "K-3"
    assert {AuditEvent.objects.filter(subject="K-3").count(), RawMessage.objects.count()} == {3, 1}
    call_command("verify_audit")
    told = AuditEvent.objects.get(action="erased a patient")
    assert told.detail["reason"] == "order 12/2026"
    assert len(told.detail["events"]) == 4  # recorded, corrected, viewed, exported
    assert AuditEvent.objects.filter(pk__in=told.detail["events"]).values_list("actor", flat=True)[0] == "nurse"


def test_the_triggers_are_back_afterwards(two):
    call_command("forget_patient", "MRN-31", reason="order", yes=True)
    for action in (lambda: Entry.objects.update(po2=1.0), lambda: AuditEvent.objects.all()._raw_delete("default")):
        with pytest.raises(DatabaseError, match="append-only"), transaction.atomic():
            action()


def test_without_yes_nothing_is_deleted(two, capsys):
    before = everything()
    call_command("forget_patient", "MRN-31", reason="order")
    assert "would go" in capsys.readouterr().out
    assert everything() == before


@pytest.mark.parametrize(("who", "reason"), [("MRN-99", "order"), ("MRN-31", "  ")])
def test_an_unknown_patient_or_no_reason_is_refused(two, who, reason):
    with pytest.raises(CommandError):
        call_command("forget_patient", who, reason=reason, yes=True)
    assert Patient.objects.count() == 2


def test_a_failure_on_the_way_leaves_everything_as_it_was(two, monkeypatch):
    before = everything()

    def fail(*args, **kwargs):
        raise RuntimeError("on the way")

    monkeypatch.setattr(Patient, "delete", fail)
    with pytest.raises(RuntimeError), transaction.atomic():
        call_command("forget_patient", "MRN-31", reason="order", yes=True)
    assert everything() == before
    with pytest.raises(DatabaseError, match="append-only"), transaction.atomic():
        Entry.objects.update(po2=1.0)
