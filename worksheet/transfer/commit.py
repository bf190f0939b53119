"""Storing what was previewed: one transaction, new entries in batches, corrections one by one, one audit event."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable, Iterator, Sequence
from datetime import datetime
from functools import lru_cache
from itertools import islice
from typing import Any

from django.db import connection
from django.utils import timezone

from worksheet.oxygen.quantities import MEASURED
from worksheet.oxygen.readings import Device, Event, FlowMethod, Site
from worksheet.ward import record
from worksheet.ward.models import Entry, Stay, User

from .rows import Cell, DraftEntry

BATCH = 2000
_ROW_FIELDS = ("device", "flow_method", "event", "event_amount")


def insert(drafts: Iterable[DraftEntry], stays: dict[int, Stay], user: User, source: str) -> int:
    """Store new entries. Column lists and one prepared statement: models of 45 columns cost several times as much."""
    fields = [f for f in Entry._meta.concrete_fields if not f.primary_key]
    columns = ", ".join(connection.ops.quote_name(str(f.column)) for f in fields)
    marks = ", ".join(["%s"] * len(fields))
    statement = f"INSERT INTO {connection.ops.quote_name(Entry._meta.db_table)} ({columns}) VALUES ({marks})"  # noqa: S608
    makers = [_maker(f.attname, f.get_default(), user, source) for f in fields]
    stored = 0
    with connection.cursor() as cursor:
        rows = ([make(draft, stays[id(draft)]) for make in makers] for draft in drafts)
        while batch := list(islice(rows, BATCH)):
            cursor.executemany(statement, batch)
            stored += len(batch)
    return stored


Maker = Callable[[DraftEntry, Stay], Any]


def _maker(name: str, default: Any, user: User, source: str) -> Maker:
    """How one column of a new entry is filled."""
    if name in MEASURED:
        return lambda draft, stay: cell.value if (cell := draft.cells.get(name)) is not None else None
    if name in _ROW_FIELDS:
        return lambda draft, stay: draft.said(name)
    now = _database_time(timezone.now())
    fixed: dict[str, Any] = {"recorded_by_id": user.pk, "recorded_at": now, "source": source}
    if name in fixed:
        return lambda draft, stay: fixed[name]
    special: dict[str, Maker] = {
        "stay_id": lambda draft, stay: stay.pk,
        "time": lambda draft, stay: _database_time(draft.time),
        "site": lambda draft, stay: int(draft.site),
        "sample": lambda draft, stay: draft.sample,
        "key": lambda draft, stay: draft.key,
        "note": lambda draft, stay: note_of(draft),
        "typed": lambda draft, stay: _typed_json(draft),
    }
    return special.get(name, lambda draft, stay: default)


@lru_cache(maxsize=8192)
def _database_time(moment: datetime) -> Any:
    return connection.ops.adapt_datetimefield_value(moment)


@lru_cache(maxsize=65536)
def _fragment(cell: Cell) -> str:
    return json.dumps(cell.typed(), ensure_ascii=False)


def _typed_json(draft: DraftEntry) -> str:
    """The ``typed`` column, put together from fragments that repeat."""
    parts = ", ".join(f'"{name}": {_fragment(cell)}' for name, cell in draft.cells.items())
    return f"{{{parts}}}"


def typed_of(cells: dict[str, Cell]) -> dict[str, Any]:
    """What is kept beside the canonical values."""
    return {name: cell.typed() for name, cell in cells.items()}


def note_of(draft: DraftEntry) -> str:
    """Comments that came with the rows, and what had to be assumed."""
    words = [r.note for r in draft.rows if r.note]
    words += [c for r in draft.rows for c in r.cautions if c.startswith("no site given")]
    return "; ".join(dict.fromkeys(words))


def correct(drafts: Sequence[DraftEntry], user: User, source: str) -> Iterator[dict[str, Any]]:
    """Store corrections and withdrawals in their order; yields what each did, for the audit trail."""
    for draft in drafts:
        entry = Entry.objects.get(pk=draft.replaces) if draft.replaces else Entry.objects.get(key=_key_of(draft.after))
        new = _merged(entry, draft, source)
        struck = draft.struck and not new.values
        stored = record.build(entry.stay, user, new, replaces=entry, reason=_why(draft), struck=struck)
        stored.save(force_insert=True)
        yield {
            "entry": stored.pk,
            "replaces": entry.pk,
            "reason": draft.reason,
            "before": record.described(entry),
            "after": record.described(stored),
        }


def _key_of(draft: DraftEntry | None) -> str:
    if draft is None:
        raise ValueError("a correction must name what it corrects")
    return draft.key


def _why(draft: DraftEntry) -> str:
    return "; ".join(dict.fromkeys([f"received: {draft.reason}", *(r.note for r in draft.rows if r.note)]))


def _merged(entry: Entry, draft: DraftEntry, source: str) -> record.NewEntry:
    """The stored entry with what the draft changes."""
    values = {n: v for n in MEASURED if (v := getattr(entry, n)) is not None}
    typed = dict(entry.typed)
    for name, cell in draft.changes.items():
        if draft.struck:
            values.pop(name, None)
            typed.pop(name, None)
        else:
            values[name] = cell.value if cell.value is not None else values.get(name, float("nan"))
            typed[name] = cell.typed()
    return record.NewEntry(
        time=entry.time,
        site=Site(entry.site),
        values=values,
        typed=typed,
        device=Device(entry.device or draft.said("device")),
        flow_method=FlowMethod(entry.flow_method or draft.said("flow_method")),
        event=Event(entry.event),
        event_amount=entry.event_amount,
        sample=entry.sample or draft.sample,
        note="; ".join(n for n in (entry.note, note_of(draft)) if n),
        key=draft.key,
        source=source,
    )
