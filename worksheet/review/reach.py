"""Which entries a page has to read: those of the window and those that can still be carried into it."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import timedelta

from worksheet.ward.models import Entry, Unit
from worksheet.ward.models.entries import EntryQuerySet

from .window import Window

_LACTATE_HOURS = 24.0  # the course of lactate looks back this far
_START_HOURS = 6.0  # the value at the start may be this much older than the window


def entries_in_reach(unit: Unit, stays: Sequence[int], window: Window) -> EntryQuerySet:
    """Current entries of the stays that this window can use: the page's time does not grow with history."""
    carry = unit.constants_in_force().carry
    longest = max(carry.hb, carry.settings, carry.temperature, carry.dyshaemoglobins) + _START_HOURS
    reach = max(longest, _LACTATE_HOURS)
    return Entry.objects.filter(
        stay__in=stays, time__gte=window.since - timedelta(hours=reach), time__lte=window.until + timedelta(hours=1)
    ).current()
