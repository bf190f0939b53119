"""Striking out an entry that should not be there: with a reason, and it stays readable."""

from __future__ import annotations

import uuid

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import render
from django.views.decorators.http import require_http_methods

from worksheet.ward import record

from .entry import Desk, answered, go
from .entry_page import facts
from .people import patient_page
from .texts import plain
from .versions import REASON_LONGEST, newest


@require_http_methods(["GET", "HEAD", "POST"])
def entry_strike(request: HttpRequest, slug: str, ref: str, entry_id: int) -> HttpResponse:
    """Ask for the reason, then strike out."""
    desk = Desk.of(request, slug, ref, entry_id)
    reason = plain(request.POST.get("reason", ""))
    problem = ""
    if request.method == "POST":
        problem = _strike(desk, reason, plain(request.POST.get("key", "")))
        if not problem:
            messages.success(request, "Struck out. The entry stays readable under corrections.")
            return go(request, patient_page(desk.stay))
    return _show(desk, reason, problem)


def _strike(desk: Desk, reason: str, key: str) -> str:
    """Strike out; a sentence if it was not done."""
    assert desk.replacing is not None  # noqa: S101 - the address names an entry
    if not 0 < len(reason.strip()) <= REASON_LONGEST:
        return f"Say in a few words why the entry is struck out (at most {REASON_LONGEST} characters)."
    try:
        struck = record.strike_out(desk.replacing, desk.user, reason, key[:80])
    except record.AlreadyReplaced:
        return "Somebody was faster: see what became of this entry below. Nothing of yours was saved."
    if not struck.struck or struck.replaces_id != desk.replacing.pk:
        return "This form was used before for something else. Open the page again; nothing of yours was saved."
    return ""


def _show(desk: Desk, reason: str, problem: str) -> HttpResponse:
    assert desk.replacing is not None  # noqa: S101 - the address names an entry
    latest = newest(desk.replacing)
    context = {
        "stay": desk.stay,
        "unit": desk.stay.unit,
        "entry": desk.replacing,
        "facts": facts(desk.display, desk.replacing),
        "latest": latest if latest != desk.replacing else None,
        "latest_facts": facts(desk.display, latest),
        "latest_at": desk.display.stamp(latest.recorded_at),
        "reason": reason,
        "problem": problem,
        "page": patient_page(desk.stay),
        "key": desk.request.POST.get("key") or uuid.uuid4().hex,
    }
    response = render(desk.request, "review/entry_strike.html", context)
    return answered(desk.request, response, bool(problem))
