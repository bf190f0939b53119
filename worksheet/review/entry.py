"""The entry form: type a slip, see what follows while typing, save it once; correct it later with a reason."""

from __future__ import annotations

import uuid
from dataclasses import dataclass, replace
from typing import Any

from django.contrib import messages
from django.db import transaction
from django.http import HttpRequest, HttpResponse
from django.shortcuts import get_object_or_404, redirect, render
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.http import require_http_methods

from worksheet.oxygen.readings import Event, Site
from worksheet.ward import record
from worksheet.ward.access import person
from worksheet.ward.display import Display
from worksheet.ward.models import Entry, Stay, User

from . import checks, drafts, entry_form, moments, pasted
from .entry_page import conflict_rows, page_parts
from .people import patient_page, stay_for
from .slip import Level, Notice, Slip
from .slip_words import SITE_WORDS
from .versions import lead_to_newest, need_reason, newest, somebody_faster


@dataclass
class Desk:
    """One person at the form of one stay."""

    request: HttpRequest
    user: User
    stay: Stay
    display: Display
    replacing: Entry | None = None

    @classmethod
    def of(cls, request: HttpRequest, slug: str, ref: str, entry_id: int | None = None) -> Desk:
        """The desk, or 404 for who may not record here."""
        user, stay = person(request), stay_for(request, slug, ref)
        entries = Entry.objects.visible_to(user).filter(stay=stay).select_related("recorded_by", "stay__unit")
        replacing = get_object_or_404(entries, pk=entry_id) if entry_id else None
        return cls(request, user, stay, Display.of(user, stay.unit), replacing)

    @property
    def form_name(self) -> str:
        """Under which name the draft is kept."""
        return f"correct-{self.replacing.pk}" if self.replacing else "entry"

    def posted(self) -> Slip:
        """What was sent."""
        post = self.request.POST
        return entry_form.from_post(post, post.getlist("confirm"), self.display, self.stay.unit.zone, timezone.now())

    def check(self, slip: Slip) -> Any:
        """Notices and the trial derivation."""
        return checks.check(slip, self.user, self.stay, self.display, timezone.now(), self.replacing)


@require_http_methods(["GET", "HEAD", "POST"])
def entry_new(request: HttpRequest, slug: str, ref: str) -> HttpResponse:
    """Type a slip for a stay."""
    return serve(Desk.of(request, slug, ref))


def serve(desk: Desk) -> HttpResponse:
    """Open the form, or take what was sent; with an entry to replace it is a correction."""
    return _save(desk) if desk.request.method == "POST" else _open(desk)


@require_http_methods(["POST"])
def entry_live(request: HttpRequest, slug: str, ref: str) -> HttpResponse:
    """What follows from the slip as typed so far; nothing is stored."""
    number = request.POST.get("replacing", "")
    desk = Desk.of(request, slug, ref, int(number) if number.isdigit() else None)
    slip = desk.posted()
    trial = desk.check(slip)
    response = render(request, "review/_entry_live.html", page_parts(desk, slip, trial) | {"live": True})
    response["X-Worksheet-Form"] = "live"
    return response


def _open(desk: Desk) -> HttpResponse:
    """The form as it opens: a draft if there is one, the entry to correct, or empty with the time of now."""
    now, zone = timezone.now(), desk.stay.unit.zone
    draft = drafts.find(desk.user, desk.stay, desk.form_name)
    if draft:
        slip = entry_form.from_post(*drafts.texts(draft), desk.display, zone, now)
    elif desk.replacing and newest(desk.replacing) != desk.replacing:
        return lead_to_newest(desk.request, desk.stay, newest(desk.replacing))
    elif desk.replacing:
        slip = entry_form.from_entry(desk.replacing, desk.display, desk.user.get_username(), zone)
        slip.moment = moments.read(slip.date, slip.clock, slip.fold, zone, now)
    else:
        units = desk.user.preferences.get("entry_units", {})
        slip = entry_form.blank(desk.display, units, desk.user.get_username(), zone, now)
        slip.opened = "" if "clock" in desk.request.GET else f"{slip.date} {slip.clock}"
        slip.date, slip.clock = (desk.request.GET.get(k, v) for k, v in (("date", slip.date), ("clock", slip.clock)))
        slip.moment = moments.read(slip.date, slip.clock, slip.fold, zone, now)
    trial = desk.check(slip)
    return _show(desk, slip, trial, restored=draft, restored_at=desk.display.stamp(draft.updated_at) if draft else "")


def _show(desk: Desk, slip: Slip, trial: Any, *, refused: bool = False, **more: Any) -> HttpResponse:
    context = page_parts(desk, slip, trial) | {"refused": refused, **more}
    response = render(desk.request, "review/entry.html", context)
    return answered(desk.request, response, bool(refused))


def _save(desk: Desk) -> HttpResponse:
    """Store the slip, or show it again with everything that was typed."""
    slip = desk.posted()
    if desk.request.POST.get("action") == "paste":
        filled = pasted.fill(
            slip, desk.request.POST.get("pasted", ""), desk.display, desk.stay.unit.zone, timezone.now()
        )
        return _show(desk, slip, desk.check(slip), filled=filled)
    trial = desk.check(slip)
    refuse_other_person(desk, slip)
    if desk.replacing:
        need_reason(slip)
    if slip.blocking():
        return _show(desk, slip, trial, refused=True)
    faster = somebody_faster(desk.replacing, slip.key) if desk.replacing else None
    if faster:
        return _conflict(desk, slip, faster)
    if slip.unanswered():
        return _show(desk, slip, trial, refused=True)
    return _correct(desk, slip) if desk.replacing else _record(desk, slip)


def refuse_other_person(desk: Desk, slip: Slip) -> None:
    """A form begun by one person and sent by another is stored only when the other says so."""
    me = desk.user.get_username()
    if slip.begun_by not in {"", me} and not desk.request.POST.get("take_over"):
        words = f"This form was begun by {slip.begun_by[:40]}, but {me} is logged in. Nothing was recorded."
        slip.notices.append(Notice(Level.IMPOSSIBLE, "begun_by", "other_person", words))


def _record(desk: Desk, slip: Slip) -> HttpResponse:
    new = slip.new_entry()
    with transaction.atomic():
        entry, is_new = record.record(desk.stay, desk.user, new)
        if is_new or same(entry, desk, new):
            drafts.drop(desk.user, desk.stay, desk.form_name)
            _remember_units(desk.user, slip)
            return _done(desk, entry, "Recorded")
    return _key_used(desk)


def _key_used(desk: Desk) -> HttpResponse:
    """The form's number stands for something else already: shown again under a new one, nothing lost."""
    fresh = desk.posted()
    fresh.key = uuid.uuid4().hex
    trial = desk.check(fresh)
    words = "This form was already recorded with other values. Save again to record what is typed now as another entry."
    fresh.notices.append(Notice(Level.IMPOSSIBLE, "", "key_used", words))
    return _show(desk, fresh, trial, refused=True)


def same(entry: Entry, desk: Desk, new: record.NewEntry) -> bool:
    """Whether the stored entry with this key is what is sent again."""
    again = record.build(desk.stay, desk.user, new)
    names = ("stay_id", "device", "flow_method", "event", "event_amount", "sample", "note")
    alike = all(getattr(entry, name) == getattr(again, name) for name in names)
    return alike and record.described(entry) == record.described(again)


def _correct(desk: Desk, slip: Slip) -> HttpResponse:
    assert desk.replacing is not None  # noqa: S101 - the caller looked
    new = _with_event(desk.replacing, slip.new_entry())
    try:
        with transaction.atomic():
            entry = record.correct(desk.replacing, desk.user, new, slip.reason)
            drafts.drop(desk.user, desk.stay, desk.form_name)
    except record.AlreadyReplaced as told:
        if told.by is None or told.by.key != slip.key:
            return _conflict(desk, slip, told.by)
        entry = told.by  # this very form, sent twice at the same moment
    if entry.replaces_id != desk.replacing.pk:
        return _key_used(desk)
    if not same(entry, desk, new):  # the same form, sent from another tab with other values
        return _conflict(desk, slip, entry)
    return _done(desk, entry, "Corrected")


def _with_event(before: Entry, new: record.NewEntry) -> record.NewEntry:
    """An entry that marks an event too (as files may bring) keeps it through a correction of its values."""
    return replace(new, event=Event(before.event), event_amount=before.event_amount)


def _conflict(desk: Desk, slip: Slip, by: Entry | None) -> HttpResponse:
    """Somebody was faster: both versions, and the form goes on against the newer one."""
    assert desk.replacing is not None  # noqa: S101 - the caller looked
    theirs = newest(by or desk.replacing)
    mine = record.build(desk.stay, desk.user, slip.new_entry())
    replaced, rows = desk.replacing, conflict_rows(desk.display, desk.replacing, theirs, mine)
    drafts.drop(desk.user, desk.stay, desk.form_name)
    desk.replacing = None if theirs.struck else theirs
    fresh = desk.posted()
    fresh.key = uuid.uuid4().hex
    if not theirs.struck:
        before = entry_form.from_entry(replaced, desk.display, "", desk.stay.unit.zone)
        entry_form.take_over(fresh, before, entry_form.from_entry(theirs, desk.display, "", desk.stay.unit.zone))
        fresh.moment = moments.read(fresh.date, fresh.clock, fresh.fold, desk.stay.unit.zone, timezone.now())
    return _show(desk, fresh, desk.check(fresh), refused=True, conflict=theirs, conflict_rows=rows)


def _remember_units(user: User, slip: Slip) -> None:
    """The unit somebody typed a quantity in is the one the next form offers."""
    typed = {f.name: f.unit.ucum for f in slip.fields.values() if f.choices and f.text.strip()}
    known = user.preferences.get("entry_units", {})
    if {**known, **typed} != known:
        user.preferences = {**user.preferences, "entry_units": {**known, **typed}}
        user.save(update_fields=["preferences"])


def _done(desk: Desk, entry: Entry, verb: str) -> HttpResponse:
    at = entry.time.astimezone(desk.stay.unit.zone)
    messages.success(desk.request, f"{verb}: {SITE_WORDS[Site(entry.site)]}, {at:%Y-%m-%d %H:%M}.")
    target = patient_page(desk.stay)
    if desk.request.POST.get("action") == "save_next":
        target = reverse("entry_new", args=[desk.stay.unit.slug, desk.stay.reference])
        target += f"?date={at:%Y-%m-%d}&clock={at:%H:%M}"
    return go(desk.request, target)


def answered(request: HttpRequest, response: HttpResponse, refused: bool) -> HttpResponse:
    """Mark a form's answer for the script, which must tell it from a login page; a browser gets the status too."""
    response["X-Worksheet-Form"] = "refused" if refused else "shown"
    if refused and not request.headers.get("X-Worksheet-Form"):
        response.status_code = 422
    return response


def go(request: HttpRequest, target: str) -> HttpResponse:
    """Lead on: a redirect for the browser, a header for the form's script (which must tell it from a login page)."""
    if request.headers.get("X-Worksheet-Form"):
        return HttpResponse(status=204, headers={"X-Worksheet-Go": target})
    return redirect(target)
