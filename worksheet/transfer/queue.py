"""The queue: rows that wait for a person. Try them again, give them to a stay, or close them with a reason."""

from __future__ import annotations

from collections.abc import Iterable

from django.contrib import messages
from django.core.paginator import Paginator
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render
from django.utils import timezone
from django.views.decorators.http import require_GET, require_POST

from worksheet.oxygen.quantities import CATALOGUE
from worksheet.ward import audit
from worksheet.ward.access import person, stay_or_404, unit_or_404
from worksheet.ward.display import Display
from worksheet.ward.models import Role, Stay, Unit, User

from . import pipeline
from .models import QueuedRow
from .rows import WAITING, Parsed, PatientRef
from .waiting import as_row

PAGE = 50


@require_GET
def queue(request: HttpRequest, slug: str) -> HttpResponse:
    """Rows that wait, oldest first."""
    unit = unit_or_404(request, slug, Role.RECORDER)
    rows = QueuedRow.objects.visible_to(person(request)).filter(unit=unit, closed_at=None)
    page = Paginator(rows, PAGE).get_page(request.GET.get("page"))
    display = Display.of(person(request), unit)
    shown = [{"row": row, "time": display.stamp(row.time) if row.time else "", "values": _values(row)} for row in page]
    stays = unit.stays.in_bed_order().present()[:500]
    return render(request, "transfer/queue.html", {"unit": unit, "page": page, "shown": shown, "stays": stays})


def _values(row: QueuedRow) -> str:
    cells = row.data.get("cells", {})
    if cells:
        return ", ".join(
            f"{CATALOGUE[name].symbol} {cell['text']} {cell['unit']}".strip() for name, cell in cells.items()
        )
    raw = row.data.get("raw", "")
    return ", ".join(f"{k} {v}" for k, v in raw.items() if v)[:300] if isinstance(raw, dict) else str(raw)[:300]


@require_POST
def act(request: HttpRequest, slug: str) -> HttpResponse:
    """Do something with the chosen rows."""
    unit = unit_or_404(request, slug, Role.RECORDER)
    user = person(request)
    ids = [int(i) for i in request.POST.getlist("row") if i.isdecimal()][:500]
    rows = list(QueuedRow.objects.visible_to(user).filter(unit=unit, closed_at=None, pk__in=ids))
    action = request.POST.get("action", "")
    if not rows:
        messages.error(request, "Choose at least one row.")
    elif action == "close":
        _close(request, rows, user, unit)
    elif action in ("retry", "replace"):
        reference = request.POST.get("stay", "")
        stay = stay_or_404(request, unit, reference, Role.RECORDER) if reference else None
        stored = try_again(rows, unit, user, stay, overwrite=action == "replace")
        messages.success(
            request, f"{stored} of {len(rows)} rows found their place; the others still wait, with their reason."
        )
    return redirect("transfer_queue", slug=slug)


def _close(request: HttpRequest, rows: list[QueuedRow], user: User, unit: Unit) -> None:
    reason = request.POST.get("reason", "").strip()[:200]
    if not reason:
        messages.error(request, "Say why the rows are closed; they stay readable.")
        return
    _mark(rows, user, unit, f"closed: {reason}")
    messages.success(request, f"{len(rows)} rows closed.")


def _mark(rows: Iterable[QueuedRow], user: User, unit: Unit, how: str) -> None:
    ids = [r.pk for r in rows]
    if ids:
        QueuedRow.objects.filter(pk__in=ids).update(closed_at=timezone.now(), closed_by=user, closed_how=how[:200])
        audit.write(user.username, "closed queued rows", unit=unit.name, subject="queue", rows=ids, how=how)


def try_again(
    queued: list[QueuedRow], unit: Unit, user: User, stay: Stay | None = None, *, overwrite: bool = False
) -> int:
    """Send queued rows through the pipeline once more; returns how many left the queue."""
    pairs = [(q, as_row(q)) for q in queued]
    if stay is not None:
        for _, row in pairs:
            row.patient = PatientRef(stay.patient.identifier, stay.patient.system)
    parsed = Parsed("hl7v2", [row for _, row in pairs])
    options = pipeline.Options(confirmed=True, overwrite=overwrite)
    seen, found = pipeline.preview(unit, "the queue", parsed, options, with_findings=False)
    pipeline.store(unit, user, seen, found, options, queue=False)
    done = [q for q, row in pairs if row.fate is not None and row.fate not in WAITING]
    for q, row in pairs:
        if row.fate in WAITING and row.reason and row.reason != q.reason:
            QueuedRow.objects.filter(pk=q.pk).update(reason=row.reason, fate=row.fate.value)
    _mark(done, user, unit, f"stored for {stay.reference}" if stay else "stored")
    return len(done)
