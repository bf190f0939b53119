"""The table of a patient's entries: own values, carried ones with their age, what was corrected on request."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from worksheet.oxygen.readings import Event, Site
from worksheet.ward.display import Display, age_words
from worksheet.ward.models import Entry
from worksheet.ward.sheet import Sheet

COLUMNS = ("ph", "pco2", "po2", "hb", "so2", "cohb", "methb", "spo2", "fio2", "cardiac_output", "lactate")
DERIVED = ("cao2", "do2i", "o2er", "pf_ratio")


@dataclass(frozen=True)
class Cell:
    """One number; ``carried`` says from how long ago where it is not this entry's own."""

    text: str
    carried: str = ""
    name: str = ""


@dataclass(frozen=True)
class Line:
    """One entry as a table row."""

    entry_id: int
    time: float
    stamp: str
    kind: str
    cells: tuple[Cell, ...]
    status: str = ""
    detail: str = ""


def entry_lines(sheet: Sheet, rows: np.ndarray, display: Display, old: Sequence[Entry]) -> list[Line]:
    """Lines of the entries, newest first; corrected and struck ones among them where asked for."""
    lines = [_line(sheet, int(row), display) for row in rows]
    lines += [_old_line(entry, display) for entry in old]
    return sorted(lines, key=lambda line: (line.time, line.entry_id), reverse=True)


def _line(sheet: Sheet, row: int, display: Display) -> Line:
    readings = sheet.readings
    site, event = Site(int(readings.site[row])), Event(int(readings.event[row]))
    kind = event.name if event else (site.name if site else "READINGS")
    cells = tuple(_cell(sheet, name, row, display, carry=site == Site.ARTERIAL) for name in COLUMNS)
    derived = tuple(Cell(display.value(name, float(sheet.derived[name][row])), name=name) for name in DERIVED)
    return Line(
        int(sheet.entry_ids[row]), float(readings.time[row]), display.stamp(float(readings.time[row])),
        kind.lower().replace("_", " "), cells + derived,
    )  # fmt: skip


def _cell(sheet: Sheet, name: str, row: int, display: Display, *, carry: bool) -> Cell:
    own = float(sheet.readings[name][row])
    if np.isfinite(own) or not carry:
        return Cell(display.value(name, own))
    value, age = float(sheet.snapshots[name][row]), float(sheet.snapshots.age[name][row])
    if not np.isfinite(value):
        return Cell(display.value(name, value))
    return Cell(display.value(name, value), f"{age_words(age)} {'earlier' if age >= 0 else 'later'}")


def _old_line(entry: Entry, display: Display) -> Line:
    cells = tuple(Cell(display.value(name, getattr(entry, name))) for name in COLUMNS)
    newer = getattr(entry, "replaced_by", None)
    status = "struck out" if entry.struck or (newer and newer.struck) else "corrected"
    said = newer or entry
    detail = f"{status} {display.stamp(said.recorded_at)} by {said.recorded_by}: {said.reason}"
    kind = Site(entry.site).name.lower().replace("_", " ") if entry.site else "readings"
    return Line(entry.pk, entry.time.timestamp() / 3600, display.stamp(entry.time), kind,
                cells + tuple(Cell("–") for _ in DERIVED), status, detail)  # fmt: skip
