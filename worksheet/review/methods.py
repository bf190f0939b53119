"""The methods page."""

from __future__ import annotations

from django.http import HttpRequest, HttpResponse
from django.shortcuts import render

from worksheet.ward.access import unit_or_404


def methods(request: HttpRequest, slug: str = "") -> HttpResponse:
    """Quantities, equations, constants and sources; those in force where a unit is named."""
    unit = unit_or_404(request, slug) if slug else None
    return render(request, "review/methods.html", {"unit": unit, "here": "methods"})
