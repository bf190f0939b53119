"""What happens to a finished document: the audit trail remembers it, and it can be checked later."""

from __future__ import annotations

import hashlib
import re
from dataclasses import dataclass
from datetime import datetime

from worksheet.ward import audit
from worksheet.ward.models import AuditEvent, Stay

from .fingerprint import fingerprint, recorded_since
from .order import Order

_KEYWORD = re.compile(rb"fingerprint-sha256:([0-9a-f]{64})")


class CannotVerify(Exception):
    """The file cannot be checked here; the message says why."""


@dataclass(frozen=True)
class Verdict:
    """What a check found."""

    holds: bool  # the data are those the document was made from
    same_file: bool  # byte for byte the file that was made
    stay: Stay
    printed_at: datetime
    newer_entries: int  # recorded for the same span since


def remember(actor: str, order: Order, mark: str, pdf: bytes) -> None:
    """Write the printing of a timeline into the audit trail."""
    audit.write(
        actor,
        "printed",
        unit=order.stay.unit.name,
        subject=order.stay.reference,
        document="timeline",
        fingerprint=mark,
        file_sha256=hashlib.sha256(pdf).hexdigest(),
        as_of=order.printed_at.isoformat(),
        until=order.end.isoformat(),
        unit_slug=order.stay.unit.slug,
        deidentified=order.deidentify,
    )


def verify(pdf: bytes) -> Verdict:
    """Make the fingerprint of a printed timeline again from the database, for the moment it was printed."""
    found = _KEYWORD.search(pdf)
    if found is None:
        raise CannotVerify("This file carries no fingerprint: it is not a timeline of this program, or was re-saved.")
    mark = found.group(1).decode()
    event = AuditEvent.objects.filter(action="printed", detail__fingerprint=mark).order_by("id").last()
    if event is None:
        raise CannotVerify(f"No document with fingerprint {mark} was printed from this database.")
    stay = Stay.objects.filter(unit__slug=event.detail["unit_slug"], reference=event.subject).first()
    if stay is None:
        raise CannotVerify(f"Stay {event.subject} is no longer in this database.")
    as_of, until = (datetime.fromisoformat(event.detail[name]) for name in ("as_of", "until"))
    same = _printed_with(mark, hashlib.sha256(pdf).hexdigest())
    return Verdict(fingerprint(stay, until, as_of) == mark, same, stay, as_of, recorded_since(stay, until, as_of))


def _printed_with(mark: str, file_sha256: str) -> bool:
    return AuditEvent.objects.filter(
        action="printed", detail__fingerprint=mark, detail__file_sha256=file_sha256
    ).exists()
