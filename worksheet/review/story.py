"""What a patient page says beside its charts: verdict, ledger, levers, what to measure next, the newest numbers."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from worksheet.oxygen.change import Z95
from worksheet.oxygen.ledger import window as window_ledger
from worksheet.oxygen.ledger_table import Ledger
from worksheet.oxygen.levers import Levers
from worksheet.oxygen.levers import levers as made_levers
from worksheet.oxygen.next_measurement import NextMeasurement, next_measurement
from worksheet.oxygen.quantities import CATALOGUE
from worksheet.oxygen.readings import Ints
from worksheet.oxygen.verdict import Evidence, Verdict
from worksheet.oxygen.verdict import verdict as made_verdict
from worksheet.ward.display import Display

from . import words
from .beds import BedRow
from .saturations import Reconciled, reconcile

NUMBERS = ("do2i", "do2", "cao2", "o2er", "vo2i", "pf_ratio", "aa_gradient", "shunt_fraction", "oxygenation_index",
           "rox_index", "p50", "extractable_o2", "co2_gap", "co2_o2_ratio")  # fmt: skip
_WORDS = {"lung": "PaO2, through saturation and dissolved oxygen", "haemoglobin": "its amount",
          "function": "COHb, MetHb, the shift of the curve", "flow": "cardiac output or index"}  # fmt: skip


@dataclass(frozen=True)
class LedgerLine:
    """One line of the change ledger."""

    step: str
    change: str
    share: str
    judged: str
    measured: str
    unloading: str = ""


@dataclass(frozen=True)
class Number:
    """One derived number of the newest gas."""

    name: str
    symbol: str
    label: str
    text: str
    unit: str


@dataclass(frozen=True)
class Lever:
    """What one step alone would have to be."""

    step: str
    needed: str
    small: str
    gain: str
    reachable: bool


@dataclass(frozen=True)
class Story:
    """One stay over the window, in words and tables."""

    row: BedRow

    @property
    def telling(self) -> words.Telling:
        """How the engine's sentences say numbers and times."""
        return words.Telling(self.row.display, self.row.window.until)

    @cached_property
    def verdict(self) -> Verdict | None:
        """The verdict of the window; None without an entry."""
        row, sheet = self.row, self.row.sheet
        if row.place < 0:
            return None
        return made_verdict(
            sheet.snapshots,
            sheet.derived,
            row.review,
            row.stay.pk,
            sheet.constants,
            sheet.settings,
            self.telling,
            sheet.findings,
        )

    @property
    def sentences(self) -> tuple[str, ...]:
        """The verdict in one or two sentences."""
        return self.verdict.sentences if self.verdict else ("No entries in reach of this window.",)

    @property
    def basis(self) -> tuple[str, ...]:
        """What it rests on: assumed, carried, not measured again."""
        return self.verdict.basis if self.verdict else ()

    @cached_property
    def ledger(self) -> tuple[LedgerLine, ...]:
        """Each step's part in the change, and the total."""
        if not self.row.level or self.verdict is None:
            return ()
        return (*(self._step_line(item) for item in self.verdict.evidence), self._total_line())

    @property
    def ledger_heading(self) -> str:
        """Symbol and unit of what is counted."""
        return self.row.display.heading(self.row.quantity)

    @cached_property
    def _unloading(self) -> Ledger | None:
        sheet, found, at = self.row.sheet, self.row.review.ledger, self.row.place
        ends = found.start_row[[at]], found.end_row[[at]]
        made = window_ledger(sheet.snapshots, sheet.derived, *ends, sheet.constants, sheet.settings, unloading=True)
        return made if made.level[0] == found.level[at] and np.isfinite(made.total[0]) else None

    @property
    def has_unloading(self) -> bool:
        """Whether the ledger of what can be unloaded is known too."""
        return bool(self.row.level) and self._unloading is not None

    def _unloaded(self, name: str) -> str:
        if self._unloading is None:
            return ""
        return self.row.display.value(self.row.quantity, float(getattr(self._unloading, name)[0]), signed=True)

    def _step_line(self, item: Evidence) -> LedgerLine:
        row, found, at = self.row, self.row.review.ledger, self.row.place
        known = math.isfinite(item.share)
        share = float(found.step(item.step)[at]) / float(found.start_supply[at])
        return LedgerLine(
            item.step,
            words.plus_minus(row.display, row.quantity, item.change, item.sd, signed=True) if known else "not known",
            words.percent(row.display, share) if known else "",
            _judged(item, row.display),
            item.words if known else _WORDS[item.step],
            self._unloaded(item.step) if known else "",
        )

    def _total_line(self) -> LedgerLine:
        row = self.row
        ends = f"{row.start_text} → {row.now_text}"
        judged = "beyond noise" if row.beyond_noise else "within noise"
        return LedgerLine("total", row.change_number, row.change_percent, judged, ends, self._unloaded("total"))

    @cached_property
    def levers(self) -> Levers | None:
        """What each step alone would have to be to bring supply back."""
        row, sheet = self.row, self.row.sheet
        if row.last < 0:
            return None
        start = int(row.review.ledger.start_row[row.place]) if row.level else None
        return made_levers(
            sheet.snapshots, sheet.derived, row.last, sheet.constants, start_row=start, speech=self.telling
        )

    @property
    def lever_lines(self) -> Iterator[Lever]:
        """The levers as table lines."""
        found, display = self.levers, self.row.display
        for one in found.levers if found else ():
            gain = display.value(found.name, one.gain, signed=True) if found else ""
            needed = "at the target already" if found and found.reached else one.words
            yield Lever(one.step, needed, one.small_step, gain, one.reachable)

    @property
    def lever_target(self) -> str:
        """The target in words."""
        found, display = self.levers, self.row.display
        if found is None:
            return ""
        now = display.value(found.name, found.now)
        target = display.value(found.name, found.target, with_unit=True)
        return f"{CATALOGUE[found.name].symbol} {target}, {found.why}; now {now}"

    @property
    def lever_unit(self) -> str:
        """Unit of what a small step returns."""
        return self.row.display.unit(self.levers.name).label if self.levers else ""

    @cached_property
    def next(self) -> NextMeasurement | None:
        """What to measure next for supply."""
        return self.row.next

    @cached_property
    def next_for_extraction(self) -> NextMeasurement | None:
        """What to measure next for extraction."""
        row, sheet = self.row, self.row.sheet
        if row.last < 0 or not np.isfinite(sheet.derived["o2er"][row.last]):
            return None
        return next_measurement(
            sheet.snapshots, sheet.derived, row.last, sheet.constants, sheet.settings, "o2er", row.display,
            row.ward.budget,
        )  # fmt: skip

    @cached_property
    def saturations(self) -> Reconciled | None:
        """The saturations of the newest arterial gas, reconciled."""
        return reconcile(self.row.sheet, self.row.rows, self.row.display)

    @property
    def numbers(self) -> Iterator[Number]:
        """What follows from the newest gas, each with its 95 % half width where it has one."""
        row, sheet = self.row, self.row.sheet
        for name in NUMBERS if row.last >= 0 else ():
            value = float(sheet.derived[name][row.last])
            if math.isfinite(value):
                sd = float(sheet.sds[name][row.last]) if name in sheet.sds else math.nan
                quantity = CATALOGUE[name]
                text = words.plus_minus(row.display, name, value, sd)
                yield Number(name, quantity.symbol, quantity.label, text, row.display.unit(name).label)

    @property
    def entry(self) -> int:
        """Id of the entry of the newest gas."""
        return int(self.row.sheet.entry_ids[self.row.last]) if self.row.last >= 0 else 0

    def span(self) -> tuple[float, float]:
        """From the gas that the comparison starts from, or the start of the window, to its end [h since the epoch]."""
        row = self.row
        start = row.window.since_hours
        if row.level:
            start = min(start, float(row.sheet.readings.time[int(row.review.ledger.start_row[row.place])]))
        return start, row.window.until_hours

    def rows_in_window(self) -> Ints:
        """The stay's rows of that span."""
        return self.row.rows[self.row.sheet.readings.time[self.row.rows] >= self.span()[0]]


def _judged(item: Evidence, display: Display) -> str:
    """What is concluded about a step, with the share that this was concluded from."""
    if not math.isfinite(item.share):
        return "not measured at both ends"
    said = "within noise"
    if item.real:
        said = "loss beyond noise" if item.material else "loss beyond noise, below 5 %"
    elif item.share > Z95 * item.sd_share > 0:
        said = "gain beyond noise"
    return f"{said} ({words.percent(display, item.share)} ± {display.number(100 * Z95 * item.sd_share, 0)})"
