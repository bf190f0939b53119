"""Logins that fail: told in the trail, limited for each account, from an address that the client cannot choose."""

from __future__ import annotations

from ipaddress import ip_address
from typing import Any

from axes.signals import user_locked_out
from django.conf import settings
from django.contrib.auth import authenticate
from django.contrib.auth.signals import user_logged_in, user_login_failed
from django.core.exceptions import PermissionDenied
from django.db.models import F
from django.dispatch import receiver
from django.http import HttpRequest

from . import audit
from .models import User


def client_address(request: HttpRequest) -> str | None:
    """Where the request came from: as the outermost of our own proxies saw it; what a client claims does not count."""
    seen = str(request.META.get("REMOTE_ADDR") or "")
    if settings.PROXIES:
        told = [part for part in str(request.META.get("HTTP_X_FORWARDED_FOR") or "").split(",") if part.strip()]
        seen = told[-settings.PROXIES].strip() if len(told) >= settings.PROXIES else seen
    try:
        return str(ip_address(seen))
    except ValueError:
        return None


class AccountCap:
    """Shuts an account after many wrong passwords in a row, from any address (NIST SP 800-63B-4: at most 100)."""

    def authenticate(self, request: HttpRequest, username: str | None = None, **credentials: Any) -> None:
        """Refuse before the password is looked at; the person hears the same as after a wrong password."""
        if username and User.objects.filter(username=username, wrong_logins__gte=settings.WRONG_LOGINS_CAP).exists():
            raise PermissionDenied("too many wrong passwords in a row")


def is_their_password(request: HttpRequest, password: str) -> bool:
    """Whether the logged-in person knows the password; wrong tries count as wrong logins."""
    name = request.user.get_username()
    return authenticate(request, username=name, password=password) is not None


@receiver(user_login_failed)
def count_and_tell(sender: object, credentials: dict[str, Any], request: HttpRequest | None = None, **_: Any) -> None:
    """Count a wrong login, and tell it in the trail. What was tried while locked counts for nothing."""
    locked = getattr(request, "axes_locked_out", False) and not getattr(request, "axes_failures_since_start", None)
    if request is None or locked:
        return
    name = str(credentials.get("username") or "")
    known = User.objects.filter(username=name, wrong_logins__lt=settings.WRONG_LOGINS_CAP)
    counted = known.update(wrong_logins=F("wrong_logins") + 1)
    # A name that nobody has may be a password typed into the wrong field: it is not kept.
    audit.write("login", "login failed", subject=name if counted else "", address=client_address(request))


@receiver(user_locked_out)
def tell_lock(sender: object, request: HttpRequest, username: str | None, **_: Any) -> None:
    """Tell in the trail that a name was locked at an address; once, not at every further try."""
    if getattr(request, "axes_failures_since_start", None):
        known = User.objects.filter(username=username).exists()
        audit.write("login", "locked", subject=username if known else "", address=client_address(request))  # type: ignore[arg-type]


@receiver(user_logged_in)
def forget_count(sender: object, request: HttpRequest, user: User, **_: Any) -> None:
    """A right password sets the count back."""
    if user.wrong_logins:
        User.objects.filter(pk=user.pk).update(wrong_logins=0)
