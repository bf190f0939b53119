"""A slip tried out in memory: appended to the stay's readings and derived by the very pass that every page uses."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from typing import Any

import numpy as np

from worksheet.oxygen.plausibility import Finding
from worksheet.oxygen.readings import Readings, Site
from worksheet.ward.display import Display
from worksheet.ward.models import Entry, Stay, User
from worksheet.ward.models.entries import EntryQuerySet
from worksheet.ward.record import NewEntry
from worksheet.ward.sheet import Sheet, derived_sheet, readings_of

REACH = timedelta(hours=96)  # older entries cannot reach a snapshot (the longest carry is 12 h); keeps typing fast
SHOWN = ("cao2", "cvo2", "do2i", "do2", "o2er", "pf_ratio", "sf_ratio", "aa_gradient", "so2_from_po2", "gap_measured",
         "gap_calculated", "p50", "rox_index")  # fmt: skip
CARRIED_SHOWN = ("hb", "fio2", "cardiac_output", "cardiac_index", "temperature", "spo2")


@dataclass(frozen=True)
class Trial:
    """The stay's sheet with the slip in it, and the slip's row."""

    sheet: Sheet
    row: int

    def derived(self) -> dict[str, float]:
        """What follows from the slip, in the order of :data:`SHOWN`, canonical units."""
        values = {name: float(self.sheet.derived[name][self.row]) for name in SHOWN}
        return {name: value for name, value in values.items() if np.isfinite(value)}

    def carried(self) -> list[tuple[str, float, float]]:
        """Quantity, value and age [h] of what was taken from another entry."""
        found = []
        for name in CARRIED_SHOWN:
            value, age = (float(table[name][self.row]) for table in (self.sheet.snapshots, self.sheet.snapshots.age))
            own = np.isfinite(self.sheet.readings[name][self.row])
            if np.isfinite(value) and np.isfinite(age) and not own:
                found.append((name, value, age))
        return found

    def findings(self, display: Display) -> tuple[Finding, ...]:
        """What is implausible about the slip beside everything known of the stay."""

        def show(name: str, value: float) -> str:
            return display.value(name, value, with_unit=True) if np.isfinite(value) else "not measured"

        return self.sheet.findings.of_row(self.row, show)

    def missing(self) -> list[str]:
        """What an arterial slip lacks, in words that say what it would add."""
        if self.sheet.readings.site[self.row] != Site.ARTERIAL:
            return []
        known = {name: np.isfinite(self.sheet.snapshots[name][self.row]) for name in (*CARRIED_SHOWN, "po2")}
        lacks = []
        if not known["hb"]:
            lacks.append("no haemoglobin: no oxygen content")
        if not (known["cardiac_output"] or known["cardiac_index"]):
            lacks.append("no cardiac output near this time: no DO2")
        if not known["fio2"]:
            lacks.append("no FiO2: no P/F, no A–a gradient")
        return lacks


def others(user: User, stay: Stay, key: str, replacing: Entry | None = None) -> EntryQuerySet:
    """The stay's current entries without the one that is corrected, and without this very form if it is sent again."""
    found = Entry.objects.visible_to(user).filter(stay=stay).current().exclude(key=key)
    return found.exclude(pk=replacing.pk) if replacing else found


def try_out(user: User, stay: Stay, new: NewEntry, replacing: Entry | None = None) -> Trial:
    """Derive the stay with the slip in it; nothing is stored."""
    near = others(user, stay, new.key, replacing).filter(time__gte=new.time - REACH, time__lte=new.time + REACH)
    before, ids = readings_of(near, [stay])
    readings = _joined(before, _one(stay, new))
    return Trial(derived_sheet(stay.unit, [stay], readings, np.append(ids, 0)), len(readings) - 1)


def _one(stay: Stay, new: NewEntry) -> Readings:
    facts = {name: getattr(stay, name) for name in ("height", "weight", "age") if getattr(stay, name) is not None}
    values: Mapping[str, Any] = {name: [value] for name, value in {**facts, **new.values}.items()}
    return Readings.build(
        [stay.pk], [hours(new.time)], [new.site], values, [new.device], [new.flow_method], [new.event]
    )


def _joined(one: Readings, other: Readings) -> Readings:
    def both(name: str) -> Any:
        return np.concatenate([getattr(one, name), getattr(other, name)])

    columns = {name: np.concatenate([one[name], other[name]]) for name in other.values}
    return Readings(
        both("stay"), both("time"), both("site"), both("device"), both("flow_method"), both("event"), columns
    )


def hours(moment: datetime) -> float:
    """A moment as hours since the epoch."""
    return moment.astimezone(UTC).timestamp() / 3600.0
