"""The unit review: one row a bed."""

from __future__ import annotations

from datetime import datetime
from typing import Any

from django.http import HttpRequest, HttpResponse, HttpResponseNotModified
from django.shortcuts import render
from django.template.loader import render_to_string
from django.utils.cache import patch_vary_headers

from worksheet.oxygen.ledger_table import STEPS
from worksheet.ward.access import person, role_in, unit_or_404
from worksheet.ward.display import Display
from worksheet.ward.models import Role, Stay, Unit, User
from worksheet.ward.sheet import Sheet, open_sheet

from .beds import STALE_HOURS, BedRow, bed_rows
from .live import drawn, mark_of
from .reach import entries_in_reach
from .stays_here import present
from .window import HOURS, Window, window_of


def unit_review(request: HttpRequest, slug: str) -> HttpResponse:
    """One row a bed, worst real deterioration first; the table alone when the page updates itself."""
    unit, user = unit_or_404(request, slug), person(request)
    window, display, stays = window_of(request.GET, unit, user), Display.of(user, unit), present(unit, user)
    mark = mark_of(unit, user, stays, window, request.GET.get("step", ""))
    live = bool(getattr(request, "htmx", False))
    if live and request.headers.get("If-None-Match") == mark:
        return HttpResponseNotModified(headers={"ETag": mark})

    def context() -> dict[str, Any]:
        sheet = open_sheet(unit, stays, entries_in_reach(unit, [s.pk for s in stays], window))
        return _context(unit, window, bed_rows(sheet, window, display), request.GET.get("step", ""), mark, display)

    if live:
        rows = drawn(mark, lambda: render_to_string("review/_beds.html", context()).encode())
        response = HttpResponse(rows)
    else:
        response = render(request, "review/unit.html", _rights(user, unit, stays) | context())
    response.headers["ETag"] = mark
    patch_vary_headers(response, ["HX-Request"])
    return response


def _rights(user: User, unit: Unit, stays: list[Any]) -> dict[str, bool]:
    """What of the page's links this person may use."""
    role = Role.LEAD if user.is_superuser else stays[0].my_role if stays else role_in(user, unit)
    return {"may_record": (role or 0) >= Role.RECORDER, "leads": role == Role.LEAD}


def _context(unit: Unit, window: Window, rows: list[BedRow], step: str, mark: str, display: Display) -> dict[str, Any]:
    taken = {row.stay.bed_id for row in rows}
    step = step if step in STEPS else ""
    return {
        "unit": unit, "here": "unit", "window": window, "hours": HOURS, "mark": mark,
        "stale_hours": f"{STALE_HOURS:.0f}",
        "step": step, "steps": STEPS, "keep_step": f"&step={step}" if step else "",
        "rows": [row for row in rows if not step or row.step == step],
        "supply_unit": f"DO2I {display.unit('do2i').label}", "lactate_unit": display.unit("lactate").label,
        "free_from": _local(window.since, display), "free_to": _local(window.until, display),
        "counts": counts(rows), "empty": [bed.name for bed in unit.beds.all() if bed.pk not in taken],
    }  # fmt: skip


def _local(moment: datetime, display: Display) -> str:
    """A moment as a date-and-time field takes it."""
    return f"{display.local(moment):%Y-%m-%d %H:%M}"


def counts(rows: list[BedRow]) -> dict[str, int]:
    """How many beds, and how many of each kind that needs a look."""
    return {
        "beds": len(rows),
        "worse": sum(row.worse for row in rows),
        "stale": sum(row.stale for row in rows),
        "contradictory": sum(row.contradictory for row in rows),
        "no_gas": sum(row.last < 0 for row in rows),
    }


def rows_of(unit: Unit, window: Window, display: Display) -> list[BedRow]:
    """Bed rows of the stays present in a unit."""
    return bed_rows(sheet_of(unit, window), window, display)


def sheet_of(unit: Unit, window: Window) -> Sheet:
    """The sheet of the stays present, with the entries that the window can reach."""
    stays = list(Stay.objects.filter(unit=unit).present().in_bed_order())
    return open_sheet(unit, stays, entries_in_reach(unit, [s.pk for s in stays], window))
