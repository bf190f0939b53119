"""The first page: the units a person may see."""

from django.http import HttpRequest, HttpResponse
from django.shortcuts import render

from worksheet.ward.models import Unit


def home(request: HttpRequest) -> HttpResponse:
    """Units of this person."""
    return render(request, "review/home.html", {"units": Unit.objects.visible_to(request.user).order_by("name")})
