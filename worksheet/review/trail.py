"""The audit trail of a unit, for its lead."""

from __future__ import annotations

from django.core.paginator import Paginator
from django.db.models import Q
from django.http import HttpRequest, HttpResponse
from django.shortcuts import render

from worksheet.ward import audit
from worksheet.ward.access import person, unit_or_404
from worksheet.ward.display import Display
from worksheet.ward.models import AuditEvent, Role

PAGE = 100


def trail(request: HttpRequest, slug: str) -> HttpResponse:
    """Who did what, newest first, narrowed by person, action and subject."""
    unit = unit_or_404(request, slug, Role.LEAD)
    audit.write(person(request).username, "looked at the trail", unit=unit.name)
    names = unit.memberships.values_list("user__username", flat=True)
    seen = Q(unit=unit.name) | Q(unit="", subject__in=names)  # what happens in the unit, and logins of its members
    events = AuditEvent.objects.filter(seen).order_by("-id")
    chosen = {name: request.GET.get(name, "").strip() for name in ("actor", "action", "subject")}
    for name, wanted in chosen.items():
        if wanted:
            events = events.filter(**{name: wanted})
    page = Paginator(events, PAGE).get_page(request.GET.get("page"))
    actions = AuditEvent.objects.filter(seen).order_by("action").values_list("action", flat=True).distinct()
    context = {"unit": unit, "page": page, "chosen": chosen, "actions": list(actions), "here": "trail",
               "display": Display.of(person(request), unit)}  # fmt: skip
    return render(request, "review/trail.html", context)
