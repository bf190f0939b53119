"""Who belongs to a unit: invite, change a role, take somebody out. For the unit lead."""

from __future__ import annotations

from typing import Any

from django import forms
from django.conf import settings
from django.contrib import messages
from django.contrib.auth.decorators import login_not_required
from django.contrib.auth.forms import UserCreationForm
from django.db import transaction
from django.http import Http404, HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.debug import sensitive_post_parameters
from django.views.decorators.http import require_POST

from worksheet.ward import audit
from worksheet.ward.access import person, unit_or_404
from worksheet.ward.models import Invitation, Membership, Role, Unit, User


class RoleForm(forms.Form):
    """A role in a unit."""

    role = forms.TypedChoiceField(choices=Role.choices, coerce=lambda value: Role(int(value)))


class AccountForm(UserCreationForm):  # type: ignore[type-arg]
    """A new account made from an invitation."""

    class Meta:
        model = User
        fields = ("username", "first_name", "last_name")


def members(request: HttpRequest, slug: str) -> HttpResponse:
    """Members of the unit, and the link of a new invitation, shown once."""
    unit = unit_or_404(request, slug, Role.LEAD)
    link, form = "", RoleForm(request.POST or None)
    if request.method == "POST" and form.is_valid():
        _, token = Invitation.make(unit, form.cleaned_data["role"], person(request))
        link = request.build_absolute_uri(reverse("invitation", args=[token]))
        audit.write(person(request).username, "invited", unit=unit.name, role=form.cleaned_data["role"].label)
    return members_page(request, unit, link=link, form=form)


def members_page(
    request: HttpRequest, unit: Unit, *, link: str = "", link_for: str = "", form: RoleForm | None = None
) -> HttpResponse:
    """The page, with a link that was just made."""
    context = {"unit": unit, "link": link, "link_for": link_for, "form": form or RoleForm(), "roles": Role.choices,
               "here": "members", "cap": settings.WRONG_LOGINS_CAP,
               "members": unit.memberships.select_related("user").order_by("user__username")}  # fmt: skip
    return render(request, "review/members.html", context)


@require_POST
def member_change(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """Change a member's role, or take the member out; never the last lead."""
    unit = unit_or_404(request, slug, Role.LEAD)
    member = get_object_or_404(unit.memberships.select_related("user"), pk=pk)
    wanted = request.POST.get("role", "")
    others = unit.memberships.filter(role=Role.LEAD).exclude(pk=member.pk)
    if member.role == Role.LEAD and wanted != str(Role.LEAD.value) and not others.exists():
        messages.error(request, "A unit needs at least one lead: make somebody else lead first.")
        return redirect("members", slug=slug)
    before = member.get_role_display()
    if wanted == "out":
        member.delete()
        after = "taken out"
    else:
        form = RoleForm(request.POST)
        if not form.is_valid():
            raise Http404("No such role.")
        member.role = form.cleaned_data["role"]
        member.save(update_fields=["role"])
        after = member.get_role_display()
    audit.write(person(request).username, "changed member", unit=unit.name, subject=member.user.username,
                before=before, after=after)  # fmt: skip
    messages.success(request, f"{member.user.username}: {after}.")
    return redirect("members", slug=slug)


@login_not_required
@sensitive_post_parameters()
def invitation(request: HttpRequest, token: str) -> HttpResponse:
    """Take up an invitation: somebody logged in joins, anybody else makes an account first."""
    invited = Invitation.open_with(token)
    if invited is None:
        words = "This invitation was used already, or is older than three days. Ask the unit lead for a new one."
        return render(request, "error.html", {"title": "No open invitation", "words": words}, status=410)
    form = None if request.user.is_authenticated else AccountForm(request.POST or None)
    if request.method == "POST" and (form is None or form.is_valid()):
        user = person(request) if form is None else form.save(commit=False)
        _join(user, invited)
        messages.success(request, f"You are now {invited.get_role_display()} of {invited.unit}.")
        return redirect("unit_review", slug=invited.unit.slug) if form is None else redirect("login")
    context: dict[str, Any] = {"invited": invited, "form": form}
    return render(request, "review/invitation.html", context)


@transaction.atomic
def _join(user: User, invited: Invitation) -> None:
    if user.pk is None:
        user.save()
    Membership.objects.update_or_create(user=user, unit=invited.unit, defaults={"role": invited.role})
    invited.used_at = timezone.now()
    invited.save(update_fields=["used_at"])
    audit.write(user.username, "joined", unit=invited.unit.name, subject=user.username,
                role=invited.get_role_display(), invited_by=invited.invited_by.username)  # fmt: skip
