"""A new unit, made by an administrator."""

from __future__ import annotations

from typing import Any

from django import forms
from django.contrib import messages
from django.core.exceptions import PermissionDenied, ValidationError
from django.db import transaction
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from worksheet.ward import audit, beds
from worksheet.ward.access import person
from worksheet.ward.models import Unit

_TAKEN = {"new"}


class NewUnitForm(forms.ModelForm):  # type: ignore[type-arg]
    """Name, short name for addresses, time zone and beds."""

    beds = forms.CharField(label="Beds", max_length=600, help_text="in the order of the round: 1-12, or 1, 2, 3a")

    class Meta:
        model = Unit
        fields = ("name", "slug", "time_zone")
        labels = {"slug": "Short name, for addresses"}
        help_texts = {"slug": "letters, digits and hyphens", "time_zone": "like Europe/Zurich"}

    def clean_slug(self) -> str:
        """Not a word that an address needs."""
        slug: str = self.cleaned_data["slug"].lower()
        if slug in _TAKEN or Unit.objects.filter(slug=slug).exists():
            raise ValidationError("This short name is taken.")
        return slug

    def clean_beds(self) -> list[str]:
        """Names of beds."""
        return bed_names(self.cleaned_data["beds"])


def bed_names(text: str) -> list[str]:
    """Names of beds for a form."""
    try:
        return beds.names_of(text)
    except ValueError as error:
        raise ValidationError(str(error)) from None


def unit_new(request: HttpRequest) -> HttpResponse:
    """Make a unit with its beds; its people are invited on its page of members."""
    user = person(request)
    if not user.is_superuser:
        raise PermissionDenied("Only an administrator makes a unit.")
    form = NewUnitForm(request.POST or None)
    if request.method == "POST" and form.is_valid():
        unit = _made(form, user.username)
        messages.success(request, f"{unit} is made. Invite its lead next.")
        return redirect("members", slug=unit.slug)
    context: dict[str, Any] = {"form": form, "here": "unit_new"}
    return render(request, "review/unit_new.html", context, status=400 if request.method == "POST" else 200)


@transaction.atomic
def _made(form: NewUnitForm, by: str) -> Unit:
    unit: Unit = form.save()
    beds.set_beds(unit, form.cleaned_data["beds"])
    audit.write(by, "made the unit", unit=unit.name, subject=unit.name, beds=form.cleaned_data["beds"])
    return unit
