"""The second factor: an authenticator app's six digits, with recovery codes for the day the phone is lost."""

from __future__ import annotations

import secrets
from urllib.parse import urlsplit

import django_otp
from django.contrib import messages
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render
from django.urls import reverse
from django.utils.crypto import salted_hmac
from django.utils.http import url_has_allowed_host_and_scheme
from django.views.decorators.http import require_POST
from django_otp.plugins.otp_static.models import StaticDevice, StaticToken
from django_otp.plugins.otp_totp.models import TOTPDevice

from worksheet.ward import audit
from worksheet.ward.access import person
from worksheet.ward.logins import is_their_password
from worksheet.ward.models import LoginSession, User

RECOVERY_CODES = 8


def second_factor(request: HttpRequest) -> HttpResponse:
    """Ask for the digits, or a recovery code."""
    wanted = request.GET.get("next", "") or request.POST.get("next", "")
    problem = ""
    if request.method == "POST":
        device = django_otp.match_token(request.user, _token(person(request), request.POST.get("code", "")))
        if device is not None:
            django_otp.login(request, device)
            request.session.cycle_key()
            audit.write(person(request).username, "second factor", subject=person(request).username)
            return redirect(_safe(request, wanted))
        audit.write(person(request).username, "wrong second factor", subject=person(request).username)
        problem = "That code is not right, or was used already. Codes change every 30 seconds; wait for the next one."
    return render(
        request, "review/second_factor.html", {"next": wanted, "problem": problem}, status=400 if problem else 200
    )


def second_factor_new(request: HttpRequest) -> HttpResponse:
    """Set up the authenticator app; it counts once its first code was right."""
    user = person(request)
    if django_otp.user_has_device(user) and not user.is_verified():  # type: ignore[attr-defined]
        return redirect("second_factor")
    device, _ = TOTPDevice.objects.get_or_create(user=user, confirmed=False, defaults={"name": "authenticator"})
    problem = ""
    if request.method == "POST":
        if not is_their_password(request, request.POST.get("password", "")):
            problem = "That is not your password."
        elif device.verify_token(request.POST.get("code", "").replace(" ", "")):
            codes = _confirm(request, device)
            return render(request, "review/recovery_codes.html", {"codes": codes})
        else:
            problem = "That code is not right. Check the clock of the phone and try the next code."
    context = {"device": device, "secret": _spaced(device), "address": device.config_url, "problem": problem}
    return render(request, "review/second_factor_new.html", context, status=400 if problem else 200)


def _confirm(request: HttpRequest, device: TOTPDevice) -> list[str]:
    """Make the device count, drop older ones, and make recovery codes, which are shown once."""
    user = person(request)
    TOTPDevice.objects.filter(user=user, confirmed=True).delete()
    device.confirmed = True
    device.save()
    StaticDevice.objects.filter(user=user).delete()
    recovery = StaticDevice.objects.create(user=user, name="recovery codes")
    codes = [secrets.token_hex(5) for _ in range(RECOVERY_CODES)]
    StaticToken.objects.bulk_create(StaticToken(device=recovery, token=_token(user, code)) for code in codes)
    django_otp.login(request, device)
    request.session.cycle_key()
    LoginSession.objects.filter(user=user).exclude(session_key=request.session.session_key).delete()
    audit.write(user.username, "set up second factor", subject=user.username)
    return codes


@require_POST
def second_factor_remove(request: HttpRequest) -> HttpResponse:
    """Give the second factor up: by somebody who is logged in with it and knows the password."""
    if not is_their_password(request, request.POST.get("password", "")):
        messages.error(request, "That is not your password; the second factor stays.")
        return redirect("account")
    for device in django_otp.devices_for_user(person(request), confirmed=None):
        device.delete()
    audit.write(person(request).username, "gave up second factor", subject=person(request).username)
    messages.success(request, "The second factor is removed.")
    return redirect("account")


def _token(user: User, code: str) -> str:
    """The digits as they are; of a recovery code only what is stored: nobody who reads the database can use it."""
    code = "".join(code.split()).lower()
    if code.isdigit() and len(code) == 6:
        return code
    return salted_hmac("worksheet.recovery", f"{user.pk}:{code}", algorithm="sha256").hexdigest()[:16]


def _spaced(device: TOTPDevice) -> str:
    """The secret as people type it into an app."""
    from base64 import b32encode

    text = b32encode(device.bin_key).decode().rstrip("=")
    return " ".join(text[i : i + 4] for i in range(0, len(text), 4))


def _safe(request: HttpRequest, wanted: str) -> str:
    """Only addresses of this site."""
    fine = url_has_allowed_host_and_scheme(
        wanted, allowed_hosts={request.get_host()}, require_https=request.is_secure()
    )
    return wanted if fine and urlsplit(wanted).path.startswith("/") else reverse("home")
