"""Which entries a page has to read: those of the window and those that can still be carried into it."""

from __future__ import annotations

from collections.abc import Sequence
from datetime import timedelta

from worksheet.ward.models import Entry, Unit
from worksheet.ward.models.entries import EntryQuerySet

from .window import Window

_LACTATE_HOURS = 24.0  # without two gases to compare, the course of lactate looks back this far from the end
_START_HOURS = 6.0  # the value at the start may be this much older than the window
_LATER_HOURS = 1.0  # a flow or a saturation may have been read a little after the gas


def entries_in_reach(unit: Unit, stays: Sequence[int], window: Window, *, current: bool = True) -> EntryQuerySet:
    """Entries of the stays that this window can use: the page's time does not grow with history."""
    carry = unit.constants_in_force().carry
    longest = max(carry.hb, carry.settings, carry.temperature, carry.dyshaemoglobins) + _START_HOURS
    since = min(window.since - timedelta(hours=longest), window.until - timedelta(hours=_LACTATE_HOURS))
    until = window.until + timedelta(hours=_LATER_HOURS)
    entries = Entry.objects.filter(stay__in=stays, time__gte=since, time__lte=until)
    return entries.current() if current else entries
