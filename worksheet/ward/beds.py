"""The beds of a unit, as its people list them."""

from __future__ import annotations

import re

from django.db import transaction

from .models import Bed, Unit

MOST = 200
_SPAN = re.compile(r"([0-9]{1,4})\s*-\s*([0-9]{1,4})")


def names_of(text: str) -> list[str]:
    """Bed names from a line: ``1, 2, 3a`` or ``1-12``; a sentence where it cannot be read."""
    names: list[str] = []
    for part in (piece.strip() for piece in text.split(",")):
        low, dash, high = part.partition("-")
        if (
            dash
            and low.strip().isascii()
            and low.strip().isdigit()
            and high.strip().isascii()
            and high.strip().isdigit()
        ):
            first, last = int(low), int(high)
            if not 0 <= last - first < MOST:
                raise ValueError(f"'{part}' is not a range of beds; write it like 1-12.")
            names += [str(n) for n in range(first, last + 1)]
        elif part:
            names.append(part)
    too_long = next((name for name in names if len(name) > 20), None)
    if too_long:
        raise ValueError(f"'{too_long}' is too long for a bed: 20 characters at most.")
    doubled = next((name for name in names if names.count(name) > 1), None)
    if doubled:
        raise ValueError(f"Bed {doubled} is there twice.")
    if not 1 <= len(names) <= MOST:
        raise ValueError(f"A unit has between 1 and {MOST} beds; write them like 1-12 or 1, 2, 3a.")
    return names


def occupied(unit: Unit) -> set[str]:
    """Names of the beds in which a patient is now."""
    return set(unit.beds.filter(stays__discharged_at__isnull=True, stays__isnull=False).values_list("name", flat=True))


@transaction.atomic
def set_beds(unit: Unit, names: list[str]) -> None:
    """Make the unit's beds these, in this order; a bed with a patient in it is never taken away."""
    lost = occupied(unit) - set(names)
    if lost:
        raise ValueError(f"There is a patient in bed {', '.join(sorted(lost))}: move the patient first.")
    unit.beds.exclude(name__in=names).delete()
    known = {bed.name: bed for bed in unit.beds.all()}
    for position, name in enumerate(names, 1):
        bed = known.get(name) or Bed(unit=unit, name=name)
        bed.position = position
        bed.save()
