"""A stay as data: who, which bed, since when, and the body size that the indices need."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime
from zoneinfo import ZoneInfo

from worksheet.oxygen.quantities import CATALOGUE
from worksheet.ward.display import Display
from worksheet.ward.models import Bed, Patient, Stay, Unit

from . import checks, entry_form, moments, texts
from .slip import Level, Notice, ValueField
from .slip_words import NOTE_LONGEST

SIZES = ("height", "weight", "age")
_REFERENCE = re.compile(r"[A-Za-z0-9][A-Za-z0-9._-]{0,63}", re.ASCII)
_RESERVED = frozenset({"new"})


@dataclass
class StayForm:
    """What was typed about a stay, what it means, and what stands against it."""

    fields: dict[str, ValueField]
    identifier: str = ""
    reference: str = ""
    bed_text: str = ""
    date: str = ""
    clock: str = ""
    end_date: str = ""
    end_clock: str = ""
    note: str = ""
    confirmed: frozenset[str] = frozenset()
    bed: Bed | None = None
    admitted: datetime | None = None
    discharged: datetime | None = None
    notices: list[Notice] = field(default_factory=list)

    def say(self, field_: str, code: str, words: str, level: Level = Level.IMPOSSIBLE, about: str = "") -> None:
        """Add a notice."""
        self.notices.append(Notice(level, field_, code, words, about))

    def all_notices(self) -> list[Notice]:
        """Every notice, in the order of the form."""
        return [*self.notices, *(n for f in self.fields.values() for n in f.notices)]

    def standing(self) -> list[Notice]:
        """What holds the form back: what is impossible, and what is asked and not yet confirmed."""
        return [
            n
            for n in self.all_notices()
            if n.level is Level.IMPOSSIBLE or (n.level is Level.UNLIKELY and n.token not in self.confirmed)
        ]


def blank(unit: Unit, display: Display, now: datetime) -> StayForm:
    """An empty form: admitted now, nothing else filled in."""
    local = now.astimezone(unit.zone)
    return StayForm(_fields({}, display), date=f"{local:%Y-%m-%d}", clock=f"{local:%H:%M}{moments.letter(local)}")


def of_stay(stay: Stay, display: Display) -> StayForm:
    """A form filled with what is known."""
    texts = {n: f"{display.shown(n, getattr(stay, n)):.6g}" for n in SIZES if getattr(stay, n) is not None}
    form = StayForm(_fields(texts, display), stay.patient.identifier, stay.reference, note=stay.note, bed=stay.bed)
    for moment, names in ((stay.admitted_at, ("date", "clock")), (stay.discharged_at, ("end_date", "end_clock"))):
        if moment:
            local = moment.astimezone(stay.unit.zone)
            setattr(form, names[0], f"{local:%Y-%m-%d}")
            setattr(form, names[1], f"{local:%H:%M}{moments.letter(local)}")
    return form


def from_post(posted: Mapping[str, str], confirmed: list[str], display: Display) -> StayForm:
    """Read the form as it was sent; every text is kept."""
    posted = texts.posted(posted)
    form = StayForm(_fields(posted, display))
    for part in ("identifier", "reference", "date", "clock", "end_date", "end_clock", "note"):
        setattr(form, part, posted.get(part, "").strip())
    form.bed_text, form.confirmed = posted.get("bed", ""), frozenset(confirmed)
    form.reference = form.reference or form.identifier
    return form


def _fields(posted: Mapping[str, str], display: Display) -> dict[str, ValueField]:
    return {name: entry_form.read_value(name, posted, display) for name in SIZES if name in CATALOGUE}


def check(form: StayForm, unit: Unit, display: Display, now: datetime, stay: Stay | None = None) -> None:
    """Add what stands against the form; ``stay`` is the one being changed."""
    for each in form.fields.values():
        checks.check_limits(each, display)
    if len(form.note) > NOTE_LONGEST:
        form.say("note", "too_long", f"The note has {len(form.note)} characters; at most {NOTE_LONGEST}.")
    form.admitted = _moment(form, "date", "clock", unit.zone, now)
    if stay is None:
        _names(form, unit)
        _bed(form, unit)
    elif form.end_date or form.end_clock:
        form.discharged = _moment(form, "end_date", "end_clock", unit.zone, now)
        if form.admitted and form.discharged and form.discharged < form.admitted:
            form.say("end_clock", "end_before_start", "The end of the stay is before the admission.")
    elif stay.discharged_at and stay.bed and _lying(unit, stay.bed, stay):
        form.say("end_clock", "bed_taken", f"Bed {stay.bed.name} is taken by {_lying(unit, stay.bed, stay)}; "
                 "the stay cannot be opened again in it.")  # fmt: skip


def _moment(form: StayForm, date_field: str, clock_field: str, zone: ZoneInfo, now: datetime) -> datetime | None:
    found = moments.read(getattr(form, date_field), getattr(form, clock_field), "", zone, now)
    if found.at is None:
        form.say(date_field if found.field == "date" else clock_field, "time", found.problem)
    return found.at


def _names(form: StayForm, unit: Unit) -> None:
    if not form.identifier or len(form.identifier) > 64:
        form.say("identifier", "identifier", "Type the patient's identifier (at most 64 characters).")
    elif not _REFERENCE.fullmatch(form.reference) or form.reference in _RESERVED:
        form.say(
            "reference",
            "reference",
            f"'{form.reference[:40]}' cannot be a reference; use letters, digits, points, - and _.",
        )
    elif (there := _present(form.identifier, unit)) is not None:
        form.say(
            "identifier",
            "present",
            f"{form.identifier} is here already{f', in bed {there.bed.name}' if there.bed else ''}.",
        )
    elif Stay.objects.filter(unit=unit, reference=form.reference).exists():
        words = f"An earlier stay is called {form.reference}; call this one {_next(form.reference, unit)}, for example."
        form.say("reference", "reference_used", words)


def _present(identifier: str, unit: Unit) -> Stay | None:
    stays = Stay.objects.filter(unit=unit, patient__identifier=identifier).present()
    return stays.select_related("bed").first()


def _next(reference: str, unit: Unit) -> str:
    used = set(Stay.objects.filter(unit=unit, reference__startswith=reference).values_list("reference", flat=True))
    return next(name for n in range(2, len(used) + 3) if (name := f"{reference}-{n}") not in used)


def _bed(form: StayForm, unit: Unit) -> None:
    form.bed = next((bed for bed in unit.beds.all() if str(bed.pk) == form.bed_text), None)
    if form.bed_text and form.bed is None:
        form.say("bed", "no_bed", "Choose a bed of this unit, or none.")
    elif form.bed and (there := _lying(unit, form.bed)):
        form.say("bed", "bed_taken", f"Bed {form.bed.name} is taken by {there}.")


def _lying(unit: Unit, bed: Bed, but: Stay | None = None) -> str:
    """Reference of who lies in the bed now."""
    stays = Stay.objects.filter(unit=unit, bed=bed).present()
    found = (stays.exclude(pk=but.pk) if but else stays).first()
    return found.reference if found else ""


def patient_of(form: StayForm) -> Patient:
    """The patient with this identifier, known from an earlier stay or new."""
    return Patient.objects.filter(identifier=form.identifier).order_by("system").first() or Patient.objects.create(
        identifier=form.identifier
    )
