"""The event form as data: transfusion, bleed, device change, bed move, or something else worth a mark in time."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime
from zoneinfo import ZoneInfo

from worksheet.oxygen.readings import Event
from worksheet.ward.display import Display
from worksheet.ward.models import Bed, Entry, Stay, Unit
from worksheet.ward.record import NewEntry

from . import checks, entry_form, numbers, texts
from .slip import Level, Notice, Slip
from .slip_words import AMOUNT_UNITS, KIND_WORDS

SETTINGS = ("fio2", "oxygen_flow", "peep", "mean_airway_pressure")
# Amounts: red-cell units by count, blood loss in mL. Limits: common practice.
AMOUNT = {
    Event.TRANSFUSION: (AMOUNT_UNITS[Event.TRANSFUSION], (0.25, 60.0), (0.5, 10.0)),
    Event.BLEED: (AMOUNT_UNITS[Event.BLEED], (1.0, 20_000.0), (20.0, 5_000.0)),
}


@dataclass
class EventForm:
    """What was typed on the event form; time, settings and note are read as on a slip."""

    slip: Slip
    kind: Event = Event.NONE
    amount_text: str = ""
    amount: float | None = None
    bed: Bed | None = None
    bed_text: str = ""
    beds: list[tuple[Bed, str]] = field(default_factory=list)  # bed, and who lies there

    @property
    def kind_code(self) -> int:
        """The kind's number, 0 while none is chosen."""
        return int(self.kind)

    def new_entry(self) -> NewEntry:
        """The event as an entry."""
        made = self.slip.new_entry()
        settings = self.kind is Event.DEVICE_CHANGE
        note = (
            f"to bed {self.bed.name}. {made.note}".strip(" .")
            if self.kind is Event.BED_MOVE and self.bed
            else made.note
        )
        return NewEntry(
            time=made.time,
            values=made.values if settings else {},
            typed=self._typed(dict(made.typed) if settings else {}),
            device=made.device if settings else made.device.__class__.UNKNOWN,
            event=self.kind,
            event_amount=self.amount if self.kind in AMOUNT else None,
            note=note,
            key=made.key,
        )

    def _typed(self, kept: dict[str, Mapping[str, str]]) -> dict[str, Mapping[str, str]]:
        if self.kind in AMOUNT and self.amount is not None:
            kept["event_amount"] = {"text": self.amount_text.strip(), "unit": AMOUNT[self.kind][0]}
        return kept

    def say(self, field_: str, code: str, words: str, level: Level = Level.IMPOSSIBLE, about: str = "") -> None:
        """Add a notice."""
        self.slip.notices.append(Notice(level, field_, code, words, about))


def beds_of_unit(unit: Unit, but: Stay | None = None) -> list[tuple[Bed, str]]:
    """Beds in the order of the round, each with the reference of who lies there now (``but`` not counted)."""
    present = Stay.objects.filter(unit=unit, bed__isnull=False).present()
    lying = {s.bed_id: s.reference for s in (present.exclude(pk=but.pk) if but else present)}
    return [(bed, lying.get(bed.pk, "")) for bed in unit.beds.all()]


def read(posted: Mapping[str, str], confirmed: list[str], stay: Stay, display: Display, now: datetime) -> EventForm:
    """Read the form as it was sent, or its draft."""
    posted = texts.posted(posted)
    slip = entry_form.from_post(posted, confirmed, display, stay.unit.zone, now)
    kind_text = posted.get("kind", "")
    kind = next((k for k in KIND_WORDS if str(int(k)) == kind_text), Event.NONE)
    form = EventForm(
        slip, kind, posted.get("amount", ""), bed_text=posted.get("bed", ""), beds=beds_of_unit(stay.unit, stay)
    )
    form.bed = next((bed for bed, _ in form.beds if str(bed.pk) == form.bed_text), None)
    form.amount = numbers.parse(form.amount_text).value
    return form


def blank(stay: Stay, display: Display, begun_by: str, zone: ZoneInfo, now: datetime) -> EventForm:
    """An empty form with the time of now."""
    slip = entry_form.blank(display, {}, begun_by, zone, now)
    slip.opened = f"{slip.date} {slip.clock}"
    return EventForm(slip, beds=beds_of_unit(stay.unit, stay))


def of_entry(entry: Entry, stay: Stay, display: Display, begun_by: str) -> EventForm:
    """A form filled with a recorded event."""
    slip = entry_form.from_entry(entry, display, begun_by, stay.unit.zone)
    form = EventForm(slip, Event(entry.event), beds=beds_of_unit(stay.unit, stay))
    if entry.event_amount is not None:
        form.amount, form.amount_text = entry.event_amount, f"{entry.event_amount:g}"
    return form


def check(form: EventForm, stay: Stay, display: Display, now: datetime, *, correcting: bool = False) -> None:
    """Add what stands against the event; a correction of a move leaves the patient in the bed."""
    slip = form.slip
    checks.check_time(slip, stay, now)
    checks.check_texts(slip, may_be_empty=True)
    if form.kind is Event.NONE:
        form.say("kind", "no_kind", "Choose what happened.")
    elif form.kind in AMOUNT:
        _amount(form)
    elif form.kind is Event.DEVICE_CHANGE:
        _settings(form, display)
    elif form.kind is Event.BED_MOVE and not correcting:
        _bed(form, stay)
    elif form.kind is Event.OTHER and not slip.note.strip():
        form.say("note", "no_note", "Say in the note what happened.")


def _amount(form: EventForm) -> None:
    unit, possible, usual = AMOUNT[form.kind]
    number = numbers.parse(form.amount_text)
    if number.empty and form.kind is Event.BLEED:
        return  # a loss is often seen before it is measured; haemoglobin is not carried across it either way
    if number.empty:
        form.say("amount", "no_amount", "How many units of red cells? Half a unit is 0.5.")
    elif number.value is None or number.comparator or number.unit.casefold() not in {"", unit.casefold(), "unit"}:
        form.say("amount", "not_a_number", f"Amount: {number.problem or 'write the number alone.'}")
    elif not possible[0] <= number.value <= possible[1]:
        words = (
            f"{form.amount_text.strip()} {unit} is impossible (possible: {possible[0]:g} to {possible[1]:g} {unit})."
        )
        form.say("amount", "impossible", words)
    elif not usual[0] <= number.value <= usual[1]:
        words = f"{form.amount_text.strip()} {unit} is unlikely (usual: {usual[0]:g} to {usual[1]:g} {unit})."
        form.say("amount", "unlikely", words, Level.UNLIKELY, form.amount_text.strip())


def _settings(form: EventForm, display: Display) -> None:
    for name in SETTINGS:
        checks.check_limits(form.slip.fields[name], display)
    checks.check_codes(form.slip)
    if form.slip.device in {"", "0"} and not form.slip.values:
        form.say("device", "no_device", "Choose the device, or type the setting that changed.")


def _bed(form: EventForm, stay: Stay) -> None:
    if form.bed is None:
        form.say("bed", "no_bed", "Choose the bed.")
        return
    there = next(reference for bed, reference in form.beds if bed == form.bed)
    if there:
        form.say("bed", "bed_taken", f"Bed {form.bed.name} is taken by {there}; move that patient first.")
    elif form.bed == stay.bed:
        form.say("bed", "same_bed", f"{stay.reference} is in bed {form.bed.name} already.")
