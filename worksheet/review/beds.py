"""The rows of the unit review: what changed in each bed over the window, worst real deterioration first."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from worksheet.charts.bar import LedgerBar, ledger_bar
from worksheet.oxygen.change import Z95
from worksheet.oxygen.judgement import STEPS, Review
from worksheet.oxygen.ledger import Level
from worksheet.oxygen.plausibility import Finding
from worksheet.oxygen.trend import LactateTrend, lactate_trend
from worksheet.ward.display import Display, age_words
from worksheet.ward.models import ReviewMark, Stay
from worksheet.ward.sheet import Sheet

from .window import Window

STALE_HOURS = 6.0  # a gas older than this is called stale on the page; common practice
QUANTITY = {Level.CAO2: "cao2", Level.DO2: "do2", Level.DO2I: "do2i"}
_QUIET = {"spo2-above-97", "duplicate-sample"}  # true of most healthy rows: said on the patient page only


@dataclass(frozen=True)
class BedRow:
    """One bed over the review window."""

    sheet: Sheet
    stay: Stay
    window: Window
    review: Review
    place: int  # row of the review, -1 without entries
    display: Display
    mark: ReviewMark | None
    largest: float

    @cached_property
    def rows(self) -> np.ndarray:
        """The stay's rows up to the end of the window, in time order."""
        own = self.sheet.rows(self.stay)
        return own[self.sheet.readings.time[own] <= self.window.until_hours]

    @cached_property
    def last(self) -> int:
        """Row of the newest arterial gas, -1 where there is none."""
        gases = self.rows[self.sheet.snapshots.arterial[self.rows]]
        return int(gases[-1]) if len(gases) else -1

    @property
    def gas_age(self) -> float:
        """Age of the newest gas [h]."""
        return math.inf if self.last < 0 else self.window.now.timestamp() / 3600 - self.sheet.readings.time[self.last]

    @property
    def age_words(self) -> str:
        """That age in words."""
        return age_words(self.gas_age)

    @property
    def stale(self) -> bool:
        """Whether the newest gas is too old to tell of now."""
        return self.last >= 0 and self.gas_age > STALE_HOURS

    @property
    def level(self) -> int:
        """In what the change is counted."""
        return int(self.review.ledger.level[self.place]) if self.place >= 0 else Level.NONE

    @property
    def quantity(self) -> str:
        """Name of that quantity, the best one known where there is no change to count."""
        if self.level:
            return QUANTITY[Level(self.level)]
        known = [n for n in ("do2i", "do2", "cao2") if self.last >= 0 and np.isfinite(self.sheet.derived[n][self.last])]
        return known[0] if known else "cao2"

    def _of_ledger(self, name: str) -> float:
        table = self.review.ledger
        column = table.sd["total"] if name == "sd" else getattr(table, name)
        return float(column[self.place]) if self.level else math.nan

    @property
    def share(self) -> float:
        """Change over supply at the start [1]."""
        return self._of_ledger("total") / self._of_ledger("start_supply")

    @property
    def share_half(self) -> float:
        """Half width of its 95 % interval [1]."""
        return Z95 * self._of_ledger("sd") / self._of_ledger("start_supply")

    @property
    def beyond_noise(self) -> bool:
        """Whether the 95 % interval of the change excludes none."""
        return bool(self.level) and abs(self.share) > self.share_half

    @property
    def worse(self) -> bool:
        """A fall beyond noise, or a step that failed."""
        return (self.beyond_noise and self.share < 0) or self.step in STEPS

    @property
    def step(self) -> str:
        """The step that failed, ``none``, ``undetermined`` or empty."""
        return str(self.review.judgement.step[self.place]) if self.place >= 0 else ""

    @property
    def now_text(self) -> str:
        """Supply at the end of the window."""
        return self.display.value(self.quantity, self._at_end(), with_unit=True)

    def _at_end(self) -> float:
        if self.level:
            return self._of_ledger("end_supply")
        return float(self.sheet.derived[self.quantity][self.last]) if self.last >= 0 else math.nan

    @property
    def now_half(self) -> str:
        """Half width of the 95 % interval of the value at the end."""
        if self.last < 0 or self.quantity not in self.sheet.sds:
            return ""
        half = Z95 * float(self.sheet.sds[self.quantity][self.last])
        return self.display.value(self.quantity, half) if math.isfinite(half) else ""

    @property
    def start_text(self) -> str:
        """Supply at the start of the window."""
        return self.display.value(self.quantity, self._of_ledger("start_supply"))

    @property
    def change_text(self) -> str:
        """The change with its share and interval."""
        if not self.level:
            return ""
        change = self.display.value(self.quantity, self._of_ledger("total"), signed=True)
        percent = self.display.number(100 * self.share, 0, signed=True)
        return f"{change} ({percent} % ± {self.display.number(100 * self.share_half, 0)})"

    @property
    def change_words(self) -> str:
        """Whether that is more than noise."""
        if not self.level:
            return "no two gases to compare"
        if not self.beyond_noise:
            return "unchanged beyond noise"
        return "fell beyond noise" if self.share < 0 else "rose beyond noise"

    @cached_property
    def bar(self) -> LedgerBar:
        """The four steps as a small bar."""
        parts = {name: float(self.review.judgement.part[name][self.place]) if self.place >= 0 else math.nan
                 for name in STEPS}  # fmt: skip
        return ledger_bar(parts, self.largest)

    @property
    def bar_words(self) -> str:
        """The same in words, for those who do not see it."""
        parts = [
            f"{name} {self.display.number(100 * float(self.review.judgement.part[name][self.place]), 0, signed=True)} %"
            for name in STEPS
            if self.place >= 0 and math.isfinite(float(self.review.judgement.part[name][self.place]))
        ]
        return "Contributions: " + ", ".join(parts) if parts else "No contributions known"

    @property
    def o2er_text(self) -> str:
        """Extraction at the newest gas."""
        return self.display.value("o2er", float(self.sheet.derived["o2er"][self.last])) if self.last >= 0 else "–"

    @cached_property
    def lactate(self) -> LactateTrend:
        """The course of lactate over the last 24 h of the window."""
        keep = self.rows[self.sheet.readings.time[self.rows] > self.window.until_hours - 24]
        table = self.sheet.readings
        return lactate_trend(table.time[keep], table["lactate"][keep], table.site[keep], self.sheet.settings)

    @property
    def lactate_text(self) -> str:
        """Last lactate, with its half-time or doubling time where it has one."""
        trend = self.lactate
        if not math.isfinite(trend.last):
            return "–"
        text = self.display.value("lactate", trend.last)
        if trend.kind not in ("rising", "falling"):
            return text
        verb = "doubling in" if trend.kind == "rising" else "halving in"
        low, time, high = (self.display.number(x, 0) for x in (trend.time_low, trend.time, trend.time_high))
        return f"{text}, {verb} {time} h ({low}–{high})"

    @cached_property
    def findings(self) -> tuple[Finding, ...]:
        """Findings about the rows of the window, newest row first, each kind once."""
        recent = self.rows[self.sheet.readings.time[self.rows] >= self.window.since_hours][::-1]
        seen: dict[str, Finding] = {}
        for row in recent.tolist():
            for finding in self.sheet.findings.of_row(row, lambda q, v: self.display.value(q, v, with_unit=True)):
                if finding.code not in _QUIET:
                    seen.setdefault(finding.code, finding)
        return tuple(seen.values())

    @property
    def contradictory(self) -> bool:
        """Whether a finding asks or blocks."""
        return any(finding.severity != "note" for finding in self.findings)

    @cached_property
    def missing(self) -> tuple[str, ...]:
        """What the newest gas lacks for the whole answer, in words."""
        if self.last < 0:
            return ("no arterial gas",)
        snap, row = self.sheet.snapshots, self.last
        gone = [words for name, words in (("hb", "haemoglobin"), ("lactate", "lactate"), ("fio2", "FiO2"))
                if not np.isfinite(snap[name][row])]  # fmt: skip
        if not (np.isfinite(snap["cardiac_output"][row]) or np.isfinite(snap["cardiac_index"][row])):
            gone.append("flow")
        if not np.isfinite(snap["cohb"][row] + snap["methb"][row]):
            gone.append("co-oximetry")
        return tuple(gone)

    @property
    def rank(self) -> tuple[float, ...]:
        """Sort key: real deterioration by size, then contradictory, stale, unchanged."""
        fall = -self.share if self.worse and math.isfinite(self.share) else 0.0
        return (-float(self.worse), -fall, -float(self.contradictory), -float(self.stale or self.last < 0))


def bed_rows(sheet: Sheet, window: Window, display: Display) -> list[BedRow]:
    """All beds of a sheet, worst real deterioration first."""
    found = sheet.review(window.since_hours, window.until_hours)
    place = {int(pk): i for i, pk in enumerate(found.stay)}
    marks: dict[int, ReviewMark] = {}
    for mark in ReviewMark.objects.filter(stay__in=[s.pk for s in sheet.stays]).select_related("user").order_by("at"):
        marks[mark.stay_id] = mark
    sides = [np.nansum(np.where(sign * np.stack(list(found.judgement.part.values())) > 0,
                                np.abs(np.stack(list(found.judgement.part.values()))), 0.0), axis=0)
             for sign in (-1, 1)] if len(found.stay) else [np.zeros(1)]  # fmt: skip
    largest = max(0.15, float(np.max(np.stack(sides)))) if len(found.stay) else 0.15
    rows = [BedRow(sheet, s, window, found, place.get(s.pk, -1), display, marks.get(s.pk), largest) for s in sheet.stays]
    return sorted(rows, key=lambda row: row.rank)
