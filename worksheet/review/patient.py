"""The patient page: verdict, evidence, detail, in the order in which the question is asked."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.http import require_POST

from worksheet import charts
from worksheet.charts.page import Drawn
from worksheet.ward import audit
from worksheet.ward.access import person, stay_or_404, unit_or_404
from worksheet.ward.display import Display
from worksheet.ward.models import ReviewMark, Role, Stay, Unit, User
from worksheet.ward.sheet import derived_sheet, readings_from

from .beds import bed_rows
from .entries_table import about_entries, entry_lines, headings, standing
from .reach import entries_in_reach
from .stays_here import find, present_at
from .story import Story
from .window import HOURS, window_of


def patient(request: HttpRequest, slug: str, ref: str) -> HttpResponse:
    """One stay over the review window."""
    user = person(request)
    line = present_at(slug, user)
    stay = next((one for one in line if one.reference == ref), None) or find(request, unit_or_404(request, slug), ref)
    unit = stay.unit
    window, display = window_of(request.GET, unit, user, stay), Display.of(user, unit)
    about = about_entries(entries_in_reach(unit, [stay.pk], window, current=False))
    sheet = derived_sheet(unit, [stay], *readings_from(standing(about), [stay]))
    story = Story(bed_rows(sheet, window, display)[0])
    audit.write(user.username, "viewed", unit=unit.name, subject=stay.reference, window=window.kind)
    history = request.GET.get("history") == "1"
    rows = story.rows_in_window()
    context = {
        "unit": unit, "stay": stay, "window": window, "hours": HOURS, "row": story.row, "story": story,
        "charts": draw(story), **neighbours(line, stay), "history": history, "headings": headings(display),
        "lines": entry_lines(sheet, stay, rows, display, about, history, story.span()),
        "may_record": may_record(user, stay), "day": day_of(stay, window.until_hours),
        "free_from": f"{display.local(window.since):%Y-%m-%d %H:%M}",
        "free_to": f"{display.local(window.until):%Y-%m-%d %H:%M}",
        "change_base": reverse("entry_correct", args=[slug, stay.reference, 0]).removesuffix("0/correct"),
        "zone": f"{display.local(window.until):%Z}",
    }  # fmt: skip
    return render(request, "review/patient.html", context)


def draw(story: Story) -> dict[str, Drawn]:
    """The five charts over the window; the value at its start is shown too."""
    sheet, stay, display, rows = story.row.sheet, story.row.stay, story.row.display, story.rows_in_window()
    made = {
        "strip": charts.time_strip(sheet, stay, rows, display),
        "ledger": charts.change_ledger(charts.changes_of(sheet, rows), display),
        "content": charts.content_map(sheet, stay, rows, display),
        "delivery": charts.delivery_map(sheet, stay, rows, display),
        "curve": charts.curve_chart(sheet, stay, rows, display),
    }
    return {name: Drawn(chart) for name, chart in made.items()}


def neighbours(line: list[Stay], stay: Stay) -> dict[str, Any]:
    """The stays before and after this one in the order of the round."""
    at = next((i for i, other in enumerate(line) if other.pk == stay.pk), None)
    if at is None:
        return {"before": None, "after": None}
    return {"before": line[at - 1] if at else None, "after": line[at + 1] if at + 1 < len(line) else None}


def may_record(user: User, stay: Stay) -> bool:
    """Whether this person may add and correct entries here."""
    return user.is_superuser or (getattr(stay, "my_role", None) or 0) >= Role.RECORDER


def day_of(stay: Stay, now: float) -> int | None:
    """Day of the stay, the first one being day 1."""
    return int((now - stay.admitted_at.timestamp() / 3600) // 24) + 1 if stay.admitted_at else None


@require_POST
def mark_reviewed(request: HttpRequest, slug: str, ref: str) -> HttpResponse:
    """Note that this person looked at this stay now."""
    unit: Unit = unit_or_404(request, slug)
    stay = stay_or_404(request, unit, ref)
    user = person(request)
    ReviewMark.objects.create(stay=stay, user=user, at=timezone.now())
    audit.write(user.username, "reviewed", unit=unit.name, subject=stay.reference)
    messages.success(request, f"{stay.reference} marked as reviewed.")
    kept = request.POST.get("window", "")
    return redirect(reverse("patient", args=[slug, ref]) + (f"?window={kept}" if kept.isalnum() else ""))
