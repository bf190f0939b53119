"""Deleting a patient on lawful order: everything of the person goes, the audit chain stays verifiable.

This is the one place that lifts the triggers, inside one transaction, and it leaves an event that says so. The link of
each audit event is computed over a salted digest of its content, so the content can go and the chain still holds.
"""

from __future__ import annotations

import json
import re
from dataclasses import dataclass
from importlib import import_module
from types import SimpleNamespace
from typing import Any

from django.db import connection, transaction
from django.dispatch import Signal

from . import audit
from .models import AuditEvent, Draft, Entry, Patient, ReviewMark, Stay

# Other rooms delete what they hold: ``patient`` and ``words`` (identifier and references) are given.
forgetting = Signal()
_TRIGGERS = import_module("worksheet.ward.migrations.0002_append_only")


@dataclass(frozen=True)
class Holdings:
    """What is known of a patient."""

    stays: int
    entries: int
    events: int


def holdings(patient: Patient) -> Holdings:
    """Count what would go."""
    entries = Entry.objects.filter(stay__patient=patient).count()
    return Holdings(patient.stays.count(), entries, len(_events_about(patient)))


def forget(patient: Patient, actor: str, reason: str) -> Holdings:
    """Delete everything of the patient; needs a reason, which must not name the person."""
    if not reason.strip():
        raise ValueError("A reason is needed.")
    with transaction.atomic():
        _wait_for_writers()
        audit.one_at_a_time()
        found, events = holdings(patient), _events_about(patient)
        units = sorted({stay.unit.name for stay in patient.stays.select_related("unit")})
        forgetting.send(forget, patient=patient, words=_words(patient))
        _without_triggers(patient, events)
        audit.write(actor, audit.ERASED, unit=units[0] if units else "", reason=reason.strip(),
                    entries=found.entries, events=[event.pk for event in events])  # fmt: skip
    return found


def _words(patient: Patient) -> list[str]:
    return [patient.identifier, *patient.stays.values_list("reference", flat=True)]


def _events_about(patient: Patient) -> list[AuditEvent]:
    """Events whose subject or detail names the patient or a stay, in the units that cared for the person."""
    units = set(patient.stays.values_list("unit__name", flat=True))
    told = re.compile(r"(?<![\w-])(?:" + "|".join(map(re.escape, _words(patient))) + r")(?![\w-])")
    return [
        event
        for event in AuditEvent.objects.filter(unit__in=units).exclude(salt="").iterator(chunk_size=2000)
        if told.search(event.subject) or told.search(json.dumps(event.detail, ensure_ascii=False))
    ]


def _wait_for_writers() -> None:
    """Let whoever is writing finish first: they hold an entry and wait for the chain, this holds the chain."""
    if connection.vendor == "postgresql":
        with connection.cursor() as cursor:
            cursor.execute(f"LOCK TABLE {', '.join(_TRIGGERS.TABLES)} IN ACCESS EXCLUSIVE MODE")


def _without_triggers(patient: Patient, events: list[AuditEvent]) -> None:
    editor: Any = SimpleNamespace(connection=connection)
    stays = list(patient.stays.values_list("pk", flat=True))
    _TRIGGERS.backwards(None, editor)
    AuditEvent.objects.filter(pk__in=[event.pk for event in events]).update(subject="", detail={}, salt="")
    for model in (Entry, ReviewMark, Draft):
        mine: Any = model._default_manager.filter(stay__in=stays)
        mine._raw_delete(mine.db)  # in one statement: a correction and what it corrects hold each other
    Stay.objects.filter(pk__in=stays).delete()
    patient.delete()
    _TRIGGERS.forwards(None, editor)
