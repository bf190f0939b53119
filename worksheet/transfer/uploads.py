"""Files in: send, look at every row's fate, settle what is asked, store; nothing is stored before that."""

from __future__ import annotations

import hashlib
from typing import Any, cast

from django.core.paginator import Paginator
from django.http import Http404, HttpRequest, HttpResponse, JsonResponse
from django.shortcuts import redirect, render
from django.views.decorators.http import require_GET, require_POST

from worksheet.oxygen.quantities import measured
from worksheet.oxygen.readings import Site
from worksheet.ward.access import person, unit_or_404
from worksheet.ward.models import Role, Unit

from . import limits, mappings, plan, tabular, work
from .choices import ROLES, checked_options, common_zones
from .models import ColumnMapping, MessageState, RawMessage, Upload, UploadState
from .rows import WAITING, Fate, Refused

PAGE = 100
COLUMNS = ("place", "fate", "reason", "patient", "time", "site", "values")


@require_GET
def home(request: HttpRequest, slug: str) -> HttpResponse:
    """Send a file, and what is under way."""
    unit = unit_or_404(request, slug, Role.RECORDER)
    return render(request, "transfer/home.html", _home(unit))


def _home(unit: Unit, problem: str = "") -> dict[str, Any]:
    return {
        "unit": unit,
        "problem": problem,
        "uploads": Upload.objects.filter(unit=unit).defer("content", "details", "report")[:20],
        "mappings": ColumnMapping.objects.filter(unit=unit).order_by("name"),
        "waiting": unit.queued_rows.filter(closed_at=None).count(),
        "dead": RawMessage.objects.filter(unit=unit, state=MessageState.DEAD).count(),
        "max_megabytes": limits.MAX_BYTES // limits.MEGABYTE,
        "max_rows": limits.MAX_ROWS,
    }


@require_POST
def send(request: HttpRequest, slug: str) -> HttpResponse:
    """Take a file; it is read now (short) or in the background (long)."""
    unit = unit_or_404(request, slug, Role.RECORDER)
    sent = request.FILES.get("file")
    try:
        if sent is None or sent.size is None:
            raise Refused("Choose a file first.")
        if sent.size > limits.MAX_BYTES:
            raise Refused(
                f"The file is larger than {limits.MAX_BYTES // limits.MEGABYTE} MB; split it by month or by stay."
            )
        data = limits.read_stream(sent)
        kind = limits.format_of(sent.name or "", data)
    except Refused as refusal:
        return render(request, "transfer/home.html", _home(unit, str(refusal)), status=422)
    upload = Upload.objects.create(
        unit=unit,
        user=person(request),
        name=(sent.name or "file")[-160:],
        format=kind,
        content=data,
        digest=hashlib.sha256(data).hexdigest(),
    )
    work.start(upload, "read")
    return redirect("transfer_upload", slug=slug, pk=upload.pk)


def upload_or_404(request: HttpRequest, slug: str, pk: int) -> Upload:
    """An upload of a unit in which the person records."""
    unit = unit_or_404(request, slug, Role.RECORDER)
    mine = Upload.objects.visible_to(person(request)).filter(pk=pk, unit=unit)
    found: Upload | None = mine.select_related("unit", "user").first()
    if found is None:
        raise Http404("No such upload in this unit.")
    return found


@require_GET
def upload(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """The upload: progress, preview with every row's fate, or the report."""
    found = upload_or_404(request, slug, pk)
    busy = found.state in (UploadState.READING, UploadState.STORING)
    broken = busy and work.interrupted(found)
    if cast(Any, request).htmx and busy and not broken:
        return render(request, "transfer/_progress.html", {"upload": found, "unit": found.unit})
    response = render(
        request, "transfer/upload.html", {**_preview(request, found), "busy": busy and not broken, "broken": broken}
    )
    if cast(Any, request).htmx:
        response["HX-Refresh"] = "true"  # finished: show the whole page
    return response


def _preview(request: HttpRequest, found: Upload) -> dict[str, Any]:
    rows = work.unpack(found.details)
    only = request.GET.get("fate", "")
    if only == "attention":
        rows = [r for r in rows if r[1] in WAITING]
    elif only in set(Fate):
        rows = [r for r in rows if r[1] == only]
    page = Paginator(rows, PAGE).get_page(request.GET.get("page"))
    tabular_file = found.format in ("csv", "xlsx")
    report = found.report or {}
    return {
        "upload": found,
        "unit": found.unit,
        "report": report,
        "only": only,
        "page": page,
        "rows": [dict(zip(COLUMNS, row, strict=True)) for row in page.object_list],
        "fates": report.get("fates", {}),
        "storable": _storable(report.get("fates", {})),
        "choices": _column_choices(found) if tabular_file and found.state == UploadState.READY else [],
        "quantities": [(q.name, q.symbol, [(u.ucum, u.label or "no unit") for u in q.units]) for q in measured()],
        "roles": ROLES,
        "sites": [(int(s), s.name.lower().replace("_", " ")) for s in Site if s],
        "zones": common_zones(found.unit),
        "options": found.options,
        "tabular": tabular_file,
        "proposes_day": any("(proposed: the day)" in q for q in report.get("questions", [])),
        "asks_zone": any("time zone" in q for q in report.get("questions", [])),
    }


def _storable(fates: dict[str, int]) -> int:
    return sum(fates.get(f, 0) for f in (Fate.NEW, Fate.CORRECTS, Fate.WITHDRAWN))


def _column_choices(found: Upload) -> list[dict[str, Any]]:
    """The columns as they are read now, for the form that changes it."""
    chosen = found.options.get("columns", {})
    out = []
    for number, column in enumerate(found.report.get("columns", [])):
        value = chosen.get(column["header"])
        if value is None:
            value = {
                "role": column.get("role", ""),
                "quantity": column.get("quantity", ""),
                "unit": column.get("ucum", ""),
                "site": column.get("site_code", 0),
            }
        picked = f"{value['quantity']}|{value['unit']}" if value["role"] == "quantity" else value["role"]
        out.append({**column, "number": number, "picked": picked, "picked_site": int(value["site"])})
    return out


@require_POST
def settle(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """Take what was chosen and read the file again."""
    found = upload_or_404(request, slug, pk)
    if found.state not in (UploadState.READY, UploadState.REFUSED):
        return redirect("transfer_upload", slug=slug, pk=pk)
    try:
        found.options = checked_options(request.POST, found)
    except Refused as refusal:
        found.message = str(refusal)
        found.save(update_fields=["message", "touched_at"])
        return redirect("transfer_upload", slug=slug, pk=pk)
    work.start(found, "read")
    return redirect("transfer_upload", slug=slug, pk=pk)


@require_POST
def confirm(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """Store what was previewed, in one transaction; a second press does nothing."""
    found = upload_or_404(request, slug, pk)
    if found.report.get("questions"):
        return redirect("transfer_upload", slug=slug, pk=pk)
    name = request.POST.get("mapping_name", "").strip()
    if name and found.format in ("csv", "xlsx") and found.state == UploadState.READY:
        _keep_mapping(found, name)
    work.claim(pk, person(request), UploadState.READY, "store")
    return redirect("transfer_upload", slug=slug, pk=pk)


def _keep_mapping(found: Upload, name: str) -> None:
    content = bytes(found.content or b"")
    table = tabular.first_table(found.format, content)
    options = work.options_of(found)
    read_as = plan.propose(table, options.saved)
    mappings.save(found.unit, found.user, table.header, read_as, str(found.options.get("zone", "")), name)


@require_POST
def discard(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """Forget a file that was not stored."""
    found = upload_or_404(request, slug, pk)
    open_states = (UploadState.READY, UploadState.REFUSED, UploadState.RECEIVED)
    changed = Upload.objects.filter(pk=found.pk, state__in=open_states).update(
        state=UploadState.DISCARDED, content=None, details=None
    )
    return redirect("transfer_home", slug=slug) if changed else redirect("transfer_upload", slug=slug, pk=pk)


@require_POST
def again(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """Start again after an interruption; nothing had been stored."""
    found = upload_or_404(request, slug, pk)
    if work.interrupted(found):
        work.start(found, "read")
    return redirect("transfer_upload", slug=slug, pk=pk)


@require_GET
def report(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """The report with every row, as JSON."""
    found = upload_or_404(request, slug, pk)
    rows = [dict(zip(COLUMNS, row, strict=True)) for row in work.unpack(found.details)]
    answer = JsonResponse({**found.report, "details": rows}, json_dumps_params={"ensure_ascii": False, "indent": 1})
    answer["Content-Disposition"] = f'attachment; filename="import-{found.pk}.json"'
    return answer


@require_POST
def forget_mapping(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """Delete a saved mapping."""
    unit = unit_or_404(request, slug, Role.LEAD)
    ColumnMapping.objects.filter(unit=unit, pk=pk).delete()
    return redirect("transfer_home", slug=slug)
