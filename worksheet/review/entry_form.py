"""The entry form as data: what was typed, what it means, and what stands against it. Everything typed is kept."""

from __future__ import annotations

import uuid
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from datetime import datetime
from enum import IntEnum
from zoneinfo import ZoneInfo

from worksheet.oxygen.quantities import CATALOGUE, MEASURED, Quantity, UnitOfMeasure
from worksheet.oxygen.readings import Device, FlowMethod, Site
from worksheet.ward.display import Display
from worksheet.ward.models import Entry
from worksheet.ward.record import NewEntry

from . import moments, numbers, texts

GAS = ("ph", "pco2", "po2", "hb", "so2", "o2hb", "cohb", "methb", "lactate", "bicarbonate")
GROUPS: tuple[tuple[str, str, tuple[str, ...]], ...] = (  # in the order in which a gas slip is read out
    ("slip", "Gas slip", GAS),
    ("breathing", "Breathing", ("spo2", "fio2", "oxygen_flow", "peep", "mean_airway_pressure", "respiratory_rate")),
    ("flow", "Flow", ("cardiac_output", "cardiac_index", "vo2_measured")),
    ("body", "Circulation and temperature", ("temperature", "mean_arterial_pressure", "heart_rate")),
)
_LISTED = {name for _, _, names in GROUPS for name in names}
RARE: tuple[str, ...] = tuple(name for name in MEASURED if name not in _LISTED and name != "age")
SAMPLE_ONLY = frozenset({*GAS, "so2_calculated", "sulfhb"})  # what only a blood sample can give
NOTE_LONGEST = 2000

SITE_WORDS = {
    Site.ARTERIAL: "arterial",
    Site.MIXED_VENOUS: "mixed venous (pulmonary artery)",
    Site.CENTRAL_VENOUS: "central venous",
    Site.VENOUS: "peripheral venous",
    Site.NONE: "no sample, bedside readings only",
}
DEVICE_WORDS = {
    Device.UNKNOWN: "not said",
    Device.ROOM_AIR: "room air",
    Device.NASAL_CANNULA: "nasal cannula",
    Device.SIMPLE_MASK: "simple mask",
    Device.RESERVOIR_MASK: "mask with reservoir",
    Device.HIGH_FLOW: "high-flow nasal oxygen",
    Device.NONINVASIVE: "non-invasive ventilation or CPAP",
    Device.VENTILATOR: "ventilator",
}
METHOD_WORDS = {
    FlowMethod.UNKNOWN: "not said",
    FlowMethod.THERMODILUTION: "thermodilution",
    FlowMethod.PULSE_CONTOUR: "pulse contour",
    FlowMethod.ULTRASOUND: "ultrasound",
    FlowMethod.FICK: "Fick",
    FlowMethod.OTHER: "other",
}


class Level(IntEnum):
    """How a notice acts: it blocks, it is asked once, or it informs."""

    NOTE = 1
    UNLIKELY = 2
    IMPOSSIBLE = 3


@dataclass(frozen=True)
class Notice:
    """Something to say about what was typed, at a field (or the whole slip, with an empty field)."""

    level: Level
    field: str
    code: str
    words: str
    about: str = ""  # what the words rest on: a confirmation holds only while this stays the same

    @property
    def token(self) -> str:
        """What the check box sends: the confirmation lapses when the value changes."""
        return f"{self.code}:{self.field}:{self.about}"

    @property
    def word(self) -> str:
        """The level as a word, so that colour is never alone."""
        return {Level.IMPOSSIBLE: "Not possible", Level.UNLIKELY: "Check", Level.NOTE: "Note"}[self.level]


@dataclass
class ValueField:
    """One quantity of the form: the text, the unit beside it and what they mean."""

    quantity: Quantity
    unit: UnitOfMeasure
    text: str = ""
    value: float | None = None  # canonical
    comparator: str = ""
    estimated: str = ""  # what an estimate rests on
    notices: list[Notice] = field(default_factory=list)

    @property
    def name(self) -> str:
        """Name of the input, and of the column."""
        return self.quantity.name

    @property
    def label(self) -> str:
        """The plain name, where it says more than the symbol."""
        same = self.quantity.label.casefold() == self.quantity.symbol.casefold()
        return "" if same else self.quantity.label

    @property
    def choices(self) -> tuple[UnitOfMeasure, ...]:
        """Units to choose from, where there is a choice."""
        return self.quantity.units if len(self.quantity.units) > 1 else ()

    @property
    def blocked(self) -> bool:
        """Whether the field itself holds the form back."""
        return any(n.level is Level.IMPOSSIBLE for n in self.notices)

    def typed(self) -> dict[str, str]:
        """What was typed, to be kept beside the value."""
        kept = {"text": self.text.strip(), "unit": self.unit.ucum}
        more = {"comparator": self.comparator, "estimated": self.estimated}
        return kept | {key: text for key, text in more.items() if text}


@dataclass
class Slip:
    """Everything on the form, as texts and as what they mean."""

    fields: dict[str, ValueField]
    date: str = ""
    clock: str = ""
    fold: str = ""
    site: str = ""
    device: str = "0"
    flow_method: str = "0"
    sample: str = ""
    note: str = ""
    reason: str = ""
    key: str = ""
    begun_by: str = ""
    opened: str = ""  # the time that the form filled in by itself
    use_estimate: bool = False
    confirmed: frozenset[str] = frozenset()
    moment: moments.Moment = field(default_factory=moments.Moment)
    notices: list[Notice] = field(default_factory=list)  # about the slip as a whole, or its other inputs

    def all_notices(self) -> list[Notice]:
        """Every notice once, in the order of the form, the gravest first."""
        found = [*self.notices, *(n for f in self.fields.values() for n in f.notices)]
        return sorted(found, key=lambda n: -n.level)

    def blocking(self) -> list[Notice]:
        """What must be mended before saving."""
        return [n for n in self.all_notices() if n.level is Level.IMPOSSIBLE]

    def unanswered(self) -> list[Notice]:
        """What is asked and not yet confirmed."""
        return [n for n in self.all_notices() if n.level is Level.UNLIKELY and n.token not in self.confirmed]

    @property
    def values(self) -> dict[str, float]:
        """Canonical values that can be used, impossible ones left out."""
        return {f.name: f.value for f in self.fields.values() if f.value is not None and not f.blocked}

    @property
    def empty(self) -> bool:
        """Nothing measured was typed."""
        return not any(f.text.strip() for f in self.fields.values())

    def code(self, kind: type[IntEnum], text: str) -> int:
        """A code of a list, 0 where the text is none of it (a notice says so)."""
        return int(text) if text.isdigit() and int(text) in {c.value for c in kind} else 0

    def _checked(self, field_: ValueField) -> dict[str, str]:
        """The mark that somebody was asked about the value and said it is right."""
        asked = any(n.level is Level.UNLIKELY and n.token in self.confirmed for n in field_.notices)
        return {"checked": "yes"} if asked else {}

    def new_entry(self) -> NewEntry:
        """The slip as an entry to store; only for a slip without blocking notices."""
        if self.moment.at is None:
            raise ValueError("a slip without a time cannot be stored")
        return NewEntry(
            time=self.moment.at,
            site=Site(self.code(Site, self.site)),
            values=self.values,
            typed={f.name: f.typed() | self._checked(f) for f in self.fields.values() if f.value is not None},
            device=Device(self.code(Device, self.device)),
            flow_method=FlowMethod(self.code(FlowMethod, self.flow_method)),
            sample=self.sample.strip(),
            note=self.note.strip(),
            key=self.key,
        )


def names() -> Iterator[str]:
    """Every quantity of the form, in its order."""
    for _, _, group in GROUPS:
        yield from group
    yield from RARE


def typing_unit(name: str, display: Display, entry_units: Mapping[str, str]) -> UnitOfMeasure:
    """The unit a field starts with: the one this person typed it in last, else the one it is shown in."""
    quantity = CATALOGUE[name]
    wanted = entry_units.get(name)
    return next((u for u in quantity.units if u.ucum == wanted), display.unit(name))


def blank(display: Display, entry_units: Mapping[str, str], begun_by: str, zone: ZoneInfo, now: datetime) -> Slip:
    """An empty slip: the time is now on the unit's clock, nothing else is filled in."""
    local = now.astimezone(zone)
    fields = {n: ValueField(CATALOGUE[n], typing_unit(n, display, entry_units)) for n in names()}
    twice = local.replace(fold=0).utcoffset() != local.replace(fold=1).utcoffset()
    fold = str(local.fold) if twice else ""
    return Slip(fields, f"{local:%Y-%m-%d}", f"{local:%H:%M}", fold=fold, key=uuid.uuid4().hex, begun_by=begun_by)


def from_post(posted: Mapping[str, str], confirmed: list[str], display: Display, zone: ZoneInfo, now: datetime) -> Slip:
    """Read a form that was sent (or a draft): parse every text, keep every text."""
    posted = texts.posted(posted)
    fields = {name: read_value(name, posted, display) for name in names()}
    slip = Slip(
        fields,
        date=posted.get("date", ""),
        clock=posted.get("clock", ""),
        fold=posted.get("fold", ""),
        site=posted.get("site", ""),
        sample=posted.get("sample", ""),
        reason=posted.get("reason", ""),
        begun_by=posted.get("begun_by", ""),
        opened=posted.get("opened", ""),
        device=posted.get("device", "0"),
        flow_method=posted.get("flow_method", "0"),
        note=posted.get("note", ""),
        key=posted.get("key", "")[:80] or uuid.uuid4().hex,
        use_estimate=bool(posted.get("use_estimate")),
        confirmed=frozenset(texts.plain(token) for token in confirmed),
    )
    slip.moment = moments.read(slip.date, slip.clock, slip.fold, zone, now)
    return slip


def from_entry(entry: Entry, display: Display, begun_by: str, zone: ZoneInfo) -> Slip:
    """A slip filled with a stored entry, in the texts and units in which it was typed."""
    local = entry.time.astimezone(zone)
    twice = local.replace(fold=0).utcoffset() != local.replace(fold=1).utcoffset()
    return Slip(
        {name: _stored_field(name, entry, display) for name in names()},
        f"{local:%Y-%m-%d}",
        f"{local:%H:%M}" if not local.second else f"{local:%H:%M:%S}",
        fold=str(local.fold) if twice else "",
        site=str(entry.site),
        device=str(entry.device),
        flow_method=str(entry.flow_method),
        sample=entry.sample,
        note=entry.note,
        key=uuid.uuid4().hex,
        begun_by=begun_by,
        use_estimate=any(isinstance(kept, dict) and kept.get("estimated") for kept in entry.typed.values()),
    )


def take_over(mine: Slip, before: Slip, theirs: Slip) -> None:
    """Where I changed nothing, a colleague's correction comes into my form; what I typed stays."""
    for part in ("site", "device", "flow_method", "sample", "note"):
        if getattr(mine, part) == getattr(before, part):
            setattr(mine, part, getattr(theirs, part))
    if (mine.date, mine.clock) == (before.date, before.clock):
        mine.date, mine.clock, mine.fold = theirs.date, theirs.clock, theirs.fold
    for name, field_ in mine.fields.items():
        old, new = before.fields[name].value, theirs.fields[name].value
        if old != new and not field_.notices and _alike(field_.value, old):
            mine.fields[name] = theirs.fields[name]


def _alike(one: float | None, other: float | None) -> bool:
    return one == other or (one is not None and other is not None and abs(one - other) < 1e-9)


def read_value(name: str, posted: Mapping[str, str], display: Display) -> ValueField:
    """One quantity as typed: its text and the unit chosen beside it."""
    quantity = CATALOGUE[name]
    chosen = posted.get(f"{name}_unit", "")
    unit = next((u for u in quantity.units if u.ucum == chosen), display.unit(name) if not chosen else quantity.unit)
    result = ValueField(quantity, unit, posted.get(name, ""))
    number = numbers.read(result.text, quantity, unit, display.decimal_comma)
    if number.problem:
        result.notices.append(Notice(Level.IMPOSSIBLE, name, "not_a_number", f"{quantity.symbol}: {number.problem}"))
    elif number.value is not None:
        result.value, result.comparator = float(unit.to_canonical(number.value)), number.comparator
        _read_as_fraction(result, number.value)
    return result


def _read_as_fraction(field_: ValueField, typed: float) -> None:
    """FiO2 is written as a fraction or in percent; what cannot be the one is read as the other, and said."""
    if field_.name != "fio2":
        return
    percent = field_.unit.ucum == "%"
    if (percent and 0 < typed <= 1) or (not percent and typed > 1):
        field_.value = typed if percent else typed / 100
        kind = "a fraction" if percent else "percent"
        words = f"FiO2 {field_.text.strip()} is read as {kind}: {100 * field_.value:g} %."
        field_.notices.append(Notice(Level.NOTE, "fio2", "fio2_reading", words))


def _stored_field(name: str, entry: Entry, display: Display) -> ValueField:
    quantity, value = CATALOGUE[name], getattr(entry, name)
    kept = entry.typed.get(name, {}) if isinstance(entry.typed, dict) else {}
    unit = quantity.unit_named(kept.get("unit", "")) if kept.get("unit") else None
    result = ValueField(quantity, unit or display.unit(name))
    if value is None or kept.get("estimated"):  # an estimate is offered again, never shown as if it was measured
        return result
    text = kept.get("text", "") if unit else ""
    number = numbers.parse(text)
    same = number.value is not None and abs(float(result.unit.to_canonical(number.value)) - value) < 1e-9
    result.text = text if same else _plain(value, result.unit, kept.get("comparator", ""))
    result.value = value
    return result


def _plain(value: float, unit: UnitOfMeasure, comparator: str) -> str:
    return f"{comparator}{float(f'{float(unit.from_canonical(value)):.6g}'):g}"
