"""Correcting an entry: on the form on which it was typed."""

from __future__ import annotations

from django.http import HttpRequest, HttpResponse
from django.views.decorators.http import require_http_methods

from worksheet.oxygen.quantities import MEASURED
from worksheet.ward.models import Entry

from . import entry, events
from .event_form import SETTINGS


@require_http_methods(["GET", "HEAD", "POST"])
def entry_correct(request: HttpRequest, slug: str, ref: str, entry_id: int) -> HttpResponse:
    """Correct an entry: the old one stays readable, the new one says why."""
    desk = entry.Desk.of(request, slug, ref, entry_id)
    return events.serve(desk) if desk.replacing and _only_event(desk.replacing) else entry.serve(desk)


def _only_event(stored: Entry) -> bool:
    """Whether the entry is an event that the event form can show in full."""
    others = [name for name in MEASURED if name not in SETTINGS and getattr(stored, name) is not None]
    return bool(stored.event) and not others and not stored.site
