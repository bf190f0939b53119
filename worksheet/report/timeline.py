"""The timeline of one patient: every part of the document as data, then the PDF."""

from __future__ import annotations

from typing import Any

from worksheet import charts
from worksheet.charts.ledger import Changes
from worksheet.charts.printed import printed

from . import facts, history, methods
from .archive import remember
from .entry_tables import entries_table, further_tables
from .fingerprint import fingerprint
from .judgement import Judged
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
    judged = Judged(order)
    return {
        "paper": order.stay.unit.paper,
        "flipped": False,
        "lang": "en",
        "title": facts.title(order),
        "keywords": [f"fingerprint-sha256:{mark}"],
        "header": facts.header(order),
        "footer": methods.FOOTER,
        "facts": facts.facts(order),
        "verdict": judged.sentences(),
        "basis": [*judged.basis(), *facts.basis(order)],
        "ledger": judged.ledger_table(),
        "charts": _charts(order, changes),
        "saturations": facts.saturations(order),
        "entries": entries_table(order, notes),
        "other": further_tables(order),
        "findings": judged.findings_table(),
        "notes": history.notes(order, notes),
        "no-notes": history.WITHHELD if order.deidentify else "No notes in this span.",
        "corrections": history.corrections(order),
        "methods": list(methods.METHODS),
        "constants": methods.constants_table(order.sheet.constants, order.display),
        "equations": methods.equations_table(order),
        "uncertainties": methods.uncertainties_table(order),
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


def _fingerprint_words(order: Order, mark: str) -> list[str]:
    count = sum(1 for entry in order.entries.values() if entry.recorded_at <= order.printed_at)
    return [
        f"SHA-256 {' '.join(mark[i : i + 16] for i in range(0, 64, 16))}",
        f"Over {count} entries as recorded when this was printed, corrected and struck-out ones included, with the "
        "patient facts and the constants in force. The command verify_pdf makes it again from the database and says "
        "whether the data are the same.",
    ]
