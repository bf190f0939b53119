"""The top of a timeline: whom it is about, what span, when and by whom it was printed; and the saturations compared."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from worksheet.oxygen.readings import Flag
from worksheet.review.saturations import reconcile
from worksheet.ward.display import MISSING

from .entry_tables import latest_arterial
from .order import Order

_OLDEST_TOLD = 89  # years; above it an age identifies: 45 CFR 164.514(b)(2)(i)(C)
_BASIS = (  # what the verdict does not say itself
    (Flag.DYSHAEMOGLOBINS_CARRIED, "Dyshaemoglobins were carried from an earlier sample."),
    (Flag.SATURATION_FROM_FINGER, "The saturation came from the pulse oximeter: no gas saturation and no PO2."),
    (Flag.FIO2_ESTIMATED, "FiO2 of a low-flow device is an estimate."),
    (Flag.TEMPERATURE_ASSUMED, "37 °C was taken for the blood in the body."),
    (Flag.BAROMETRIC_STANDARD, "The barometric pressure was the unit's constant, not measured."),
)


def title(order: Order) -> str:
    """Heading of the document."""
    return "Oxygen delivery timeline" + (", de-identified" if order.deidentify else f" · {order.stay.reference}")


def span_words(order: Order) -> str:
    """The span, as this document may tell it."""
    times = order.sheet.readings.time[order.rows]
    if order.window is not None:
        low, high = order.window
    elif len(times):
        low, high = float(times.min()), float(times.max())
    else:
        return "no entries"
    return f"{order.scale.text(low)} to {order.scale.text(high)}"


def header(order: Order) -> dict[str, str]:
    """What stands on every page."""
    if order.deidentify:
        return {"left": "De-identified timeline", "span": span_words(order), "printed": "times in hours from admission"}
    bed = f" · bed {order.stay.bed.name}" if order.stay.bed else ""
    return {
        "left": f"{order.stay.reference}{bed} · {order.stay.unit.name}",
        "span": span_words(order),
        "printed": f"printed {order.display.stamp(order.printed_at)} by {order.printed_by}",
    }


def facts(order: Order) -> list[list[str]]:
    """Pairs of label and value."""
    stay, told = order.stay, order.display
    found = [] if order.deidentify else list(_identity(order))
    age = stay.age
    old = order.deidentify and age is not None and age > _OLDEST_TOLD
    age_text = f"over {_OLDEST_TOLD} years" if old else told.value("age", age, with_unit=True)
    body = [told.value("height", stay.height, with_unit=True), told.value("weight", stay.weight, with_unit=True)]
    row = latest_arterial(order)
    surface = told.value("bsa", float(order.sheet.derived["bsa"][row]), with_unit=True) if row is not None else MISSING
    return [
        *found,
        ["Age", age_text],
        ["Height, weight", ", ".join(body)],
        ["Body surface", surface],
        ["Entries", f"{len(order.rows)} in the span"],
    ]


def _identity(order: Order) -> Iterator[list[str]]:
    stay = order.stay
    yield ["Patient", f"{stay.patient.identifier} ({stay.patient.system})"]
    yield ["Unit", stay.unit.name]
    yield ["Bed", stay.bed.name if stay.bed else MISSING]
    yield ["Admitted", order.display.stamp(stay.admitted_at) if stay.admitted_at else MISSING]
    yield ["Discharged", order.display.stamp(stay.discharged_at) if stay.discharged_at else MISSING]


def basis(order: Order) -> list[str]:
    """On what the newest arterial sample's numbers rest."""
    row = latest_arterial(order)
    if row is None:
        return []
    bits = int(order.sheet.derived.flags[row])
    return [words for bit, words in _BASIS if bits & bit]


def saturations(order: Order) -> dict[str, Any]:
    """The saturations of the newest arterial sample that has one, side by side and in words."""
    found = reconcile(order.sheet, order.rows, order.display)
    table = {
        "head": ["Saturation", "Value", "What it is", "From"],
        "rows": [[line.symbol, line.value, line.words, line.origin] for line in found.lines] if found else [],
        "widths": ["auto", "auto", "2", "1"],
        "sides": ["l", "r", "l", "l"],
        "empty": "No saturation in this span.",
    }
    if found is None:
        return {"words": [], "table": table}
    when = "" if order.deidentify else f" ({found.when})"
    told = [*found.sentences, *(f"{finding.sentence} {finding.settle}" for finding in found.findings)]
    return {"words": [f"Newest arterial sample with a saturation{when}. {' '.join(told)}"], "table": table}
