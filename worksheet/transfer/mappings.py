"""Column mappings that a unit confirmed: found again by the header row they belong to."""

from __future__ import annotations

import hashlib
from typing import Any

from worksheet.ward.models import Unit, User

from .models import ColumnMapping
from .names import fold
from .plan import Plan, as_saved
from .rows import Refused
from .tabular import first_table


def digest_of(header: list[str]) -> str:
    """One digest for the same headers, however they are capitalised and ordered."""
    return hashlib.sha256("|".join(sorted(fold(h) or h for h in header)).encode()).hexdigest()


def saved_for(unit: Unit, kind: str, data: bytes) -> dict[str, Any] | None:
    """The unit's mapping for the first table of a file, if somebody confirmed one."""
    if kind not in ("csv", "xlsx") or not unit.column_mappings.exists():
        return None
    try:
        table = first_table(kind, data)
    except Refused:
        return None
    found = unit.column_mappings.filter(headers=digest_of(table.header)).first()
    return {**found.plan, "zone": found.zone} if found else None


def save(unit: Unit, user: User, header: list[str], plan: Plan, zone: str, name: str) -> ColumnMapping:
    """Keep a confirmed plan for the next file with this header."""
    mapping, _ = ColumnMapping.objects.update_or_create(
        unit=unit, headers=digest_of(header),
        defaults={"name": name[:80], "plan": as_saved(plan), "zone": zone, "created_by": user},
    )  # fmt: skip
    return mapping
