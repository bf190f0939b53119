"""Whom a command acts for: units by name, and accounts that nobody can log in with."""

from __future__ import annotations

from worksheet.ward.models import Unit, User

from .rows import Refused


def unit_named(name: str) -> Unit:
    """The unit with this name or short name."""
    found = Unit.objects.filter(name__iexact=name).first() or Unit.objects.filter(slug__iexact=name).first()
    if found is None:
        known = ", ".join(f"{u.name} ({u.slug})" for u in Unit.objects.order_by("name")[:20]) or "none yet"
        raise Refused(f"There is no unit '{name}'. Known units: {known}.")
    return found


def machine(name: str) -> User:
    """The account under which a command stores; it has no password and cannot log in."""
    user, new = User.objects.get_or_create(username=name, defaults={"is_active": False})
    if new:
        user.set_unusable_password()
        user.save(update_fields=["password"])
    return user
