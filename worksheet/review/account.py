"""One's own account: password, second factor, where one is logged in."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.contrib.auth import update_session_auth_hash
from django.contrib.auth.forms import PasswordChangeForm
from django.contrib.auth.views import LoginView, LogoutView
from django.core.exceptions import ValidationError
from django.http import HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.utils import timezone
from django.views.decorators.debug import sensitive_post_parameters
from django.views.decorators.http import require_POST
from django_otp import devices_for_user

from worksheet.ward import audit
from worksheet.ward.access import person
from worksheet.ward.logins import is_their_password
from worksheet.ward.models import LoginSession


class LogIn(LoginView):
    """Log in; the browser's name is kept with the session, so that a person can tell their sessions apart."""

    redirect_authenticated_user = True

    def form_valid(self, form: Any) -> HttpResponse:
        """Start the session."""
        answer = super().form_valid(form)
        self.request.session["agent"] = self.request.headers.get("User-Agent", "")[:200]
        audit.write(form.get_user().username, "logged in", subject=form.get_user().username)
        return answer


class LogOut(LogoutView):
    """Log out; the browser forgets what it kept of this site."""

    def post(self, request: HttpRequest, *args: Any, **kwargs: Any) -> HttpResponse:
        """End the session."""
        if request.user.is_authenticated:
            audit.write(person(request).username, "logged out", subject=person(request).username)
        answer = super().post(request, *args, **kwargs)
        answer.headers["Clear-Site-Data"] = '"cache", "cookies", "storage"'
        return answer


class PasswordForm(PasswordChangeForm):
    """The old password is checked as a login is: wrong tries count, and lock."""

    request: HttpRequest

    def clean_old_password(self) -> str:
        """Refuse a wrong one."""
        old: str = self.cleaned_data["old_password"]
        if not is_their_password(self.request, old):
            raise ValidationError(self.error_messages["password_incorrect"], code="password_incorrect")
        return old


@sensitive_post_parameters()
def account(request: HttpRequest) -> HttpResponse:
    """Password, second factor and sessions of this person."""
    user = person(request)
    form = PasswordForm(user, request.POST or None)
    form.request = request
    if request.method == "POST" and form.is_valid():
        update_session_auth_hash(request, form.save())
        LoginSession.objects.filter(user=user).exclude(session_key=request.session.session_key).delete()
        audit.write(user.username, "changed password", subject=user.username)
        messages.success(request, "The password is changed; all other logins of yours have ended.")
        return redirect("account")
    sessions = LoginSession.objects.filter(user=user, expire_date__gt=timezone.now()).order_by("-began_at")
    context = {
        "form": form,
        "sessions": sessions,
        "own": request.session.session_key,
        "devices": list(devices_for_user(user)),
    }
    return render(request, "review/account.html", context)


@require_POST
def session_end(request: HttpRequest) -> HttpResponse:
    """End one of one's own sessions."""
    began = request.POST.get("began", "")
    mine = LoginSession.objects.filter(user=person(request)).exclude(session_key=request.session.session_key)
    session = get_object_or_404(mine, pk=_key_of(mine, began))
    session.delete()
    audit.write(person(request).username, "ended a session", subject=person(request).username)
    messages.success(request, "That login has ended.")
    return redirect("account")


def _key_of(sessions: Any, began: str) -> str:
    """The key of the session that began at this moment: keys themselves never go to a page."""
    return next((s.pk for s in sessions if s.began_at.isoformat() == began), "")
