"""A slip: what was typed, what it means, and what stands against it. Everything typed is kept."""

from __future__ import annotations

from dataclasses import dataclass, field
from enum import IntEnum

from worksheet.oxygen.quantities import Quantity, UnitOfMeasure
from worksheet.oxygen.readings import Device, FlowMethod, Site
from worksheet.ward.record import NewEntry

from . import moments


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
