"""The unit review on one landscape page."""

from __future__ import annotations

import hashlib
from datetime import datetime
from typing import Any

from worksheet.charts.bar import LedgerBar
from worksheet.charts.steps import STEP, colour
from worksheet.review.beds import BedRow
from worksheet.review.unit import rows_of
from worksheet.review.window import Window
from worksheet.ward import audit
from worksheet.ward.display import MISSING, Display
from worksheet.ward.models import Unit

from . import methods
from .printing import pdf_of

_MOST_FULL = 20  # beds whose findings are told; above it one line a bed
_MOST_FINDINGS = 2  # of a bed; the page says how many more there are
_HEAD = ("Bed", "Newest gas", "Supply now ± 95 %", "Change", "Steps (share of the start)", "O2ER, lactate",
         "Missing, findings")  # fmt: skip
_WIDTHS = ("auto", "auto", "auto", "1", "1.6", "1", "2.4")


def unit_pdf(unit: Unit, window: Window, display: Display, printed_by: str) -> bytes:
    """Print the review of a unit and write the printing into the audit trail."""
    pdf = pdf_of("unit.typ", unit_review(unit, window, display, printed_by), int(window.now.timestamp()))
    audit.write(printed_by, "printed", unit=unit.name, document="unit review", since=window.since.isoformat(),
                file_sha256=hashlib.sha256(pdf).hexdigest())  # fmt: skip
    return pdf


def unit_review(unit: Unit, window: Window, display: Display, printed_by: str) -> dict[str, Any]:
    """Everything that stands on the page."""
    rows = rows_of(unit, window, display)
    return {
        "paper": unit.paper,
        "flipped": True,
        "lang": "en",
        "title": f"Oxygen delivery, unit review · {unit.name}",
        "keywords": [],
        "header": {
            "left": unit.name,
            "span": f"review {window.words}: {display.stamp(window.since)} to {display.stamp(window.until)}",
            "printed": f"printed {display.stamp(window.now)} by {printed_by}",
        },
        "footer": methods.FOOTER,
        "counts": _counts(rows),
        "head": list(_HEAD),
        "widths": list(_WIDTHS),
        "rows": [_brief_row(row, display) if len(rows) > _MOST_FULL else _row(row, display) for row in rows],
        "empty": "No patient is in this unit.",
    }


def _counts(rows: list[BedRow]) -> str:
    worse, stale = sum(row.worse for row in rows), sum(row.stale for row in rows)
    odd = sum(row.contradictory for row in rows)
    return (
        f"{len(rows)} beds · {worse} worse beyond noise (supply, or a step of it) · {stale} stale · {odd} contradictory"
    )


def _row(row: BedRow, display: Display) -> list[Any]:
    bed = row.stay.bed.name if row.stay.bed else MISSING
    return [
        [f"{bed} · {row.stay.reference}", "strong"],
        _gas(row, display),
        f"{row.now_text}\n± {row.now_half}" if row.now_half else row.now_text,
        f"{row.change_text}\n{row.change_words}" if row.change_text else row.change_words,
        _bar(row.bar, f"{_step_words(row.step)} {row.bar_words}"),
        f"O2ER {row.o2er_text}{'' if row.o2er_text == MISSING else ' %'}\nlactate {row.lactate_text}",
        "\n".join(_told(row)) or MISSING,
    ]


def _brief_row(row: BedRow, display: Display) -> list[Any]:
    """One line a bed, for a large unit: the patients' pages hold the sentences."""
    bed, gas, *_ = _row(row, display)
    findings = f"{len(row.findings)} findings" if row.findings else ""
    missing = f"missing {', '.join(row.missing)}" if row.missing else ""
    extraction = "" if row.o2er_text == MISSING else f"O2ER {row.o2er_text}\u00a0%, "
    return [
        bed,
        gas.replace("\n", ", "),
        f"{row.now_text} ± {row.now_half}" if row.now_half else row.now_text,
        f"{row.change_text}{', beyond noise' if row.beyond_noise else ''}" if row.change_text else row.change_words,
        _bar(row.bar, row.step if row.step in STEP else ""),
        f"{extraction}lactate {row.lactate_text}",
        "; ".join(filter(None, (missing, findings))) or MISSING,
    ]


def _gas(row: BedRow, display: Display) -> str:
    if row.last < 0:
        return "no arterial gas"
    when = display.clock(float(row.sheet.readings.time[row.last]))
    return f"{when}\n{row.age_words} ago{', stale' if row.stale else ''}"


def _step_words(step: str) -> str:
    said = {"none": "No step failed beyond noise.", "undetermined": "Which step failed cannot be told apart.", "": ""}
    return said.get(step, f"Failed: {step}.")


def _bar(bar: LedgerBar, words: str) -> dict[str, Any]:
    pieces = [
        {"x": p.x, "width": p.width, "colour": colour(p.step.style.role), "hatch": p.step.style.hatch}
        for p in bar.pieces
    ]
    return {"width": bar.width, "zero": bar.zero, "pieces": pieces, "words": words.strip().replace(" %", "\u00a0%")}


def _told(row: BedRow) -> list[str]:
    told = [f"After the gas: {row.since_gas}, not in these numbers."] if row.since_gas else []
    told += [f"Missing: {', '.join(row.missing)}."] if row.missing else []
    told += [finding.sentence for finding in row.findings[:_MOST_FINDINGS]]
    more = len(row.findings) - _MOST_FINDINGS
    return told + ([f"and {more} more finding{'' if more == 1 else 's'}."] if more > 0 else [])


def window_since(unit: Unit, since: datetime, now: datetime) -> Window:
    """A window from a given moment to now."""
    return Window("free", since, now, f"since {since.astimezone(unit.zone):%d %b %H:%M}", now)
