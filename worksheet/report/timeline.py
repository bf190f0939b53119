"""The timeline of one patient: every part of the document as data, then the PDF."""

from __future__ import annotations

from typing import Any

from worksheet import charts
from worksheet.charts.ledger import Changes
from worksheet.charts.printed import printed
from worksheet.charts.steps import RESIDUAL, STEPS

from . import facts, history, methods
from .archive import remember
from .entry_tables import entries_table, further_tables
from .fingerprint import fingerprint
from .judgement import findings_table, verdict_words
from .order import Order
from .printing import pdf_of

DEIDENTIFIED_DATE = 946_684_800  # 2000-01-01: the document's own date would tell when


def timeline_pdf(order: Order, actor: str = "") -> bytes:
    """Print a timeline and write the printing into the audit trail."""
    mark = fingerprint(order.stay, order.end, order.printed_at)
    at = DEIDENTIFIED_DATE if order.deidentify else int(order.printed_at.timestamp())
    pdf = pdf_of("timeline.typ", timeline(order, mark), at)
    remember(actor or order.printed_by, order, mark, pdf)
    return pdf


def timeline(order: Order, mark: str) -> dict[str, Any]:
    """Everything that stands in the document."""
    notes = history.noted(order)
    changes = charts.changes_of(order.sheet, order.rows)
    return {
        "paper": order.stay.unit.paper,
        "flipped": False,
        "lang": "en",
        "title": facts.title(order),
        "keywords": [f"fingerprint-sha256:{mark}"],
        "header": facts.header(order),
        "footer": methods.FOOTER,
        "facts": facts.facts(order),
        "verdict": verdict_words(order),
        "basis": facts.basis(order),
        "ledger": ledger_table(order, changes),
        "charts": _charts(order, changes),
        "saturations": facts.saturations(order),
        "entries": entries_table(order, notes),
        "other": further_tables(order),
        "findings": findings_table(order),
        "notes": history.notes(order, notes),
        "no-notes": history.WITHHELD if order.deidentify else "No notes in this span.",
        "corrections": history.corrections(order),
        "methods": list(methods.METHODS),
        "constants": methods.constants_table(order.sheet.constants, order.display),
        "cautions": list(methods.CAUTIONS),
        "fingerprint": _fingerprint_words(order, mark),
    }


def _charts(order: Order, changes: Changes) -> dict[str, Any]:
    sheet, stay, rows, display, scale = order.sheet, order.stay, order.rows, order.display, order.scale
    drawn = (
        charts.time_strip(sheet, stay, rows, display, order.window, scale),
        charts.change_ledger(changes, display, scale),
        charts.content_map(sheet, stay, rows, display, scale),
        charts.delivery_map(sheet, stay, rows, display, scale),
        charts.curve_chart(sheet, stay, rows, display, scale),
    )
    return {chart.key: printed(chart) for chart in drawn}


def ledger_table(order: Order, changes: Changes) -> dict[str, Any]:
    """What each step added or took over the span: the sum of the intervals."""
    display, name = order.display, changes.quantity
    unit = display.unit(name).label
    table: dict[str, Any] = {
        "head": ["Step", f"Change of {display.quantity(name).symbol} ({unit})", "What it holds"],
        "widths": ["auto", "auto", "1"],
        "sides": ["l", "r", "l"],
        "rows": [],
        "empty": "Two arterial gases with haemoglobin are needed for a ledger.",
    }
    if not len(changes):
        return table
    parts = {step.name: float(changes.steps[step.name].sum()) for step in STEPS}
    residual = float(changes.residual.sum())
    for step in STEPS:
        value = parts[step.name] - (residual if step.name == "function" else 0.0)
        table["rows"].append([step.word, display.value(name, value, signed=True), _HOLDS[step.name]])
    table["rows"].append([RESIDUAL.word, display.value(name, residual, signed=True), _HOLDS["residual"]])
    total = display.value(name, sum(parts.values()), signed=True)
    words = f"{order.scale.text(float(changes.start[0]))} to {order.scale.text(float(changes.end[-1]))}"
    table["rows"].append([["total", "strong"], [total, "strong"], words])
    return table


_HOLDS = {
    "lung": "PaO2, through saturation and dissolved oxygen",
    "haemoglobin": "its amount",
    "function": "dyshaemoglobins and the shift of the curve",
    "flow": "cardiac output or index",
    "residual": "measured saturation beyond the curve; belongs to function",
}


def _fingerprint_words(order: Order, mark: str) -> list[str]:
    count = sum(1 for entry in order.entries.values() if entry.recorded_at <= order.printed_at)
    return [
        f"SHA-256 {' '.join(mark[i : i + 16] for i in range(0, 64, 16))}",
        f"Over {count} entries as recorded when this was printed, corrected and struck-out ones included, with the "
        "patient facts and the constants in force. The command verify_pdf makes it again from the database and says "
        "whether the data are the same.",
    ]
