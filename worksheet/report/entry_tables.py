"""The table of all entries: own values, carried values marked, derived values, and what was corrected or noted."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from worksheet.oxygen.quantities import CATALOGUE, DERIVED, MEASURED
from worksheet.oxygen.readings import Event, Flag, Floats, Ints, Site
from worksheet.ward.display import MISSING

from .order import Order

Cell = str | list[str]

# The chain of oxygen, in the order it is read; every other quantity goes into the further tables.
_CHAIN = (
    "fio2", "peep", "ph", "pco2", "po2", "so2", "so2_calculated", "o2hb", "cohb", "methb", "spo2", "hb", "lactate",
    "cardiac_output", "cardiac_index", "cao2", "cvo2", "do2", "do2i", "o2er", "pf_ratio", "aa_gradient",
    "shunt_fraction",
)  # fmt: skip
_OF_THE_STAY = ("height", "weight", "age", "bsa")  # said once at the top
_MOST_COLUMNS = 22
_SITE = {Site.NONE: "reading", Site.ARTERIAL: "arterial", Site.MIXED_VENOUS: "mixed venous",
         Site.CENTRAL_VENOUS: "central ven.", Site.VENOUS: "venous"}  # fmt: skip
_FROM_CARRIED = {
    "cao2": Flag.HB_CARRIED, "extractable_o2": Flag.HB_CARRIED, "o2er": Flag.HB_CARRIED,
    "shunt_fraction": Flag.HB_CARRIED, "do2": Flag.HB_CARRIED | Flag.FLOW_CARRIED,
    "do2i": Flag.HB_CARRIED | Flag.FLOW_CARRIED, "vo2": Flag.HB_CARRIED | Flag.FLOW_CARRIED,
    "vo2i": Flag.HB_CARRIED | Flag.FLOW_CARRIED,
}  # fmt: skip
LEGEND = (
    "c: carried forward from an earlier entry (or read a little later), or resting on such a value. "
    "i: impossible as stored, kept out of every calculation. "
    "a: rests on an assumed inactive share of haemoglobin, or on a saturation that was calculated, not measured. "
    "A corrected entry shows its present values; the earlier ones stand under “Corrected and struck-out entries”."
)


def entries_table(order: Order, notes: dict[int, int]) -> dict[str, Any]:
    """The main table. ``notes`` gives the number of each entry's note."""
    names = _chain(order)
    columns = [_column(order, name) for name in names]
    marks = [_marks(order, int(row), notes) for row in order.rows]
    by = [_recorded(order, int(row)) for row in order.rows]
    parts = zip(_heads(order), *columns, by, marks, strict=True)
    return {
        "head": ["Time", "Sample", *_headings(order, names), "Recorded by", "Marks"],
        "rows": [[*head, *cells] for head, *cells in parts],
        "widths": ["auto", "auto", *["auto"] * len(names), "1", "1.3"],
        "sides": ["l", "l", *["r"] * len(names), "l", "l"],
        "empty": "No entries in this span.",
        "legend": LEGEND,
    }


def further_tables(order: Order) -> list[dict[str, Any]]:
    """Everything else that was measured or derived, a page's width at a time; rows without any of it left out."""
    chain = _chain(order)
    names = [
        name for name in (*MEASURED, *DERIVED)
        if name not in chain and name not in _OF_THE_STAY and has_any(order, name)
    ]  # fmt: skip
    tables = -(-len(names) // _MOST_COLUMNS)
    each = -(-len(names) // max(tables, 1))
    return [_further(order, names[n * each : (n + 1) * each]) for n in range(tables)]


def _chain(order: Order) -> list[str]:
    """The main columns the span has; delivery stands once, indexed where it can be."""
    names = [name for name in _CHAIN if has_any(order, name)]
    return [name for name in names if name != "do2" or "do2i" not in names]


def _recorded(order: Order, row: int) -> str:
    """Who recorded an entry, and by what way if not by the form."""
    entry = order.entries.get(int(order.sheet.entry_ids[row]))
    if entry is None or order.deidentify:
        return "" if entry is None else entry.source
    return entry.recorded_by.username + ("" if entry.source == "form" else f" ({entry.source})")


def _further(order: Order, names: Sequence[str]) -> dict[str, Any]:
    columns = [_column(order, name) for name in names]
    rows = [[*head, *cells] for head, *cells in zip(_heads(order), *columns, strict=True)]
    return {
        "head": ["Time", "Sample", *_headings(order, names)],
        "rows": [row for row in rows if any(cell != MISSING for cell in row[2:])],
        "widths": ["auto"] * (len(names) + 2),
        "sides": ["l", "l", *["r"] * len(names)],
        "empty": "",
    }


def _refused(order: Order, name: str) -> Floats:
    """Stored values that cannot be: told, and kept out of every calculation."""
    refused = order.sheet.refused.get(name)
    return np.full(len(order.rows), np.nan) if refused is None else refused[order.rows]


def has_any(order: Order, name: str) -> bool:
    """Whether the span has a value of this quantity."""
    if not CATALOGUE[name].derived and np.isfinite(_refused(order, name)).any():
        return True
    table = order.sheet.derived if CATALOGUE[name].derived else order.sheet.snapshots
    return bool(np.isfinite(table[name][order.rows]).any())


def _headings(order: Order, names: Sequence[str]) -> Iterator[str]:
    for name in names:
        unit = order.display.unit(name).label
        yield f"{CATALOGUE[name].symbol}\n{unit}" if unit else CATALOGUE[name].symbol


def _heads(order: Order) -> Iterator[list[str]]:
    readings = order.sheet.readings
    for row in order.rows:
        yield [order.scale.text(float(readings.time[row])), _SITE[Site(int(readings.site[row]))]]


def _column(order: Order, name: str) -> list[Cell]:
    if CATALOGUE[name].derived:
        return _derived_column(order, name)
    snap, rows = order.sheet.snapshots, order.rows
    own = snap.source[name][rows] == rows
    shown = own | snap.arterial[rows]
    values: Floats = np.where(shown, snap[name][rows], np.nan)
    refused = _refused(order, name)
    cannot = np.isfinite(refused)
    kinds = np.where(cannot, "impossible", np.where(own, "", "carried"))
    return _cells(order, name, np.where(cannot, refused, values), kinds)


def _derived_column(order: Order, name: str) -> list[Cell]:
    rows = order.rows
    flags = order.sheet.derived.flags[rows]
    carried = flags & _FROM_CARRIED.get(name, 0) != 0
    content = name in _FROM_CARRIED
    assumed = (flags & (Flag.DYSHAEMOGLOBINS_ASSUMED | Flag.SATURATION_CALCULATED | Flag.SATURATION_FROM_FINGER)) != 0
    kinds = np.where(carried, "carried", np.where(assumed & content, "assumed", ""))
    values = order.sheet.derived[name][rows]
    return _cells(order, name, values, kinds)


def _cells(order: Order, name: str, values: Floats, kinds: NDArray[np.str_]) -> list[Cell]:
    """A column of texts, with its mark where a value has one."""
    display = order.display
    decimals = display.decimals(name)
    shown = display.unit(name).from_canonical(values)
    texts = [display.number(value, decimals) for value in shown.tolist()]
    return [[t, kind] if kind and t != MISSING else t for t, kind in zip(texts, kinds.tolist(), strict=True)]


def _marks(order: Order, row: int, notes: dict[int, int]) -> str:
    """What else there is to say about an entry: an event, a correction, a note."""
    pk = int(order.sheet.entry_ids[row])
    entry = order.entries.get(pk)
    words = [event_words(order, row)]
    if entry is not None and entry.replaces_id:
        words.append("corrected")
    if pk in notes:
        words.append(f"note {notes[pk]}")
    return ", ".join(filter(None, words))


def event_words(order: Order, row: int) -> str:
    """The event of a row with its amount."""
    event = Event(int(order.sheet.readings.event[row]))
    if event is Event.NONE:
        return ""
    entry = order.entries.get(int(order.sheet.entry_ids[row]))
    amount = entry.event_amount if entry is not None else None
    word = event.name.lower().replace("_", " ")
    if amount is None:
        return word
    unit = "units" if event is Event.TRANSFUSION else "mL" if event is Event.BLEED else ""
    return f"{word} {order.display.number(amount, 0)} {unit}".rstrip()


def latest_arterial(order: Order) -> int | None:
    """Newest arterial row of the span."""
    rows: Ints = order.rows[order.sheet.snapshots.arterial[order.rows]]
    return int(rows[-1]) if len(rows) else None
