"""What the commands of this room share: finding a stay or unit by name, reading times, writing a file whole."""

from __future__ import annotations

import os
import tempfile
from datetime import datetime
from pathlib import Path

from django.core.management.base import CommandError
from django.db.models import Q

from worksheet.ward.models import Stay, Unit


def the_unit(name: str) -> Unit:
    """The unit of that name or short name."""
    unit = Unit.objects.filter(Q(name=name) | Q(slug=name)).first()
    if unit is None:
        known = ", ".join(Unit.objects.order_by("slug").values_list("slug", flat=True)) or "none yet"
        raise CommandError(f"There is no unit '{name}'. Known: {known}.")
    return unit


def the_stay(reference: str, unit: str = "") -> Stay:
    """The stay of that reference; ``unit/reference`` or ``unit`` tells two units apart."""
    if not unit and "/" in reference:
        unit, reference = reference.rsplit("/", 1)
    stays = Stay.objects.filter(reference=reference).select_related("unit", "bed", "patient")
    if unit:
        stays = stays.filter(unit=the_unit(unit))
    found = list(stays[:2])
    if not found:
        raise CommandError(f"There is no stay '{reference}'" + (f" in unit '{unit}'." if unit else "."))
    if len(found) > 1:
        raise CommandError(f"Stay '{reference}' is in more than one unit: name it with --unit.")
    return found[0]


def a_time(text: str | None, unit: Unit, option: str) -> datetime | None:
    """An ISO 8601 time; without an offset it is read in the unit's time zone."""
    if not text:
        return None
    try:
        moment = datetime.fromisoformat(text)
    except ValueError:
        raise CommandError(f"{option} '{text}' is not a time: write it like 2026-03-01T06:30.") from None
    return moment if moment.tzinfo else moment.replace(tzinfo=unit.zone)


def write_whole(path: str, content: bytes) -> None:
    """Write a file completely or not at all."""
    target = Path(path)
    try:
        handle, name = tempfile.mkstemp(dir=target.parent, prefix=".part-")
        try:
            with os.fdopen(handle, "wb") as part:
                part.write(content)
            Path(name).replace(target)
        except BaseException:
            Path(name).unlink(missing_ok=True)
            raise
    except OSError as error:
        raise CommandError(f"Cannot write {path}: {error.strerror}.") from None
