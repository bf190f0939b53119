"""One message in, one answer out: kept raw first, stored in one transaction, acknowledged only after that."""

from __future__ import annotations

import hashlib
import logging
from collections import Counter
from dataclasses import dataclass

from django.db import DatabaseError, IntegrityError, transaction

from worksheet.ward.models import Unit, User

from . import pipeline
from .hl7_in import message_rows
from .hl7_message import Header, Rejected, acknowledge, check, header
from .models import MessageState, RawMessage
from .routes import Route, UnitMap
from .rows import Parsed, Refused
from .times import TimeRules

log = logging.getLogger(__name__)


@dataclass(frozen=True)
class Answer:
    """What the sender is told."""

    code: str
    reason: str
    head: Header

    def encoded(self) -> bytes:
        """The ACK message."""
        return acknowledge(self.head, self.code, self.reason)


def receive(raw: bytes, units: UnitMap, user: User) -> Answer:
    """Take a message from the line."""
    head = header(raw)
    route = units.find(head, ward_of(raw))
    try:
        kept = keep(raw, head, route.unit if route else None)
    except DatabaseError:
        log.exception("a message could not be kept")
        return Answer("AE", "the message could not be kept; send it again", head)
    if kept.state in (MessageState.STORED, MessageState.DISMISSED):
        return Answer("AA", "received before", head)
    if route is None:
        try:
            check(head, raw)
        except Rejected as refusal:
            return _dead(kept, head, refusal.code, refusal.reason)
        return _dead(kept, head, "AR", f"no unit is mapped for the sender {head.sender}")
    return process(kept, route, user)


def keep(raw: bytes, head: Header, unit: Unit | None) -> RawMessage:
    """Store the message as it came, in a transaction of its own; the same message again finds the first one."""
    digest = hashlib.sha256(raw).hexdigest()
    defaults = {"content": raw, "unit": unit}
    try:
        return RawMessage.objects.get_or_create(
            sender=head.sender, control_id=head.control_id, digest=digest, defaults=defaults
        )[0]
    except IntegrityError:  # the same message over two connections at once
        return RawMessage.objects.get(sender=head.sender, control_id=head.control_id, digest=digest)


def process(kept: RawMessage, route: Route, user: User) -> Answer:
    """Store what a kept message says. Entries and the message's state change in one transaction."""
    raw = bytes(kept.content)
    head = header(raw)
    try:
        with transaction.atomic():
            report = _store(kept, raw, head, route, user)
            kept.state, kept.reason, kept.unit = MessageState.STORED, "", route.unit
            kept.report, kept.attempts = report, kept.attempts + 1
            kept.save()
    except Rejected as refusal:
        return _dead(kept, head, refusal.code, refusal.reason)
    except (Refused, pipeline.Interrupted) as refusal_:
        return _dead(kept, head, "AE", str(refusal_))
    except DatabaseError:
        log.exception("a message could not be stored")
        return _dead(kept, head, "AE", "the database refused the message; send it again")
    except Exception:  # whatever else: the message is kept, the sender told, the line stays up
        log.exception("a message could not be read")
        return _dead(kept, head, "AE", "the message could not be processed")
    return Answer("AA", "", head)


def _store(kept: RawMessage, raw: bytes, head: Header, route: Route, user: User) -> dict[str, object]:
    rows, notes = message_rows(raw, head, TimeRules(route.zone), route.codes)
    parsed = Parsed("hl7v2", rows, notes=notes)
    options = pipeline.Options(create=route.create, codes=dict(route.codes), confirmed=True)
    name = f"{head.sender} {head.control_id}"
    seen, found = pipeline.preview(route.unit, name, parsed, options, with_findings=False)
    stored = pipeline.store(route.unit, user, seen, found, options)
    fates = Counter(row.fate.value for row in stored.rows if row.fate)
    waiting = [f"{row.place}: {row.reason}" for row in stored.waiting()]
    return {"fates": dict(fates), "entries": dict(stored.entries), "waiting": waiting[:50], "notes": notes[:20]}


def _dead(kept: RawMessage, head: Header, code: str, reason: str) -> Answer:
    """Keep the message as a dead letter with the reason, and tell the sender."""
    try:
        RawMessage.objects.filter(pk=kept.pk).exclude(state=MessageState.STORED).update(
            state=MessageState.DEAD, reason=reason, attempts=kept.attempts + 1
        )
    except DatabaseError:
        log.exception("a dead letter could not be marked")
    return Answer(code, reason, head)


def ward_of(raw: bytes) -> str:
    """Point of care (PV1-3.1), for the unit map."""
    at = raw.find(b"\rPV1|")
    if at < 0 or len(raw) < 8:
        return ""
    fields = raw[at + 1 : at + 400].split(b"\r", 1)[0].split(b"|")
    return fields[3].split(b"^")[0].decode("latin-1").strip() if len(fields) > 3 else ""
