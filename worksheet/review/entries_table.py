"""The table of a patient's entries: own values, carried ones with their age, what was corrected on request."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from django.urls import reverse
from django.utils.safestring import SafeString, mark_safe

from worksheet.oxygen.readings import Event, Ints, Site
from worksheet.ward.display import MISSING, Display, age_words
from worksheet.ward.models import Stay
from worksheet.ward.models.entries import EntryQuerySet
from worksheet.ward.sheet import COLUMNS as COLUMNS_STORED
from worksheet.ward.sheet import Sheet

from .words import SITE_WORDS

COLUMNS = (
    "ph",
    "pco2",
    "po2",
    "hb",
    "so2",
    "cohb",
    "methb",
    "lactate",
    "spo2",
    "fio2",
    "cardiac_output",
    "temperature",
)
DERIVED = ("cao2", "do2i", "o2er", "pf_ratio")
EVENT_WORDS = {Event.TRANSFUSION: "transfusion", Event.BLEED: "bleed", Event.DEVICE_CHANGE: "device changed",
               Event.BED_MOVE: "bed move", Event.OTHER: "event"}  # fmt: skip
_AMOUNT = {Event.TRANSFUSION: "units of red cells", Event.BLEED: "mL"}
_ABOUT = ("event_amount", "note", "source", "recorded_by__username", "recorded_at",
          "replaces_id", "reason", "struck", "replaced_by__reason", "replaced_by__struck", "replaced_by__recorded_at",
          "replaced_by__recorded_by__username", "replaced_by__pk")  # fmt: skip
About = Mapping[str, Any]


@dataclass(frozen=True)
class Line:
    """One entry as a table row; ``status`` is empty for an entry that stands."""

    entry_id: str
    time: float
    stamp: str
    kind: str
    note: str
    cells: SafeString
    status: str = ""
    detail: str = ""


def about_entries(entries: EntryQuerySet) -> list[About]:
    """Everything recorded, standing or not: one query for values, notes, people and corrections."""
    return list(entries.order_by("stay_id", "time", "id").values(*COLUMNS_STORED, *_ABOUT))


def standing(about: Sequence[About]) -> list[tuple[Any, ...]]:
    """The rows that nobody corrected or struck out, as the sheet reads them."""
    return [
        tuple(one[name] for name in COLUMNS_STORED)
        for one in about
        if one["replaced_by__pk"] is None and not one["struck"]
    ]


def entry_lines(
    sheet: Sheet,
    stay: Stay,
    rows: Ints,
    display: Display,
    about: Sequence[About],
    history: bool,
    span: tuple[float, float],
) -> list[Line]:
    """Lines of the entries, newest first; corrected and struck ones among them where asked for."""
    known, (since, until) = {one["id"]: one for one in about}, span
    lines = [_line(sheet, stay, row, display, known.get(int(sheet.entry_ids[row]), {})) for row in rows.tolist()]
    if history:
        old = [one for one in about if one["struck"] or one["replaced_by__pk"]]
        lines += [_old_line(one, display) for one in old if since <= one["time"].timestamp() / 3600 <= until]
    return sorted(lines, key=lambda line: (line.time, int(line.entry_id)), reverse=True)


def _line(sheet: Sheet, stay: Stay, row: int, display: Display, about: About) -> Line:
    readings, entry_id = sheet.readings, int(sheet.entry_ids[row])
    carry = bool(sheet.snapshots.arterial[row])
    cells = [_cell(sheet, name, row, display, carry=carry) for name in COLUMNS]
    base = reverse("explain", args=[stay.unit.slug, stay.reference, entry_id, "x"]).removesuffix("x/")
    cells += [_derived_cell(sheet, base, name, row, display) for name in DERIVED]
    detail = f"corrects an earlier entry: {about['reason']}" if about.get("replaces_id") else ""
    return Line(
        str(entry_id), float(readings.time[row]), _stamp(display, float(readings.time[row])),
        _kind(int(readings.site[row]), int(readings.event[row]), about), str(about.get("note", "")),
        mark_safe("".join(cells)), detail=detail,  # noqa: S308  cells hold numbers that Display made
    )  # fmt: skip


def _stamp(display: Display, hours: float) -> str:
    return f"{display.local(hours):%d %b %H:%M}"


def _kind(site: int, event: int, about: About) -> str:
    if not event:
        return SITE_WORDS[Site(site)]
    amount, unit = about.get("event_amount"), _AMOUNT.get(Event(event), "")
    unit = unit.replace("units", "unit") if amount == 1 else unit
    return f"{EVENT_WORDS[Event(event)]}{f', {amount:g} {unit}' if amount else ''}"


def _cell(sheet: Sheet, name: str, row: int, display: Display, *, carry: bool) -> str:
    own = sheet.readings[name][row]
    if not np.isnan(own):
        return f'<td class="number">{display.value(name, float(own))}</td>'
    value, source = sheet.snapshots[name][row], int(sheet.snapshots.source[name][row])
    if not carry or np.isnan(value) or source < 0:
        return "<td></td>"
    age = float(sheet.snapshots.age[name][row])
    side = f"{age_words(age)} old" if age >= 0 else f"{age_words(age)} later"
    return f'<td class="number carried">{display.value(name, float(value))}<small>{side}</small></td>'


def _derived_cell(sheet: Sheet, base: str, name: str, row: int, display: Display) -> str:
    value = float(sheet.derived[name][row])
    if math.isnan(value):
        return "<td></td>"
    link = f'<a href="{base}{name}/" hx-get="{base}{name}/" hx-target="#explain-body">{display.value(name, value)}</a>'
    return f'<td class="number derived">{link}</td>'


def _old_line(about: About, display: Display) -> Line:
    cells = "".join(
        f'<td class="number">{"" if about[name] is None else display.value(name, about[name])}</td>' for name in COLUMNS
    )
    cells += "<td></td>" * len(DERIVED)
    return Line(
        str(about["id"]), about["time"].timestamp() / 3600, _stamp(display, about["time"].timestamp() / 3600),
        _kind(about["site"], about["event"], about), about["note"], mark_safe(cells),  # noqa: S308  numbers only
        "struck out" if about["struck"] or about["replaced_by__struck"] else "corrected", _said(about, display),
    )  # fmt: skip


def _said(about: About, display: Display) -> str:
    """Who replaced the entry, when and why."""
    by = "" if about["struck"] else "replaced_by__"
    when = display.stamp(about[f"{by}recorded_at"])
    return f"{when} by {about[f'{by}recorded_by__username']}: {about[f'{by}reason']}"


def headings(display: Display) -> Iterator[str]:
    """Symbols and units of the columns."""
    for name in (*COLUMNS, *DERIVED):
        yield display.heading(name)


__all__ = ["COLUMNS", "DERIVED", "MISSING", "about_entries", "entry_lines", "headings"]
