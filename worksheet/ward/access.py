"""What a view asks first: may this person see it, and may they change it."""

from __future__ import annotations

from typing import cast

from django.core.exceptions import PermissionDenied
from django.http import Http404, HttpRequest

from . import audit
from .models import Role, Stay, Unit, User


def person(request: HttpRequest) -> User:
    """The logged-in person; pages that need one are behind the login already."""
    return cast(User, request.user)


def role_in(user: User, unit: Unit) -> Role | None:
    """The person's role in a unit; an administrator leads everywhere."""
    if user.is_superuser:
        return Role.LEAD
    found = unit.memberships.filter(user=user).values_list("role", flat=True).first()
    return None if found is None else Role(found)


def unit_or_404(request: HttpRequest, slug: str, role: Role = Role.READER) -> Unit:
    """The unit, if the person belongs to it: 404 when they may not see it, 403 when their role is too low."""
    unit = Unit.objects.visible_to(request.user).filter(slug=slug).first()
    if unit is None:
        _tell_refused(request, Unit.objects.filter(slug=slug).first())
        raise Http404("No such unit, or not one of yours.")
    _enough(request, unit, role)
    return unit


def stay_or_404(request: HttpRequest, unit: Unit, reference: str, role: Role = Role.READER) -> Stay:
    """A stay of the unit, under the same rule."""
    stay = (
        Stay.objects.visible_to(request.user)
        .filter(unit=unit, reference=reference)
        .select_related("patient", "bed", "unit")
        .first()
    )
    if stay is None:
        raise Http404("No such stay in this unit.")
    _enough(request, unit, role)
    return stay


def _enough(request: HttpRequest, unit: Unit, role: Role) -> None:
    if role is Role.READER:
        return
    held = role_in(person(request), unit)
    if held is None or held < role:
        _tell_refused(request, unit)
        raise PermissionDenied(f"This needs the role of {role.label} in {unit.name}.")


def _tell_refused(request: HttpRequest, unit: Unit | None) -> None:
    """Keep in the trail of the unit who tried to see or do what they may not."""
    if unit is not None and request.user.is_authenticated:
        what = request.resolver_match.view_name if request.resolver_match else ""
        audit.write(person(request).username, "refused", unit=unit.name, subject=person(request).username, page=what)
