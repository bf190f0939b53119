"""Who is typing, and for which stay: the way of the forms into the access rules."""

from __future__ import annotations

from django.http import HttpRequest
from django.urls import NoReverseMatch, reverse

from worksheet.ward.access import stay_or_404, unit_or_404
from worksheet.ward.models import Role, Stay, Unit


def stay_for(request: HttpRequest, slug: str, ref: str, role: Role = Role.RECORDER) -> Stay:
    """The stay, if this person has the role in its unit."""
    return stay_or_404(request, unit_or_404(request, slug), ref, role)


def patient_page(stay: Stay) -> str:
    """Address of the stay's page."""
    return _address("patient", stay.unit.slug, stay.reference)


def unit_page(unit: Unit) -> str:
    """Address of the unit review."""
    return _address("unit_review", unit.slug)


def _address(name: str, *args: str) -> str:
    try:
        return reverse(name, args=args)
    except NoReverseMatch:
        return reverse("home")
