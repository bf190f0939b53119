"""The unit review: one row a bed."""

from __future__ import annotations

from django.http import HttpRequest, HttpResponse
from django.shortcuts import render

from worksheet.ward.access import person, unit_or_404
from worksheet.ward.display import Display
from worksheet.ward.models import Stay, Unit
from worksheet.ward.sheet import Sheet, open_sheet

from .beds import BedRow, bed_rows
from .reach import entries_in_reach
from .window import HOURS, Window, window_of


def unit_review(request: HttpRequest, slug: str) -> HttpResponse:
    """One row a bed, worst real deterioration first; the table alone when the page updates itself."""
    unit = unit_or_404(request, slug)
    window = window_of(request.GET, unit, person(request))
    rows = rows_of(unit, window, Display.of(person(request), unit))
    step = request.GET.get("step", "")
    context = {
        "unit": unit, "window": window, "hours": HOURS, "step": step, "steps": ("lung", "haemoglobin", "function", "flow"),
        "rows": [row for row in rows if not step or row.step == step], "counts": _counts(rows),
        "display": Display.of(person(request), unit),
    }  # fmt: skip
    template = "review/_beds.html" if getattr(request, "htmx", False) else "review/unit.html"
    return render(request, template, context)


def rows_of(unit: Unit, window: Window, display: Display) -> list[BedRow]:
    """Bed rows of the stays present in a unit."""
    return bed_rows(sheet_of(unit, window), window, display)


def sheet_of(unit: Unit, window: Window) -> Sheet:
    """The sheet of the stays present, with the entries that the window can reach."""
    stays = list(Stay.objects.filter(unit=unit).present().in_bed_order())
    return open_sheet(unit, stays, entries_in_reach(unit, [s.pk for s in stays], window))


def _counts(rows: list[BedRow]) -> dict[str, int]:
    return {
        "beds": len(rows),
        "worse": sum(row.worse for row in rows),
        "stale": sum(row.stale for row in rows),
        "contradictory": sum(row.contradictory for row in rows),
    }
