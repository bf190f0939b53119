"""The first page: straight to the unit where there is one, a choice where there are several."""

from django.db.models import Count, Q
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from worksheet.ward.models import Unit


def home(request: HttpRequest) -> HttpResponse:
    """Units of this person."""
    present = Count("stays", filter=Q(stays__discharged_at__isnull=True), distinct=True)
    units = list(Unit.objects.visible_to(request.user).annotate(here=present).order_by("name"))
    if len(units) == 1:
        return redirect("unit_review", slug=units[0].slug)
    return render(request, "review/home.html", {"units": units})
