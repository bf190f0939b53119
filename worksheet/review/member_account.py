"""What a lead does for a member's account: shut, open, end logins, link for a new password, drop a lost factor."""

from __future__ import annotations

from typing import Any

import django_otp
from django.contrib import messages
from django.contrib.auth.tokens import default_token_generator
from django.contrib.auth.views import PasswordResetConfirmView
from django.core.exceptions import PermissionDenied
from django.db import transaction
from django.http import HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, redirect
from django.urls import reverse, reverse_lazy
from django.utils.encoding import force_bytes
from django.utils.http import urlsafe_base64_encode
from django.views.decorators.http import require_POST

from worksheet.ward import audit
from worksheet.ward.access import person, unit_or_404
from worksheet.ward.models import LoginSession, Role, Unit, User

from .members import members_page

DONE = {
    "shut": "shut account",
    "open": "opened account",
    "end": "ended logins",
    "password": "made a link for a new password",
    "factor": "dropped second factor",
}


@require_POST
def member_account(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """Do one of these for a member; each needs a reason, which stays in the trail."""
    unit = unit_or_404(request, slug, Role.LEAD)
    member = get_object_or_404(unit.memberships.select_related("user"), pk=pk).user
    what, reason = request.POST.get("do", ""), request.POST.get("reason", "").strip()[:200]
    _allowed(person(request), member)
    if what not in DONE or not reason:
        messages.error(request, "Choose what to do and write why; nothing was changed.")
        return redirect("members", slug=slug)
    link = _do(request, unit, member, what, reason)
    if link:
        return members_page(request, unit, link=link, link_for=member.username)
    messages.success(request, f"{member.username}: {DONE[what]}.")
    return redirect("members", slug=slug)


def _allowed(lead: User, member: User) -> None:
    """Who leads one unit must not get hold of an account that reaches further."""
    if lead == member:
        raise PermissionDenied("Your own account is changed on the page of your account.")
    if lead.is_superuser:
        return
    led = Unit.objects.visible_to(lead, Role.LEAD)
    if member.is_superuser or member.memberships.exclude(unit__in=led).exists():
        raise PermissionDenied("This person also belongs elsewhere; an administrator has to do this.")


@transaction.atomic
def _do(request: HttpRequest, unit: Unit, member: User, what: str, reason: str) -> str:
    """Do it and tell the trail; a link where one was made."""
    link = ""
    if what in ("shut", "open"):
        User.objects.filter(pk=member.pk).update(is_active=what == "open", wrong_logins=0)
    if what in ("shut", "end"):
        LoginSession.objects.filter(user=member).delete()
    if what == "factor":
        for device in django_otp.devices_for_user(member, confirmed=None):
            device.delete()
    if what == "password":
        link = _password_link(request, member)
    audit.write(person(request).username, DONE[what], unit=unit.name, subject=member.username, reason=reason)
    return link


def _password_link(request: HttpRequest, member: User) -> str:
    """A link that works once, for a day; the lead never sets nor sees the password, and the factor stays."""
    uid, token = urlsafe_base64_encode(force_bytes(member.pk)), default_token_generator.make_token(member)
    return request.build_absolute_uri(reverse("password_new", args=[uid, token]))


class NewPassword(PasswordResetConfirmView):
    """Choose a new password with a link; every login of this account ends."""

    template_name = "registration/password_new.html"
    success_url = reverse_lazy("login")

    def form_valid(self, form: Any) -> HttpResponse:
        """Store it."""
        answer = super().form_valid(form)
        LoginSession.objects.filter(user=form.user).delete()
        User.objects.filter(pk=form.user.pk).update(wrong_logins=0)
        audit.write(form.user.username, "chose a new password by link", subject=form.user.username)
        return answer
