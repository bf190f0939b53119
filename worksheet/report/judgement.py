"""Verdict, ledger and findings of a timeline, in words."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np

from worksheet.charts.points import Z95
from worksheet.charts.scales import hours
from worksheet.charts.steps import RESIDUAL
from worksheet.oxygen import verdict
from worksheet.oxygen.finding_kinds import Severity
from worksheet.oxygen.ledger_table import STEPS, Level
from worksheet.oxygen.plausibility import Finding
from worksheet.oxygen.readings import Floats
from worksheet.ward.display import MISSING, Display

from .order import Order

_SUPPLY = {Level.DO2I: "do2i", Level.DO2: "do2", Level.CAO2: "cao2"}


@dataclass(frozen=True)
class Telling:
    """How this document says numbers and times: like its reader's pages, but with the day, or hours from admission."""

    order: Order

    def value(self, name: str, canonical: float | None, signed: bool = False, with_unit: bool = False) -> str:
        """A value in the reader's unit."""
        return self.order.display.value(name, canonical, signed, with_unit)

    def number(self, value: float, decimals: int, signed: bool = False) -> str:
        """A number with the reader's decimal sign."""
        return self.order.display.number(value, decimals, signed)

    def clock(self, moment: float) -> str:
        """A moment as the document's axes tell it."""
        return self.order.scale.brief(moment)


@dataclass(frozen=True)
class Judged:
    """What is concluded about the span of an order."""

    order: Order

    @cached_property
    def review(self) -> verdict.Review:
        """The stay over the span."""
        since = hours(self.order.since) if self.order.since else -np.inf
        return self.order.sheet.review(since, hours(self.order.end))

    @cached_property
    def verdict(self) -> verdict.Verdict | None:
        """The verdict; None without a single entry."""
        sheet, pk = self.order.sheet, self.order.stay.pk
        if pk not in self.review.stay:
            return None
        telling = Telling(self.order)
        return verdict.verdict(
            sheet.snapshots, sheet.derived, self.review, pk, sheet.constants, sheet.settings, telling, sheet.findings
        )

    def sentences(self) -> list[str]:
        """The verdict in words."""
        return list(self.verdict.sentences) if self.verdict else ["No entries in this span."]

    def basis(self) -> list[str]:
        """What it rests on."""
        return [f"{words[:1].upper()}{words[1:]}." for words in self.verdict.basis] if self.verdict else []

    def ledger_table(self) -> dict[str, Any]:
        """What each step added or took over the span, with its uncertainty; the steps add up to the total."""
        level = Level(int(self.review.ledger.level[0])) if self.verdict else Level.NONE
        rows = [] if level is Level.NONE else list(self._ledger_rows(_SUPPLY[level]))
        name = _SUPPLY.get(level, "cao2")
        symbol, unit = self.order.display.quantity(name).symbol, self.order.display.unit(name).label
        return {
            "head": ["Step", f"Change of {symbol}\n({unit}) ± 95 %", "Share of\nthe start", "Judged", "Measured"],
            "widths": ["auto", "auto", "auto", "1", "1.5"],
            "sides": ["l", "r", "r", "l", "l"],
            "rows": rows,
            "empty": "Two arterial gases with haemoglobin are needed for a ledger.",
        }

    def _ledger_rows(self, name: str) -> Iterator[list[Any]]:
        found, display = self.review.ledger, self.order.display
        by_step = {item.step: item for item in self.verdict.evidence} if self.verdict else {}
        for step in STEPS:
            share = display.number(100 * float(found.step(step)[0] / found.start_supply[0]), 0, signed=True)
            item = by_step[step]
            change = self._change(name, found.step(step), found.sd[step])
            known = step != "flow" or name != "cao2"
            yield [step, change, f"{share} %", _judged(item, display), item.words] if known else [
                step, MISSING, MISSING, "not known", item.words]  # fmt: skip
        change = self._change(name, found.residual, found.sd["residual"])
        yield [f"in function: {RESIDUAL.word}", change, "", "", "measured saturation beyond the curve"]
        share = display.number(100 * float(found.total[0] / found.start_supply[0]), 0, signed=True)
        ends = (
            f"{display.value(name, float(found.start_supply[0]))} → {display.value(name, float(found.end_supply[0]))}"
        )
        yield [[text, "strong"] for text in (
            "total", self._change(name, found.total, found.sd["total"]), f"{share} %", self._total_words(), ends,
        )]  # fmt: skip

    def _change(self, name: str, change: Floats, sd: Floats) -> str:
        display = self.order.display
        half = Z95 * float(sd[0]) / display.unit(name).factor
        return f"{display.value(name, float(change[0]), signed=True)} ± {display.number(half, display.decimals(name))}"

    def _total_words(self) -> str:
        total = self.verdict.total if self.verdict else None
        return "" if total is None else "beyond noise" if bool(total.beyond_noise) else "within noise"

    def _shown(self, name: str, value: float) -> str:
        return self.order.display.value(name, value, with_unit=True)

    def findings_table(self) -> dict[str, Any]:
        """Every finding of the span; of notes of one kind the newest, with how many there are."""
        told = list(self._findings())
        notes = {item.code: [row for row, other in told if other.code == item.code] for _, item in told}
        rows = []
        for row, item in told:
            if item.severity != Severity.NOTE:
                rows.append([self._when(row), str(item.severity), item.sentence, item.settle])
            elif row == notes[item.code][-1]:
                rows.append([self._when(*notes[item.code]), str(item.severity), item.sentence, item.settle])
        return {
            "head": ["Entry of", "Kind", "Finding", "What would settle it"],
            "rows": rows,
            "widths": ["auto", "auto", "2", "1.2"],
            "sides": ["l", "l", "l", "l"],
            "empty": "No findings in this span.",
        }

    def _findings(self) -> Iterator[tuple[int, Finding]]:
        rows, found = self.order.rows, self.order.sheet.findings
        for row in rows[found.worst()[rows] > 0] if len(rows) else rows:
            for item in found.of_row(int(row), self._shown):
                yield int(row), item

    def _when(self, *rows: int) -> str:
        """The time of one entry, or of the first and last of several."""
        ends = [self.order.scale.text(float(self.order.sheet.readings.time[row])) for row in rows]
        return ends[0] if len(ends) == 1 else f"{ends[0]} to\n{ends[-1]}\n({len(ends)} entries, the last told)"


def _judged(item: verdict.Evidence, display: Display) -> str:
    """Whether a step lost supply beyond noise, whether that matters, and the share that this was concluded from."""
    if not np.isfinite(item.share):
        return "not known"
    said = "no loss beyond noise"
    if item.real:
        said = "loss beyond noise" + ("" if item.material else ", below 5 %")
    half = display.number(100 * Z95 * item.sd_share, 0)
    return f"{said} ({display.number(100 * item.share, 0, signed=True)} ± {half} %)"
