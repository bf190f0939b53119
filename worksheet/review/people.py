"""Who is typing, and for which stay: the way of the forms into the access rules."""

from __future__ import annotations

from django.http import Http404, HttpRequest
from django.shortcuts import get_object_or_404
from django.urls import NoReverseMatch, reverse

from worksheet.ward.models import Role, Stay, Unit, User


def recorder(request: HttpRequest) -> User:
    """The logged-in person."""
    if not isinstance(request.user, User):
        raise Http404
    return request.user


def unit_for(request: HttpRequest, slug: str, role: Role = Role.RECORDER) -> Unit:
    """The unit, if this person has the role in it."""
    return get_object_or_404(Unit.objects.visible_to(request.user, role), slug=slug)


def stay_for(request: HttpRequest, slug: str, ref: str, role: Role = Role.RECORDER) -> Stay:
    """The stay, if this person has the role in its unit."""
    stays = Stay.objects.visible_to(request.user, role).select_related("unit", "bed", "patient")
    return get_object_or_404(stays, unit__slug=slug, reference=ref)


def patient_page(stay: Stay) -> str:
    """Address of the stay's page."""
    return _address("patient", stay.unit.slug, stay.reference)


def unit_page(unit: Unit) -> str:
    """Address of the unit review."""
    return _address("unit", unit.slug)


def _address(name: str, *args: str) -> str:
    try:
        return reverse(name, args=args)
    except NoReverseMatch:
        return reverse("home")
