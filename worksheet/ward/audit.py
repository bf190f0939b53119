"""Writing the audit trail and walking it: every event carries the hash of the one before."""

from __future__ import annotations

import hashlib
import json
import secrets
from collections.abc import Iterator
from datetime import UTC, datetime
from typing import Any

from django.db import connection, transaction
from django.db.models import QuerySet
from django.utils import timezone

from .models import AuditEvent

_CHAIN = 0x0C4A1  # any number, the same for all workers

ERASED = "erased a patient"


def digest(event: AuditEvent) -> str:
    """SHA-256 over the event and the hash of the event before it; its content enters by its own salted digest."""
    who = [event.previous_hash, event.at.astimezone(UTC).isoformat(), event.actor, event.unit]
    if not event.content_hash:  # written before the content had a digest of its own
        return _hashed([*who, event.subject, event.action, event.detail])
    return _hashed([*who, event.action, event.content_hash])


def content_digest(event: AuditEvent) -> str:
    """SHA-256 over salt, subject and detail: what can be erased without breaking the chain."""
    return _hashed([event.salt, event.subject, event.detail])


def _hashed(content: list[Any]) -> str:
    return hashlib.sha256(json.dumps(content, sort_keys=True, ensure_ascii=False).encode()).hexdigest()


def write(
    actor: str, action: str, *, unit: str = "", subject: str = "", at: datetime | None = None, **detail: Any
) -> AuditEvent:
    """Append one event to the trail, in the transaction of the thing it tells of."""
    with transaction.atomic():
        one_at_a_time()
        last = AuditEvent.objects.order_by("-id").first()
        event = AuditEvent(
            at=at or timezone.now(),
            actor=actor,
            unit=unit,
            subject=subject,
            action=action,
            detail=json.loads(json.dumps(detail)),  # as it will be read again: tuples are lists there
            salt=secrets.token_hex(16),
            previous_hash=last.hash if last else "",
        )
        event.content_hash = content_digest(event)
        event.hash = digest(event)
        event.save(force_insert=True)
    return event


def one_at_a_time() -> None:
    """Hold the end of the chain until this transaction is done, so that no two events follow the same one.

    A lock on the last row would not do: whoever waits for it goes on with that row although it is no longer the last.
    SQLite has one writer at a time anyway.
    """
    if connection.vendor == "postgresql":
        with connection.cursor() as cursor:
            cursor.execute("SELECT pg_advisory_xact_lock(%s)", [_CHAIN])


def broken_places(events: QuerySet[AuditEvent] | None = None) -> Iterator[tuple[int, str]]:
    """Places where the chain does not hold: event number and what is wrong."""
    previous, erased, allowed = "", set[int](), set[int]()
    chain = AuditEvent.objects.all() if events is None else events
    for event in chain.order_by("id").iterator(chunk_size=2000):
        if event.previous_hash != previous:
            yield event.pk, "an event before this one was removed, inserted or changed"
        elif digest(event) != event.hash:
            yield event.pk, "this event was changed"
        elif event.content_hash and not (event.salt or event.subject or event.detail):
            erased.add(event.pk)
        elif event.content_hash and content_digest(event) != event.content_hash:
            yield event.pk, "the content of this event was changed"
        elif event.action == ERASED:
            allowed.update(event.detail.get("events", []))
        previous = event.hash
    for number in sorted(erased - allowed):
        yield number, "the content of this event was erased, and no event tells of it"
