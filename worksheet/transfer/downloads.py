"""Download links: a stay or a unit as CSV or FHIR, under names or de-identified; each one leaves a trace."""

from __future__ import annotations

from django.http import Http404, HttpRequest, StreamingHttpResponse
from django.views.decorators.http import require_GET

from worksheet.ward import audit
from worksheet.ward.access import person, stay_or_404, unit_or_404
from worksheet.ward.models import Role, Unit

from . import csv_out, fhir_out
from .leaving import Leaving, gather


def _answer(request: HttpRequest, unit: Unit, reference: str, kind: str) -> StreamingHttpResponse:
    hidden = request.GET.get("deidentify") == "1"
    leaving = gather(unit, reference, deidentify=hidden)
    if leaving is None:
        raise Http404("There is nothing to export.")
    audit.write(person(request).username, "exported", unit=unit.name, subject=reference or "all stays", format=kind,
                entries=len(leaving.entries), deidentified=hidden)  # fmt: skip
    lines = csv_out.lines(leaving) if kind == "csv" else fhir_out.lines(leaving)
    answer = StreamingHttpResponse(
        lines, content_type="text/csv; charset=utf-8" if kind == "csv" else "application/fhir+json"
    )
    answer["Content-Disposition"] = (
        f'attachment; filename="{_file_name(leaving, reference)}.{"csv" if kind == "csv" else "fhir.json"}"'
    )
    answer["Cache-Control"] = "no-store"
    return answer


def _file_name(leaving: Leaving, reference: str) -> str:
    if leaving.deidentify:
        return "deidentified"
    plain = "".join(c for c in reference if c.isascii() and (c.isalnum() or c in "-_"))
    return plain or leaving.unit.slug


@require_GET
def stay_csv(request: HttpRequest, slug: str, reference: str) -> StreamingHttpResponse:
    """One stay as CSV."""
    return _stay(request, slug, reference, "csv")


@require_GET
def stay_fhir(request: HttpRequest, slug: str, reference: str) -> StreamingHttpResponse:
    """One stay as a FHIR Bundle."""
    return _stay(request, slug, reference, "fhir")


def _stay(request: HttpRequest, slug: str, reference: str, kind: str) -> StreamingHttpResponse:
    unit = unit_or_404(request, slug)
    stay = stay_or_404(request, unit, reference)
    return _answer(request, unit, stay.reference, kind)


@require_GET
def unit_csv(request: HttpRequest, slug: str) -> StreamingHttpResponse:
    """All stays of a unit as CSV (unit lead)."""
    return _answer(request, unit_or_404(request, slug, Role.LEAD), "", "csv")


@require_GET
def unit_fhir(request: HttpRequest, slug: str) -> StreamingHttpResponse:
    """All stays of a unit as a FHIR Bundle (unit lead)."""
    return _answer(request, unit_or_404(request, slug, Role.LEAD), "", "fhir")
