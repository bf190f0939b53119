"""The table of a patient's entries: own values, carried ones with their age, what was corrected on request."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

import numpy as np
from django.urls import reverse
from django.utils.html import format_html
from django.utils.safestring import SafeString, mark_safe

from worksheet.oxygen.quantities import MEASURED
from worksheet.oxygen.readings import Event, Ints, Site
from worksheet.ward.display import MISSING, Display, age_words
from worksheet.ward.models import Entry, Stay
from worksheet.ward.sheet import Sheet

from .window import Window
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
_ABOUT = ("pk", "time", "site", "event", "event_amount", "note", "source", "recorded_by__username", "recorded_at",
          "replaces_id", "reason", "struck", "replaced_by__reason", "replaced_by__struck", "replaced_by__recorded_at",
          "replaced_by__recorded_by__username", "replaced_by__pk")  # fmt: skip
About = Mapping[str, Any]


@dataclass(frozen=True)
class Line:
    """One entry as a table row; ``status`` is empty for an entry that stands."""

    entry_id: int
    time: float
    stamp: str
    kind: str
    note: str
    cells: SafeString
    status: str = ""
    detail: str = ""


def about_entries(stay: Stay, window: Window, since: float, *, history: bool) -> list[About]:
    """Everything recorded in the window, standing or not: one query for notes, people and corrections."""
    start = min(window.since, datetime.fromtimestamp(round(since * 3600, 3), UTC))
    own = Entry.objects.filter(stay=stay, time__gte=start, time__lte=window.until).order_by("-time", "-pk")
    return list(own.values(*_ABOUT, *(MEASURED if history else ())))


def entry_lines(
    sheet: Sheet, stay: Stay, rows: Ints, display: Display, about: Sequence[About], history: bool
) -> list[Line]:
    """Lines of the entries, newest first; corrected and struck ones among them where asked for."""
    known = {one["pk"]: one for one in about}
    lines = [_line(sheet, stay, row, display, known.get(int(sheet.entry_ids[row]), {})) for row in rows.tolist()]
    if history:
        lines += [_old_line(one, display) for one in about if one["struck"] or one["replaced_by__pk"]]
    return sorted(lines, key=lambda line: (line.time, line.entry_id), reverse=True)


def _line(sheet: Sheet, stay: Stay, row: int, display: Display, about: About) -> Line:
    readings, entry_id = sheet.readings, int(sheet.entry_ids[row])
    carry = bool(sheet.snapshots.arterial[row])
    cells = [_cell(sheet, name, row, display, carry=carry) for name in COLUMNS]
    cells += [_derived_cell(sheet, stay, name, row, entry_id, display) for name in DERIVED]
    detail = f"corrects an earlier entry: {about['reason']}" if about.get("replaces_id") else ""
    return Line(
        entry_id, float(readings.time[row]), _stamp(display, float(readings.time[row])),
        _kind(int(readings.site[row]), int(readings.event[row]), about), str(about.get("note", "")),
        mark_safe("".join(cells)), detail=detail,  # noqa: S308  cells hold numbers that Display made
    )  # fmt: skip


def _stamp(display: Display, hours: float) -> str:
    return f"{display.local(hours):%d %b %H:%M}"


def _kind(site: int, event: int, about: About) -> str:
    if not event:
        return SITE_WORDS[Site(site)]
    amount, unit = about.get("event_amount"), _AMOUNT.get(Event(event), "")
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


def _derived_cell(sheet: Sheet, stay: Stay, name: str, row: int, entry_id: int, display: Display) -> str:
    value = float(sheet.derived[name][row])
    if math.isnan(value):
        return "<td></td>"
    return f'<td class="number derived">{explain_link(stay, entry_id, name, display.value(name, value))}</td>'


def explain_link(stay: Stay, entry_id: int, name: str, text: str) -> str:
    """A number that opens to its explanation."""
    where = reverse("explain", args=[stay.unit.slug, stay.reference, entry_id, name])
    return format_html('<a href="{}" data-explain>{}</a>', where, text)


def _old_line(about: About, display: Display) -> Line:
    cells = "".join(
        f'<td class="number">{"" if about[name] is None else display.value(name, about[name])}</td>' for name in COLUMNS
    )
    cells += "<td></td>" * len(DERIVED)
    return Line(
        about["pk"], about["time"].timestamp() / 3600, _stamp(display, about["time"].timestamp() / 3600),
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


__all__ = ["COLUMNS", "DERIVED", "MISSING", "about_entries", "entry_lines", "explain_link", "headings"]
