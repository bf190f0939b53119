"""The fingerprint printed at the end of a timeline: SHA-256 over everything the document was made from.

Anyone with the database can make it again, for the moment of printing, and see whether the paper still tells what
was recorded then. What it covers: every entry of the stay up to the end of the span that had been recorded by the
time of printing, corrected and struck-out ones too, with values, times, reasons and recorders; the patient facts that
numbers depend on; the constants, carry limits and uncertainties in force.
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import asdict
from datetime import UTC, datetime
from typing import Any

from worksheet.oxygen.quantities import MEASURED
from worksheet.ward.models import Entry, Stay

_FACTS = ("time", "site", "device", "flow_method", "event", "event_amount", "sample", "note", "source", "reason",
          "struck", "replaces_id", "recorded_at")  # fmt: skip


def fingerprint(stay: Stay, until: datetime, as_of: datetime) -> str:
    """SHA-256 of what was known of a stay up to ``until``, as recorded by ``as_of``."""
    content = {
        "stay": {"reference": stay.reference, "height": stay.height, "weight": stay.weight, "age": stay.age,
                 "admitted_at": _plain(stay.admitted_at)},
        "until": _plain(until),
        "constants": asdict(stay.unit.constants_in_force()),
        "uncertainties": stay.unit.uncertainties,
        "entries": [_plain_entry(row) for row in _entries(stay, until, as_of)],
    }  # fmt: skip
    text = json.dumps(content, sort_keys=True, ensure_ascii=False, separators=(",", ":"))
    return hashlib.sha256(text.encode()).hexdigest()


def recorded_since(stay: Stay, until: datetime, as_of: datetime) -> int:
    """How many entries of the span were recorded after ``as_of``."""
    return Entry.objects.filter(stay=stay, time__lte=until, recorded_at__gt=as_of).count()


def _entries(stay: Stay, until: datetime, as_of: datetime) -> Any:
    known = Entry.objects.filter(stay=stay, time__lte=until, recorded_at__lte=as_of)
    return known.order_by("pk").values("pk", "recorded_by__username", "typed", *_FACTS, *MEASURED)


def _plain_entry(row: dict[str, Any]) -> dict[str, Any]:
    return {name: _plain(value) for name, value in row.items()}


def _plain(value: Any) -> Any:
    return value.astimezone(UTC).isoformat() if isinstance(value, datetime) else value
