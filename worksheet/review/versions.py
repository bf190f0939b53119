"""An entry and what replaced it: who was faster, where the newest version is, and the reason every change needs."""

from __future__ import annotations

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect

from worksheet.ward.models import Entry, Stay

from .people import patient_page
from .slip import Level, Notice, Slip

REASON_LONGEST = 500


def need_reason(slip: Slip) -> None:
    """A correction without a reason is refused."""
    if not 0 < len(slip.reason.strip()) <= REASON_LONGEST:
        words = f"Say in a few words why the entry is corrected (at most {REASON_LONGEST} characters)."
        slip.notices.append(Notice(Level.IMPOSSIBLE, "reason", "reason", words))


def newest(entry: Entry) -> Entry:
    """The entry that stands in for this one now."""
    while (
        after := Entry.objects.filter(replaces=entry).select_related("recorded_by", "stay__unit").first()
    ) is not None:
        entry = after
    return entry


def somebody_faster(entry: Entry, key: str) -> Entry | None:
    """The entry by which somebody else replaced this one; None if nobody did, or this very form was it."""
    return Entry.objects.filter(replaces=entry).exclude(key=key).first()


def lead_to_newest(request: HttpRequest, stay: Stay, latest: Entry) -> HttpResponse:
    """An entry that was replaced is not corrected again; the one in its place is."""
    at = latest.recorded_at.astimezone(stay.unit.zone)
    did = "struck out" if latest.struck else "corrected"
    words = f"This entry was {did} by {latest.recorded_by.get_username()} at {at:%Y-%m-%d %H:%M}: {latest.reason}"
    messages.info(request, words if latest.struck else f"{words}. This is the corrected entry.")
    if latest.struck:
        return redirect(patient_page(stay))
    return redirect("entry_correct", stay.unit.slug, stay.reference, latest.pk)
