"""The rows of the unit review: what changed in each bed over the window, worst real deterioration first."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from django.urls import reverse
from django.utils.safestring import SafeString

from worksheet.charts.bar import LedgerBar, ledger_bar
from worksheet.oxygen.change import Z95
from worksheet.oxygen.doubts import DOUBTS
from worksheet.oxygen.factors import RowFactors, row_factors
from worksheet.oxygen.judgement import MATERIAL, Review
from worksheet.oxygen.ledger_table import STEPS, Level
from worksheet.oxygen.next_measurement import NextMeasurement, next_measurement
from worksheet.oxygen.plausibility import Finding
from worksheet.oxygen.readings import Bools, Flag, Ints
from worksheet.oxygen.trend import LactateTrend, lactate_trend
from worksheet.oxygen.uncertainty import Budget, budget
from worksheet.ward.display import MISSING, Display, age_words
from worksheet.ward.models import Stay
from worksheet.ward.sheet import Sheet

from . import words
from .bar_svg import bar_svg
from .since_gas import since_gas
from .window import Window

STALE_HOURS = 6.0  # a gas older than this is called stale on the page; common practice
LACTATE_HOURS = 24.0  # how far the course of lactate looks back without two gases to compare; common practice
QUANTITY = {Level.CAO2: "cao2", Level.DO2: "do2", Level.DO2I: "do2i"}
_QUIET = {"spo2-above-97", "duplicate-sample"}  # true of most healthy rows: said on the patient page only
_SHOWN = 0.02  # a contribution below two percent of supply is not said


@dataclass(frozen=True)
class Ward:
    """What all beds of one page share."""

    sheet: Sheet
    window: Window
    display: Display
    review: Review

    @cached_property
    def budget(self) -> Budget:
        """What each number's uncertainty is made of."""
        return budget(self.sheet.snapshots, self.sheet.derived, self.sheet.constants, self.sheet.settings)

    @cached_property
    def factors(self) -> RowFactors:
        """What the numbers of each row are made of."""
        return row_factors(self.sheet.snapshots, self.sheet.derived)

    @cached_property
    def remarkable(self) -> Bools:
        """Rows with a finding."""
        return np.asarray(self.sheet.findings.worst() > 0)

    @cached_property
    def largest(self) -> float:
        """The sum of losses or of gains that fills half a bar: one scale for all beds."""
        parts = np.nan_to_num(np.stack(list(self.review.judgement.part.values())))
        sides = np.abs(np.minimum(parts, 0).sum(axis=0)), np.maximum(parts, 0).sum(axis=0)
        return max(0.15, *(float(side.max(initial=0.0)) for side in sides))

    def place(self, stay: Stay) -> int:
        """Row of the review, -1 for a stay without entries."""
        at = int(np.searchsorted(self.review.stay, stay.pk))
        return at if at < len(self.review.stay) and self.review.stay[at] == stay.pk else -1


@dataclass(frozen=True)
class BedRow:
    """One bed over the review window."""

    ward: Ward
    stay: Stay
    place: int

    @property
    def sheet(self) -> Sheet:
        """The sheet of the page."""
        return self.ward.sheet

    @property
    def display(self) -> Display:
        """How this reader sees numbers."""
        return self.ward.display

    @property
    def window(self) -> Window:
        """The review window."""
        return self.ward.window

    @property
    def review(self) -> Review:
        """The review of all stays of the page."""
        return self.ward.review

    @cached_property
    def key(self) -> str:
        """What ids in the page are made of."""
        return str(self.stay.pk)

    @property
    def url(self) -> str:
        """Address of the patient page, over the same window."""
        return f"{reverse('patient', args=[self.sheet.unit.slug, self.stay.reference])}?{self.window.query}"

    @cached_property
    def rows(self) -> Ints:
        """The stay's rows up to the end of the window, in time order."""
        own = self.sheet.rows(self.stay)
        return own[self.sheet.readings.time[own] <= self.window.until_hours]

    @cached_property
    def last(self) -> int:
        """Row of the newest arterial gas, -1 where there is none."""
        gases = self.rows[self.sheet.snapshots.arterial[self.rows]]
        return int(gases[-1]) if len(gases) else -1

    @cached_property
    def gas_age(self) -> float:
        """Age of the newest gas at the end of the window [h]."""
        if self.last < 0:
            return math.inf
        return self.window.until_hours - float(self.sheet.readings.time[self.last])

    @property
    def age_words(self) -> str:
        """That age in words."""
        return age_words(self.gas_age)

    @property
    def gas_clock(self) -> str:
        """When the newest gas was drawn; with the date where that was another day."""
        when = self.display.local(float(self.sheet.readings.time[self.last]))
        same = when.date() == self.display.local(self.window.until).date()
        return f"{when:%H:%M}" if same else f"{when:%d %b %H:%M}"

    @property
    def stale(self) -> bool:
        """Whether the newest gas is too old to tell of now."""
        return self.last >= 0 and self.gas_age > STALE_HOURS

    @property
    def level(self) -> int:
        """In what the change is counted."""
        return int(self.review.ledger.level[self.place]) if self.place >= 0 else Level.NONE

    @cached_property
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

    @cached_property
    def beyond_noise(self) -> bool:
        """Whether the 95 % interval of the change excludes none."""
        return bool(self.level) and abs(self.share) > self.share_half

    @property
    def fell(self) -> bool:
        """A fall beyond noise."""
        return self.beyond_noise and self.share < 0

    @property
    def worse(self) -> bool:
        """A fall beyond noise, or a step that failed while others made up for it."""
        return self.fell or self.step in STEPS

    @property
    def made_up(self) -> bool:
        """Whether a step failed and another really gained, so that supply did not fall; as the verdict judges it."""
        gains = (n for n in STEPS if self.part(n) >= MATERIAL and self._beyond(n))
        return self.step in STEPS and not self.fell and any(gains)

    @property
    def beside_step(self) -> str:
        """What became of supply where a step failed and supply did not fall."""
        if self.step not in STEPS or self.fell:
            return ""
        return "made up for" if self.made_up else "supply rose" if self.beyond_noise else "supply within noise"

    @cached_property
    def step(self) -> str:
        """The step that failed, ``none``, ``undetermined`` or empty."""
        return str(self.review.judgement.step[self.place]) if self.place >= 0 else ""

    @property
    def step_words(self) -> str:
        """The same in words."""
        if self.step == "undetermined":
            lost = [name for name, _ in self.moved if self.part(name) < 0]
            return f"{' or '.join(lost)}: cannot be told" if len(lost) > 1 else "cannot be told"
        return {"none": "none beyond noise", "": "nothing to compare"}.get(self.step, self.step)

    def _at_end(self) -> float:
        if self.level:
            return self._of_ledger("end_supply")
        return float(self.sheet.derived[self.quantity][self.last]) if self.last >= 0 else math.nan

    def _end_row(self) -> int:
        return int(self.review.ledger.end_row[self.place]) if self.level else self.last

    @cached_property
    def _now(self) -> tuple[str, str]:
        row, value = self._end_row(), self._at_end()
        sd = float(self.sheet.sds[self.quantity][row]) if row >= 0 else math.nan
        number, _, half = words.plus_minus(self.display, self.quantity, value, sd).partition(" ± ")
        return number, half

    @property
    def now_number(self) -> str:
        """Supply at the end of the window, without its unit."""
        return self._now[0]

    @property
    def now_half(self) -> str:
        """Half width of its 95 % interval."""
        return self._now[1]

    @property
    def now_text(self) -> str:
        """Supply at the end of the window."""
        return MISSING if self.now_number == MISSING else f"{self.now_number} {self.unit_label}"

    @property
    def unit_label(self) -> str:
        """Unit of supply."""
        return self.display.unit(self.quantity).label

    @property
    def symbol(self) -> str:
        """Symbol of supply."""
        return self.display.quantity(self.quantity).symbol

    @property
    def now_explained(self) -> int:
        """Id of the entry that the value at the end belongs to, 0 where there is none."""
        row = self._end_row()
        return int(self.sheet.entry_ids[row]) if row >= 0 and self.now_number != MISSING else 0

    @property
    def start_text(self) -> str:
        """Supply at the start of the window."""
        return self.display.value(self.quantity, self._of_ledger("start_supply"))

    @property
    def start_clock(self) -> str:
        """When the first gas of the comparison was drawn."""
        return self._clock(int(self.review.ledger.start_row[self.place]))

    @property
    def now_clock(self) -> str:
        """When the gas of the value was drawn, where that is not the newest gas; else empty."""
        row = self._end_row()
        return "" if row in (self.last, -1) else self._clock(row)

    def _clock(self, row: int) -> str:
        """A row's time of day, with the day where that is not the day on which the window ends."""
        when, until = (self.display.local(m) for m in (float(self.sheet.readings.time[row]), self.window.until))
        return f"{when:%H:%M}" if when.date() == until.date() else f"{when:%d %b %H:%M}"

    @property
    def change_number(self) -> str:
        """The change with the half width of its 95 % interval."""
        return words.plus_minus(
            self.display, self.quantity, self._of_ledger("total"), self._of_ledger("sd"), signed=True
        )

    @property
    def change_percent(self) -> str:
        """The change as a share of supply at the start."""
        if not self.level:
            return ""
        share = words.rounded(self.display, 100 * self.share, 0, signed=True)
        return f"{share} ± {self.display.number(100 * self.share_half, 0)} %"

    @property
    def change_text(self) -> str:
        """Change and share in one text."""
        return f"{self.change_number.partition(' ± ')[0]} ({self.change_percent})" if self.level else ""

    @property
    def change_words(self) -> str:
        """Whether that is more than noise."""
        if not self.level:
            return "no two gases to compare"
        if not self.beyond_noise:
            return "unchanged beyond noise"
        return "fell beyond noise" if self.share < 0 else "rose beyond noise"

    def part(self, step: str) -> float:
        """What a step did, of the supply at the start [1]."""
        return float(self.review.judgement.part[step][self.place]) if self.place >= 0 else math.nan

    def _beyond(self, step: str) -> bool:
        return abs(self.part(step)) > max(_SHOWN, Z95 * float(self.review.judgement.sd[step][self.place]))

    @cached_property
    def bar(self) -> LedgerBar:
        """The four steps as a small bar."""
        return ledger_bar({name: self.part(name) for name in STEPS}, self.ward.largest)

    @property
    def bar_svg(self) -> SafeString:
        """The bar as it stands in the page; the words beside it say the same."""
        return bar_svg(self.bar)

    @property
    def bar_words(self) -> str:
        """All four steps in words, for those who do not see the bar."""
        known = [(name, self.part(name)) for name in STEPS if math.isfinite(self.part(name))]
        said = ", ".join(f"{name} {words.percent(self.display, part)}" for name, part in known)
        return f"Contributions: {said}" if said else "No contributions known"

    @cached_property
    def moved(self) -> tuple[tuple[str, str], ...]:
        """Steps that moved beyond their own noise, largest first, with their share in words."""
        if not self.level:
            return ()
        moved = sorted((n for n in STEPS if self._beyond(n)), key=lambda n: -abs(self.part(n)))
        return tuple((name, words.percent(self.display, self.part(name))) for name in moved)

    @property
    def o2er_text(self) -> str:
        """Extraction at the newest gas, in its shown unit."""
        return self.o2er_number.partition(" ± ")[0]

    @cached_property
    def o2er_number(self) -> str:
        """The same with the half width of its 95 % interval."""
        if self.last < 0:
            return MISSING
        value, sd = (float(table["o2er"][self.last]) for table in (self.sheet.derived, self.sheet.sds))
        return words.plus_minus(self.display, "o2er", value, sd)

    @property
    def o2er_estimated(self) -> bool:
        """Whether it rests on central venous blood."""
        known = self.last >= 0 and self.o2er_number != MISSING
        return known and bool(self.sheet.derived.flags[self.last] & Flag.CENTRAL_VENOUS)

    @cached_property
    def lactate(self) -> LactateTrend:
        """The course of lactate between the gases compared, as the verdict sees it; without two, over the last 24 h."""
        table, found = self.sheet.readings, self.review.ledger
        time = table.time[self.rows]
        if self.level:
            ends = table.time[[int(found.start_row[self.place]), int(found.end_row[self.place])]]
            keep = self.rows[(time >= ends[0]) & (time <= ends[1])]
        else:
            keep = self.rows[time > self.window.until_hours - LACTATE_HOURS]
        return lactate_trend(table.time[keep], table["lactate"][keep], table.site[keep], self.sheet.settings)

    @property
    def lactate_number(self) -> str:
        """The newest lactate."""
        return self.display.value("lactate", self.lactate.last)

    @property
    def lactate_course(self) -> str:
        """Its half-time or doubling time, or what else can be said."""
        return words.lactate_course(self.lactate, self.display)

    @property
    def lactate_text(self) -> str:
        """Number and course."""
        return ", ".join(filter(None, (self.lactate_number, self.lactate_course)))

    @cached_property
    def findings(self) -> tuple[Finding, ...]:
        """Findings about the window, newest row first, each kind once; doubts about the gas compared with lead."""
        time, since, start = self.sheet.readings.time, self.window.since_hours, -1
        if self.level:  # the gas that the comparison starts from may be older than the window
            start = int(self.review.ledger.start_row[self.place])
            since = min(since, float(time[start]))
        recent = self.rows[time[self.rows] >= since][::-1]
        recent = recent[self.ward.remarkable[recent]]
        seen: dict[str, tuple[bool, bool, Finding]] = {}
        for row in recent.tolist():
            for finding in self.sheet.findings.of_row(row, self.show):
                if finding.code not in _QUIET and finding.code not in seen:
                    doubt = row == start and finding.code in DOUBTS
                    lead = f"The gas compared with ({self.start_clock}): " if doubt else ""
                    told = replace(finding, sentence=lead + finding.sentence)
                    seen[finding.code] = finding.severity == "note", not doubt, told
        return tuple(finding for *_, finding in sorted(seen.values(), key=lambda one: one[:2]))

    @cached_property
    def since_gas(self) -> str:
        """What happened after the newest gas that its numbers do not hold."""
        return since_gas(self.sheet, self.rows, self.last, self.display)

    def show(self, name: str, value: float) -> str:
        """A number inside the words of a finding."""
        return self.display.value(name, value, with_unit=True) if math.isfinite(value) else "not measured"

    @property
    def contradictory(self) -> bool:
        """Whether a finding asks or blocks."""
        return any(finding.severity != "note" for finding in self.findings)

    @cached_property
    def missing(self) -> tuple[str, ...]:
        """What the newest gas lacks for the whole answer, in words."""
        return missing_at(self.sheet, self.last)

    @cached_property
    def next(self) -> NextMeasurement | None:
        """The measurement that would narrow supply most."""
        row = self._end_row()
        if row < 0:
            return None
        sheet = self.sheet
        return next_measurement(
            sheet.snapshots, sheet.derived, row, sheet.constants, sheet.settings, speech=self.display,
            known=self.ward.budget, factors=self.ward.factors,
        )  # fmt: skip

    @property
    def next_words(self) -> str:
        """The same in a few words; what is missing altogether comes first."""
        if "haemoglobin" in self.missing:
            return "haemoglobin (none to carry)"
        if self.since_gas:
            return f"haemoglobin ({self.since_gas}, after the gas)"
        best = self.next.best if self.next else None
        if best is not None:
            return f"{best.label} ({best.reason})"
        return "flow (not measured)" if "flow" in self.missing else ""

    @property
    def reviewed_words(self) -> str:
        """When and by whom this stay was last looked at."""
        at, who = getattr(self.stay, "reviewed_at", None), getattr(self.stay, "reviewed_by", "")
        return f"{self.display.clock(at)} by {who}" if at else ""

    @property
    def rank(self) -> tuple[float, ...]:
        """Sort key: falls beyond noise by what they are at least; failed steps made up for; stale; contradictory."""
        surely = -self.share - self.share_half if self.fell else 0.0
        lost = -self.part(self.step) if self.step in STEPS else 0.0
        return (-surely, -lost, -float(self.stale or self.last < 0), -float(self.contradictory))


def missing_at(sheet: Sheet, row: int) -> tuple[str, ...]:
    """What a gas lacks for the whole answer, in words."""
    if row < 0:
        return ("arterial gas",)
    snap = sheet.snapshots

    def known(*names: str) -> bool:
        return any(np.isfinite(snap[name][row]) for name in names)

    wanted = (
        ("haemoglobin", known("hb")), ("flow", known("cardiac_output", "cardiac_index")),
        ("measured saturation", known("so2", "o2hb")), ("co-oximetry", known("cohb") and known("methb")),
        ("venous sample", snap.venous_row[row] >= 0), ("FiO2", known("fio2")), ("lactate", known("lactate")),
    )  # fmt: skip
    return tuple(words for words, there in wanted if not there)


def bed_rows(sheet: Sheet, window: Window, display: Display) -> list[BedRow]:
    """All beds of a sheet, worst real deterioration first."""
    ward = Ward(sheet, window, display, sheet.review(window.since_hours, window.until_hours))
    return sorted((BedRow(ward, stay, ward.place(stay)) for stay in sheet.stays), key=lambda row: row.rank)
