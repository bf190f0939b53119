"""Taking a patient in, changing the facts of a stay, ending it."""

from __future__ import annotations

from typing import Any

from django.contrib import messages
from django.db import IntegrityError, transaction
from django.http import HttpRequest, HttpResponse
from django.shortcuts import render
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.http import require_http_methods

from worksheet.ward import audit
from worksheet.ward.access import person, unit_or_404
from worksheet.ward.display import Display
from worksheet.ward.models import Bed, Role, Stay, Unit

from . import stay_form
from .entry import answered, go
from .entry_page import Line, Said
from .event_form import beds_of_unit
from .people import patient_page, stay_for, unit_page
from .stay_form import SIZES, StayForm

INPUTS = ("identifier", "reference", "bed", "date", "clock", "end_date", "end_clock", "note")


@require_http_methods(["GET", "HEAD", "POST"])
def stay_new(request: HttpRequest, slug: str) -> HttpResponse:
    """Take a patient in."""
    unit = unit_or_404(request, slug, Role.RECORDER)
    display, now = Display.of(person(request), unit), timezone.now()
    if request.method != "POST":
        return _show(request, unit, stay_form.blank(unit, display, now), reverse("stay_new", args=[slug]))
    form = stay_form.from_post(request.POST, request.POST.getlist("confirm"), display)
    stay_form.check(form, unit, display, now)
    if not form.standing():
        stay = _take_in(request, unit, form)
        if stay:
            messages.success(request, f"{stay.reference} is taken in. Type the first entry.")
            return go(request, reverse("entry_new", args=[slug, stay.reference]))
    return _show(request, unit, form, reverse("stay_new", args=[slug]), refused=True)


def _take_in(request: HttpRequest, unit: Unit, form: StayForm) -> Stay | None:
    try:
        with transaction.atomic():
            if form.bed and not _still_free(form, form.bed):
                return None
            sizes = {name: form.fields[name].value for name in SIZES}
            stay = Stay.objects.create(
                unit=unit, patient=stay_form.patient_of(form), bed=form.bed, reference=form.reference,
                admitted_at=form.admitted, note=form.note, **sizes,
            )  # fmt: skip
            audit.write(person(request).username, "taken in", unit=unit.name, subject=stay.reference, **described(stay))
    except IntegrityError:
        form.say("reference", "reference_used", f"Somebody took in a patient as {form.reference} a moment ago.")
        return None
    return stay


def _still_free(form: StayForm, bed: Bed) -> bool:
    """Whether the bed is free now that it is held for this transaction."""
    Bed.objects.select_for_update().get(pk=bed.pk)
    if Stay.objects.filter(bed=bed).present().exists():
        form.say("bed", "bed_taken", "The bed was taken a moment ago.")
        return False
    return True


@require_http_methods(["GET", "HEAD", "POST"])
def stay_edit(request: HttpRequest, slug: str, ref: str) -> HttpResponse:
    """Change the facts of a stay, or end it."""
    stay = stay_for(request, slug, ref)
    display, now, address = (
        Display.of(person(request), stay.unit),
        timezone.now(),
        reverse("stay_edit", args=[slug, ref]),
    )
    if request.method != "POST":
        return _show(request, stay.unit, stay_form.of_stay(stay, display), address, stay=stay)
    form = stay_form.from_post(request.POST, request.POST.getlist("confirm"), display)
    stay_form.check(form, stay.unit, display, now, stay)
    if form.standing():
        return _show(request, stay.unit, form, address, stay=stay, refused=True)
    _change(request, stay, form)
    messages.success(request, f"{ref}: {'the stay has ended' if stay.discharged_at else 'changed'}.")
    return go(request, unit_page(stay.unit) if stay.discharged_at else patient_page(stay))


@transaction.atomic
def _change(request: HttpRequest, stay: Stay, form: StayForm) -> None:
    before = described(stay)
    for name in SIZES:
        setattr(stay, name, form.fields[name].value)
    stay.admitted_at, stay.discharged_at, stay.note = form.admitted, form.discharged, form.note
    stay.save(update_fields=[*SIZES, "admitted_at", "discharged_at", "note"])
    audit.write(
        person(request).username, "stay changed", unit=stay.unit.name, subject=stay.reference,
        before=before, after=described(stay),
    )  # fmt: skip


def described(stay: Stay) -> dict[str, Any]:
    """The facts of a stay for the audit trail."""
    moments = {name: getattr(stay, name) for name in ("admitted_at", "discharged_at")}
    return {
        "bed": stay.bed.name if stay.bed else "",
        **{name: moment.isoformat() if moment else None for name, moment in moments.items()},
        **{name: getattr(stay, name) for name in SIZES},
    }


def _show(
    request: HttpRequest, unit: Unit, form: StayForm, address: str, *, stay: Stay | None = None, refused: bool = False
) -> HttpResponse:
    def said(notices: list[Any]) -> list[Said]:
        return [Said(n, n.token in form.confirmed) for n in notices]

    context = {
        "unit": unit, "stay": stay, "form": form, "form_url": address, "refused": refused,
        "page": patient_page(stay) if stay else unit_page(unit),
        "lines": [Line(f, said(f.notices)) for f in form.fields.values()],
        "said": {name: said([n for n in form.notices if n.field == name]) for name in INPUTS},
        "summary": said(form.standing()), "beds": [] if stay else beds_of_unit(unit),
    }  # fmt: skip
    response = render(request, "review/entry_stay.html", context)
    return answered(request, response, bool(refused))
