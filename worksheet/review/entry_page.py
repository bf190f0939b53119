"""What the entry form shows: the context of its templates, in the reader's units and words."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from django.urls import reverse

from worksheet.oxygen.quantities import CATALOGUE, MEASURED
from worksheet.oxygen.readings import Event
from worksheet.ward.display import Display, age_words
from worksheet.ward.models import Entry

from . import checks
from .people import patient_page
from .slip import Level, Notice, Slip, ValueField
from .slip_words import AMOUNT_UNITS, DEVICE_WORDS, GROUPS, KIND_WORDS, METHOD_WORDS, RARE, SITE_WORDS
from .trial import Trial

if TYPE_CHECKING:
    from .entry import Desk

OTHER_INPUTS = ("date", "clock", "fold", "site", "device", "flow_method", "sample", "note", "reason", "begun_by",
                "kind", "amount", "bed")  # fmt: skip
_NAMES = {"clock": "time", "fold": "time", "flow_method": "method of flow", "begun_by": "who recorded it"}
_FOCUS = {
    "date": "date",
    "clock": "clock",
    "fold": "fold-0",
    "site": "site-1",
    "begun_by": "take-over",
    "kind": "kind-1",
}


@dataclass(frozen=True)
class Said:
    """A notice as shown beside its input."""

    notice: Notice
    confirmed: bool

    @property
    def asks(self) -> bool:
        """Whether it has a check box."""
        return self.notice.level is Level.UNLIKELY

    @property
    def kind(self) -> str:
        """Its class in the style sheet."""
        return self.notice.level.name.lower()

    @property
    def where(self) -> str:
        """The input it is about, in a word or two."""
        name = self.notice.field
        return CATALOGUE[name].symbol if name in CATALOGUE else _NAMES.get(name, name or "the slip as a whole")

    @property
    def box_id(self) -> str:
        """Id of its check box."""
        return f"confirm-{self.notice.code}-{self.notice.field}"

    @property
    def target(self) -> str:
        """Id of what the summary leads to."""
        if self.asks:
            return self.box_id
        return _FOCUS.get(self.notice.field, self.notice.field or "clock")


@dataclass(frozen=True)
class Line:
    """One quantity of the form with what is said about it."""

    field: ValueField
    said: list[Said]


def page_parts(desk: Desk, slip: Slip, trial: Trial | None) -> dict[str, Any]:
    """The context of the entry form, and of its live part."""
    where = [desk.stay.unit.slug, desk.stay.reference]
    address = reverse("entry_correct", args=[*where, desk.replacing.pk]) if desk.replacing else ""
    parts = form_parts(desk, slip, desk.form_name, address or reverse("entry_new", args=where))
    by_name = {line.field.name: line for line in parts["lines"]}
    return parts | {
        "groups": [(key, title, [by_name[n] for n in group]) for key, title, group in GROUPS],
        "rare": [by_name[n] for n in RARE], "rare_open": any(slip.fields[n].text for n in RARE),
        "sites": SITE_WORDS.items(), "devices": DEVICE_WORDS.items(), "methods": METHOD_WORDS.items(),
        "estimate": None if slip.fields["fio2"].text.strip() else checks.estimate(slip),
        "live_url": reverse("entry_live", args=where),
        "left_out": [f.quantity.symbol for f in slip.fields.values() if f.blocked],
        **(_follows(trial, desk.display) if trial else {}),
    }  # fmt: skip


def form_parts(desk: Desk, slip: Slip, form_name: str, address: str) -> dict[str, Any]:
    """What every form of a stay shows: where it goes, who types, and what is said at each input."""
    return {
        "stay": desk.stay, "unit": desk.stay.unit, "slip": slip, "display": desk.display, "replacing": desk.replacing,
        "lines": [Line(f, _said(slip, f.notices)) for f in slip.fields.values()],
        "said": {name: _said(slip, _about(slip, name)) for name in OTHER_INPUTS},
        "said_slip": _said(slip, _about(slip, "")),
        "summary": _said(slip, [*slip.blocking(), *slip.unanswered()]),
        "form_name": form_name, "me": desk.user.get_username(), "page": patient_page(desk.stay), "form_url": address,
        "draft_url": reverse("draft_save", args=[desk.stay.unit.slug, desk.stay.reference]),
    }  # fmt: skip


def _about(slip: Slip, name: str) -> list[Notice]:
    return [n for n in slip.notices if n.field == name]


def _said(slip: Slip, notices: list[Notice]) -> list[Said]:
    return [Said(n, n.token in slip.confirmed) for n in notices]


def _follows(trial: Trial, display: Display) -> dict[str, Any]:
    derived = [(CATALOGUE[n].symbol, CATALOGUE[n].label, display.value(n, v), display.unit(n).label)
               for n, v in trial.derived().items()]  # fmt: skip
    carried = [(CATALOGUE[n].symbol, display.value(n, v, with_unit=True), age_words(age), age < 0)
               for n, v, age in trial.carried()]  # fmt: skip
    return {"derived": derived, "carried": carried, "missing": trial.missing()}


def facts(display: Display, entry: Entry) -> list[tuple[str, str]]:
    """Everything in an entry, label and text, in the order of a slip."""
    found = [("time", f"{entry.time.astimezone(entry.stay.unit.zone):%Y-%m-%d %H:%M}")]
    found += _event_facts(display, entry) if entry.event else [("site", _word(SITE_WORDS, entry.site))]
    found += [
        (CATALOGUE[n].symbol, display.value(n, getattr(entry, n), with_unit=True))
        for n in MEASURED
        if getattr(entry, n) is not None
    ]
    found += [("device", _word(DEVICE_WORDS, entry.device))] if entry.device else []
    found += [("method of flow", _word(METHOD_WORDS, entry.flow_method))] if entry.flow_method else []
    return found + [(n, getattr(entry, n)) for n in ("sample", "note") if getattr(entry, n)]


def _event_facts(display: Display, entry: Entry) -> list[tuple[str, str]]:
    found = [("event", _word(KIND_WORDS, entry.event))]
    if entry.event_amount is not None:
        amount = display.number(entry.event_amount, 0 if entry.event_amount.is_integer() else 2)
        found.append(("amount", f"{amount} {AMOUNT_UNITS.get(Event(entry.event), '')}".strip()))
    return found + ([("site", _word(SITE_WORDS, entry.site))] if entry.site else [])


def _word(words: Any, code: int) -> str:
    return next((text for key, text in words.items() if int(key) == code), str(code))


def conflict_rows(display: Display, before: Entry, theirs: Entry, mine: Entry) -> list[tuple[str, str, str, str]]:
    """Where the versions differ: label, before, theirs, mine."""
    versions = [dict(facts(display, entry)) for entry in (before, theirs, mine)]
    labels = list(dict.fromkeys(label for version in versions for label in version))
    rows = [(label, *(version.get(label, "–") for version in versions)) for label in labels]
    same = "not changed; theirs is in the form now" if not theirs.struck else "not changed"
    return [(a, b, c, same if d == b else d) for a, b, c, d in rows if len({b, c, d}) > 1]
