"""Events between samples: recorded like an entry, corrected like an entry."""

from __future__ import annotations

import uuid
from datetime import datetime

from django.contrib import messages
from django.db import transaction
from django.http import HttpRequest, HttpResponse
from django.shortcuts import render
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.http import require_http_methods

from worksheet.oxygen.readings import Event
from worksheet.ward import audit, record
from worksheet.ward.models import Bed, Draft, Entry, Stay

from . import drafts, event_form
from .entry import Desk, answered, go, refuse_other_person, same
from .entry_page import facts, form_parts
from .event_form import SETTINGS, EventForm
from .people import patient_page
from .slip_words import DEVICE_WORDS, KIND_WORDS
from .versions import lead_to_newest, need_reason, newest


@require_http_methods(["GET", "HEAD", "POST"])
def event_new(request: HttpRequest, slug: str, ref: str) -> HttpResponse:
    """Record an event of a stay."""
    return serve(Desk.of(request, slug, ref))


def serve(desk: Desk) -> HttpResponse:
    """Open the form, or take what was sent; with an entry to replace it is a correction."""
    now = timezone.now()
    if desk.request.method == "POST":
        post = desk.request.POST
        return _take(desk, event_form.read(post, post.getlist("confirm"), desk.stay, desk.display, now), now)
    draft = drafts.find(desk.user, desk.stay, form_name(desk))
    if draft:
        form = event_form.read(*drafts.texts(draft), desk.stay, desk.display, now)
    elif desk.replacing and newest(desk.replacing) != desk.replacing:
        return lead_to_newest(desk.request, desk.stay, newest(desk.replacing))
    elif desk.replacing:
        form = event_form.of_entry(desk.replacing, desk.stay, desk.display, desk.user.get_username())
    else:
        form = event_form.blank(desk.stay, desk.display, desk.user.get_username(), desk.stay.unit.zone, now)
    return _show(desk, form, restored=draft)


def form_name(desk: Desk) -> str:
    """Under which name the draft is kept."""
    return desk.form_name if desk.replacing else "event"


def _take(desk: Desk, form: EventForm, now: datetime) -> HttpResponse:
    again = _sent_before(desk, form)
    if again:
        return go(desk.request, patient_page(desk.stay))
    event_form.check(form, desk.stay, desk.display, now, correcting=desk.replacing is not None)
    refuse_other_person(desk, form.slip)
    if desk.replacing:
        need_reason(form.slip)
    if form.slip.blocking() or form.slip.unanswered():
        return _show(desk, form, refused=True)
    stored = _correct(desk, form) if desk.replacing else _record(desk, form)
    if stored is None:
        return _show(desk, form, refused=True)
    at = stored.time.astimezone(desk.stay.unit.zone)
    verb = "Corrected" if desk.replacing else "Recorded"
    messages.success(desk.request, f"{verb}: {KIND_WORDS[Event(stored.event)]}, {at:%Y-%m-%d %H:%M}.")
    return go(desk.request, patient_page(desk.stay))


def _sent_before(desk: Desk, form: EventForm) -> bool:
    """Whether this very event is stored already: the answer to the first sending was lost on its way."""
    known = Entry.objects.visible_to(desk.user).filter(stay=desk.stay, key=form.slip.key).first()
    return known is not None and form.slip.moment.at is not None and same(known, desk, form.new_entry())


def _record(desk: Desk, form: EventForm) -> Entry | None:
    with transaction.atomic():
        stored, is_new = record.record(desk.stay, desk.user, form.new_entry())
        if is_new and form.kind is Event.BED_MOVE and form.bed and not _move(desk, form.bed):
            transaction.set_rollback(True)
            form.say("bed", "bed_taken", f"Bed {form.bed.name} was taken a moment ago.")
            return None
        if not is_new and not same(stored, desk, form.new_entry()):
            form.slip.key = uuid.uuid4().hex
            words = "This form was already recorded with other values. Save again to record this as another event."
            form.say("", "key_used", words)
            return None
        drafts.drop(desk.user, desk.stay, form_name(desk))
    return stored


def _correct(desk: Desk, form: EventForm) -> Entry | None:
    assert desk.replacing is not None  # noqa: S101 - the caller looked
    try:
        with transaction.atomic():
            stored = record.correct(desk.replacing, desk.user, form.new_entry(), form.slip.reason)
            if stored.replaces_id != desk.replacing.pk:
                form.slip.key = uuid.uuid4().hex
                form.say("", "key_used", "This form was used before for something else. Save again; nothing was saved.")
                return None
            drafts.drop(desk.user, desk.stay, form_name(desk))
            return stored
    except record.AlreadyReplaced:
        latest = newest(desk.replacing)
        did = "struck this event out" if latest.struck else "corrected this event"
        theirs = "; ".join(f"{label} {text}" for label, text in facts(desk.display, latest))
        who = latest.recorded_by.get_username()
        words = f"{who} {did} in the meantime ({latest.reason}): {theirs}. Yours was not saved."
        form.say("", "replaced", f"{words} Save again to correct their version." if not latest.struck else words)
        desk.replacing = desk.replacing if latest.struck else latest
        form.slip.key = uuid.uuid4().hex
        return None


def _move(desk: Desk, bed: Bed) -> bool:
    """Put the stay into the bed, unless somebody lies there by now."""
    stay = Stay.objects.select_for_update().get(pk=desk.stay.pk)
    Bed.objects.select_for_update().get(pk=bed.pk)  # two moves into one bed queue
    if Stay.objects.filter(bed=bed).present().exclude(pk=stay.pk).exists():
        return False
    before, stay.bed = stay.bed, bed
    stay.save(update_fields=["bed"])
    audit.write(
        desk.user.username, "moved", unit=desk.stay.unit.name, subject=stay.reference,
        before=before.name if before else "", after=bed.name,
    )  # fmt: skip
    return True


def _show(desk: Desk, form: EventForm, *, refused: bool = False, restored: Draft | None = None) -> HttpResponse:
    where = [desk.stay.unit.slug, desk.stay.reference]
    correct = reverse("entry_correct", args=[*where, desk.replacing.pk]) if desk.replacing else ""
    parts = form_parts(desk, form.slip, form_name(desk), correct or reverse("event_new", args=where))
    context = parts | {
        "form": form, "kinds": KIND_WORDS.items(), "devices": DEVICE_WORDS.items(),
        "settings": [line for line in parts["lines"] if line.field.name in SETTINGS],
        "refused": refused, "restored": restored,
        "restored_at": desk.display.stamp(restored.updated_at) if restored else "",
    }  # fmt: skip
    response = render(desk.request, "review/event.html", context)
    return answered(desk.request, response, bool(refused))
