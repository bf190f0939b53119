"""Notes, corrections and struck-out entries of a timeline."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from worksheet.oxygen.quantities import CATALOGUE, MEASURED
from worksheet.ward.display import MISSING
from worksheet.ward.models import Entry

from .order import Order

WITHHELD = "Notes and reasons are free text and may name people; they are left out of a de-identified document."


def noted(order: Order) -> dict[int, int]:
    """Number of the note of each current entry of the span that has one."""
    if order.deidentify:
        return {}
    pks = [int(order.sheet.entry_ids[row]) for row in order.rows]
    with_note = [pk for pk in pks if pk in order.entries and order.entries[pk].note.strip()]
    return {pk: n for n, pk in enumerate(with_note, start=1)}


def notes(order: Order, numbers: dict[int, int]) -> list[dict[str, str]]:
    """The notes, in time order, word for word."""
    return [
        {
            "head": f"Note {n} · {order.when(order.entries[pk].time)} · {order.entries[pk].recorded_by.username}",
            "text": order.entries[pk].note,
        }
        for pk, n in numbers.items()
    ]


def corrections(order: Order) -> dict[str, Any]:
    """What was replaced or struck out in the span: when, from what to what, why, by whom."""
    replacing = [e for e in order.entries.values() if e.replaces_id and _in_span(order, e)]
    return {
        "head": ["Entry of", "What changed", "Reason", "By, at"],
        "rows": [_row(order, entry) for entry in replacing],
        "widths": ["auto", "2", "1.4", "auto"],
        "sides": ["l", "l", "l", "l"],
        "empty": "No entry of this span was corrected or struck out.",
    }


def _in_span(order: Order, entry: Entry) -> bool:
    earlier = order.entries.get(entry.replaces_id or 0)
    times = [entry.time, *([earlier.time] if earlier else [])]
    return any((order.since is None or t >= order.since) and t <= order.end for t in times)


def _row(order: Order, entry: Entry) -> list[Any]:
    earlier = entry.replaces or entry
    changed: Any = "; ".join(_changes(order, earlier, entry)) or "no value changed"
    if entry.struck:
        changed = ["; ".join(_values(order, earlier)) or "no values", "struck"]
    reason = "withheld" if order.deidentify else entry.reason
    who = "" if order.deidentify else f"{entry.recorded_by.username}, "
    return [order.when(earlier.time), changed, reason, f"{who}{order.when(entry.recorded_at)}"]


def _changes(order: Order, before: Entry, after: Entry) -> Iterator[str]:
    if before.time != after.time:
        yield f"time {order.when(before.time)} → {order.when(after.time)}"
    if before.site != after.site:
        yield f"sample {before.get_site_display()} → {after.get_site_display()}"
    for name in MEASURED:
        old, new = getattr(before, name), getattr(after, name)
        if old != new:
            yield f"{CATALOGUE[name].symbol} {_value(order, name, old)} → {_value(order, name, new)}"


def _values(order: Order, entry: Entry) -> Iterator[str]:
    for name in MEASURED:
        if getattr(entry, name) is not None:
            yield f"{CATALOGUE[name].symbol} {_value(order, name, getattr(entry, name))}"


def _value(order: Order, name: str, value: float | None) -> str:
    return MISSING if value is None else order.display.value(name, value, with_unit=True)
