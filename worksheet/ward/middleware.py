"""What holds for every request: methods, content policy, what is never stored, how long a login lasts."""

from __future__ import annotations

import time
from collections.abc import Callable
from functools import cache
from typing import Any
from urllib.parse import urlencode

from django.conf import settings
from django.contrib.auth import logout
from django.db.models import Exists, OuterRef
from django.http import HttpRequest, HttpResponse, HttpResponseNotAllowed
from django.shortcuts import redirect
from django.urls import reverse
from django_otp.plugins.otp_totp.models import TOTPDevice

from .models import Membership, User

POLLS = {"live", "progress"}  # ids of the page parts that ask by themselves
METHODS = ("GET", "HEAD", "POST", "OPTIONS")
# The hash is that of the empty style element that Plotly fills by script.
CONTENT_POLICY = "; ".join(
    [
        "default-src 'self'",
        "script-src 'self'",
        "style-src 'self' 'sha256-47DEQpj8HBSa+/TImW+5JCeuQeRkm5NMpJWZG3hSuFU='",
        "style-src-attr 'none'",
        "img-src 'self' data: blob:",
        "object-src 'none'",
        "base-uri 'none'",
        "frame-ancestors 'none'",
        "form-action 'self'",
    ]
)
HEADERS = {
    "Content-Security-Policy": CONTENT_POLICY,
    "Permissions-Policy": "camera=(), geolocation=(), microphone=(), payment=(), usb=()",
    "Cross-Origin-Resource-Policy": "same-origin",
    "Cache-Control": "no-store",
}
Answer = Callable[[HttpRequest], HttpResponse]


def content_policy(get_response: Answer) -> Answer:
    """Refuse methods that no page has; give each answer its headers unless the view chose its own."""

    def middleware(request: HttpRequest) -> HttpResponse:
        response = get_response(request) if request.method in METHODS else HttpResponseNotAllowed(METHODS)
        for name, value in HEADERS.items():
            response.headers.setdefault(name, value)
        return response

    return middleware


def session_limits(get_response: Answer) -> Answer:
    """End a login after some time without use, and after some time in any case.

    A page that updates itself reads the session and never extends it.
    """

    def middleware(request: HttpRequest) -> HttpResponse:
        if request.user.is_authenticated:
            now = time.time()
            began = request.session.setdefault("began", now)
            seen = request.session.get("seen", began)
            if now - began > settings.SESSION_ABSOLUTE_SECONDS or now - seen > settings.SESSION_IDLE_SECONDS:
                logout(request)
            elif not is_poll(request) and now - seen > 60:  # a write a minute is enough
                request.session["seen"] = now
        return get_response(request)

    return middleware


def second_factor(get_response: Answer) -> Answer:
    """Ask for the second factor where the person has one, or where the site requires one."""

    def middleware(request: HttpRequest) -> HttpResponse:
        user: Any = request.user
        if user.is_authenticated and not user.is_verified() and request.path not in _open_paths():
            has_one, required = _second_factor_of(user)
            if has_one:
                return redirect(f"{reverse('second_factor')}?{urlencode({'next': request.get_full_path()})}")
            if required:
                return redirect("second_factor_new")
        return get_response(request)

    return middleware


def _second_factor_of(user: Any) -> tuple[bool, bool]:
    """Whether the person has a second factor, and whether the site or a unit of theirs asks for one; in one query."""
    device = TOTPDevice.objects.filter(user=OuterRef("pk"), confirmed=True)
    asked = Membership.objects.filter(user=OuterRef("pk"), unit__second_factor=True)
    has_one, required = User.objects.filter(pk=user.pk).values_list(Exists(device), Exists(asked)).get()
    return has_one, required or settings.SECOND_FACTOR_REQUIRED


@cache
def _open_paths() -> frozenset[str]:
    names = ("second_factor", "second_factor_new", "logout", "login", "health")
    return frozenset(reverse(name) for name in names)


@cache
def _session_path() -> str:
    return reverse("session_left")


def is_poll(request: HttpRequest) -> bool:
    """Whether the page asked by itself, not the person."""
    if request.method == "GET" and request.path == _session_path():
        return True
    return request.headers.get("HX-Trigger") in POLLS


def extend(request: HttpRequest) -> None:
    """The person is still here."""
    request.session["seen"] = time.time()


def seconds_left(request: HttpRequest) -> int:
    """Seconds until this login ends if nothing is done [s]."""
    now, began = time.time(), request.session.get("began", time.time())
    seen = request.session.get("seen", began)
    return int(min(began + settings.SESSION_ABSOLUTE_SECONDS, seen + settings.SESSION_IDLE_SECONDS) - now)


def session_context(request: HttpRequest) -> dict[str, Any]:
    """For templates: how long this login still lasts."""
    user = getattr(request, "user", None)  # not there yet where a request is refused at the door
    return {"session_seconds_left": seconds_left(request)} if user is not None and user.is_authenticated else {}
