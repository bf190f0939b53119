"""The only ways to write entries: record, correct, strike out. Each is one transaction with its audit event."""

from __future__ import annotations

import uuid
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from datetime import datetime
from itertools import islice
from typing import Any

from django.db import IntegrityError, transaction

from worksheet.oxygen.quantities import CATALOGUE, MEASURED
from worksheet.oxygen.readings import Device, Event, FlowMethod, Site

from . import audit
from .models import AuditEvent, Entry, Stay, User


class AlreadyReplaced(Exception):
    """Somebody else corrected or struck out this entry first; ``by`` is the entry that did."""

    def __init__(self, by: Entry | None) -> None:
        self.by = by
        super().__init__("This entry was corrected or struck out by somebody else in the meantime.")


@dataclass(frozen=True)
class NewEntry:
    """What goes into an entry. ``values`` in canonical units; ``typed`` as people or machines wrote it."""

    time: datetime
    site: Site = Site.NONE
    values: Mapping[str, float] = field(default_factory=dict)
    typed: Mapping[str, Mapping[str, str]] = field(default_factory=dict)
    device: Device = Device.UNKNOWN
    flow_method: FlowMethod = FlowMethod.UNKNOWN
    event: Event = Event.NONE
    event_amount: float | None = None
    sample: str = ""
    note: str = ""
    key: str = field(default_factory=lambda: uuid.uuid4().hex)
    source: str = "form"


def build(stay: Stay, user: User, new: NewEntry, **more: Any) -> Entry:
    """An unsaved entry. Importers that store many at once build them here and use ``bulk_create``."""
    unknown = set(new.values) - set(MEASURED)
    if unknown:
        raise KeyError(f"not in the catalogue: {', '.join(sorted(unknown))}")
    return Entry(
        stay=stay,
        recorded_by=user,
        time=new.time,
        site=new.site,
        device=new.device,
        flow_method=new.flow_method,
        event=new.event,
        event_amount=new.event_amount,
        sample=new.sample,
        note=new.note,
        key=new.key,
        source=new.source,
        typed=dict(new.typed),
        **new.values,
        **more,
    )


def record(stay: Stay, user: User, new: NewEntry) -> tuple[Entry, bool]:
    """Store an entry; the same key again returns the stored one. Second value: whether it is new."""
    try:
        return _insert(stay, user, new)
    except IntegrityError:  # the same form sent twice at the same moment: the other one was first
        known = Entry.objects.filter(key=new.key).first()
        if known is None:
            raise
        return known, False


def _insert(stay: Stay, user: User, new: NewEntry) -> tuple[Entry, bool]:
    with transaction.atomic():
        audit.one_at_a_time()  # entries get their numbers in the order in which they are committed
        known = Entry.objects.filter(key=new.key).first()
        if known:
            return known, False
        entry = build(stay, user, new)
        entry.save(force_insert=True)
        audit.write(
            user.username,
            "recorded",
            unit=stay.unit.name,
            subject=stay.reference,
            entry=entry.pk,
            values=described(entry),
        )
    return entry, True


def correct(entry: Entry, user: User, new: NewEntry, reason: str) -> Entry:
    """Replace an entry by a corrected one; both stay readable."""
    return _replace(entry, user, new, reason, struck=False)


def strike_out(entry: Entry, user: User, reason: str, key: str = "") -> Entry:
    """Withdraw an entry with a reason; it stays readable."""
    new = NewEntry(time=entry.time, site=Site(entry.site), key=key or uuid.uuid4().hex)
    return _replace(entry, user, new, reason, struck=True)


def _replace(entry: Entry, user: User, new: NewEntry, reason: str, *, struck: bool) -> Entry:
    if not reason.strip():
        raise ValueError("A reason is needed.")
    try:
        with transaction.atomic():
            audit.one_at_a_time()
            known = Entry.objects.filter(key=new.key).first()
            if known:
                return known
            replacement = build(entry.stay, user, new, replaces=entry, reason=reason.strip(), struck=struck)
            replacement.save(force_insert=True)
            audit.write(
                user.username,
                "struck out" if struck else "corrected",
                unit=entry.stay.unit.name,
                subject=entry.stay.reference,
                entry=replacement.pk,
                replaces=entry.pk,
                reason=reason.strip(),
                before=described(entry),
                after=described(replacement),
            )
    except IntegrityError:
        raise AlreadyReplaced(Entry.objects.filter(replaces=entry).first()) from None
    return replacement


def altered() -> Iterator[tuple[int, str]]:
    """Entries that are not as the trail says they were recorded, corrected or struck out: number and what is wrong."""
    told = AuditEvent.objects.filter(action__in=("recorded", "corrected", "struck out")).exclude(salt="").order_by("id")
    events = told.values_list("detail", flat=True).iterator(chunk_size=500)
    while some := {detail["entry"]: detail for detail in islice(events, 500) if "entry" in detail}:
        entries = Entry.objects.in_bulk(some)
        for number, detail in some.items():
            if number not in entries:
                yield number, "is gone"
            elif not _same(described(entries[number]), detail.get("after", detail.get("values", {}))):
                yield number, "is not what was recorded"


def _same(now: Mapping[str, Any], told: Mapping[str, Any]) -> bool:
    """Whether the values agree, and the moment, in whatever zone it was written."""
    told = {"time": now["time"], "site": now["site"], **told}
    moments = datetime.fromisoformat(now["time"]), datetime.fromisoformat(told["time"])
    return moments[0] == moments[1] and {**now, "time": ""} == {**told, "time": ""}


def described(entry: Entry) -> dict[str, Any]:
    """The entry's values for the audit trail, in canonical units."""
    values = {name: getattr(entry, name) for name in CATALOGUE if name in MEASURED}
    return {
        "time": entry.time.isoformat(),
        "site": int(entry.site),
        **{name: value for name, value in values.items() if value is not None},
    }
