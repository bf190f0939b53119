"""The patient page: verdict, evidence, detail, in the order in which the question is asked."""

from __future__ import annotations

from typing import Any

from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render
from django.utils import timezone
from django.views.decorators.http import require_POST

from worksheet import charts
from worksheet.charts.page import Drawn
from worksheet.ward import audit
from worksheet.ward.access import person, role_in, stay_or_404, unit_or_404
from worksheet.ward.display import Display
from worksheet.ward.models import Entry, ReviewMark, Role, Stay, Unit
from worksheet.ward.sheet import Sheet, open_sheet

from .beds import BedRow, bed_rows
from .entries_table import entry_lines
from .reach import entries_in_reach
from .window import HOURS, Window, window_of


def patient(request: HttpRequest, slug: str, ref: str) -> HttpResponse:
    """One stay over the review window."""
    unit = unit_or_404(request, slug)
    stay = stay_or_404(request, unit, ref)
    user = person(request)
    window, display = window_of(request.GET, unit, user, stay), Display.of(user, unit)
    sheet = open_sheet(unit, [stay], entries_in_reach(unit, [stay.pk], window))
    row = bed_rows(sheet, window, display)[0]
    audit.write(user.username, "viewed", unit=unit.name, subject=stay.reference, window=window.kind)
    history = request.GET.get("history") == "1"
    context = {
        "unit": unit, "stay": stay, "window": window, "hours": HOURS, "row": row, "display": display,
        "charts": draw(sheet, stay, row, display), "neighbours": neighbours(unit, stay), "history": history,
        "lines": entry_lines(sheet, row.rows, display, _old_entries(stay, window) if history else []),
        "may_record": (role_in(user, unit) or 0) >= Role.RECORDER,
    }  # fmt: skip
    return render(request, "review/patient.html", context)


def draw(sheet: Sheet, stay: Stay, row: BedRow, display: Display) -> dict[str, Drawn]:
    """The five charts over the window; the value at its start is shown too."""
    start = row.window.since_hours
    if row.level:
        start = min(start, float(sheet.readings.time[int(row.review.ledger.start_row[row.place])]))
    rows = row.rows[sheet.readings.time[row.rows] >= start]
    made = {
        "strip": charts.time_strip(sheet, stay, rows, display),
        "ledger": charts.change_ledger(charts.changes_of(sheet, rows), display),
        "content": charts.content_map(sheet, stay, rows, display),
        "delivery": charts.delivery_map(sheet, stay, rows, display),
        "curve": charts.curve_chart(sheet, stay, rows, display),
    }
    return {name: Drawn(chart) for name, chart in made.items()}


def neighbours(unit: Unit, stay: Stay) -> dict[str, Any]:
    """The stays before and after this one in bed order."""
    line = list(Stay.objects.filter(unit=unit).present().in_bed_order())
    at = next((i for i, other in enumerate(line) if other.pk == stay.pk), None)
    if at is None:
        return {"before": None, "after": None}
    return {"before": line[at - 1] if at else None, "after": line[at + 1] if at + 1 < len(line) else None}


def _old_entries(stay: Stay, window: Window) -> list[Entry]:
    """Entries of the window that were corrected or struck out, and the strike-outs themselves."""
    entries = Entry.objects.filter(stay=stay, time__gte=window.since, time__lte=window.until).select_related(
        "recorded_by", "replaced_by", "replaced_by__recorded_by"
    )
    return [entry for entry in entries if entry.struck or hasattr(entry, "replaced_by")]


@require_POST
def mark_reviewed(request: HttpRequest, slug: str, ref: str) -> HttpResponse:
    """Note that this person looked at this stay now."""
    unit = unit_or_404(request, slug)
    stay = stay_or_404(request, unit, ref)
    ReviewMark.objects.create(stay=stay, user=person(request), at=timezone.now())
    audit.write(person(request).username, "reviewed", unit=unit.name, subject=stay.reference)
    return redirect("patient", slug=slug, ref=ref)
