"""How the columns of a table are read: from the header, from a saved mapping, else proposed and asked."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from worksheet.oxygen.quantities import CATALOGUE, DERIVED, MEASURED, WITH_SD, Quantity, UnitOfMeasure
from worksheet.oxygen.readings import Site

from .cells import number, shortened
from .names import column_named, site_named
from .table import Table
from .times import Order, order_of

SAMPLE = 400  # rows looked at to recognise units and date order
BEDSIDE = ("device", "flow_method", "event", "event_amount")  # columns of our own export
CONTRACT = frozenset({"stay", "time", "site", "sample", "note", *BEDSIDE, *MEASURED})
COMPUTED = frozenset({*DERIVED, *(f"{name}_sd" for name in WITH_SD)})
_UNIT_IN_HEADER = (  # in brackets at the end, after a sign, as the last word
    re.compile(r"[(\[{]\s*([^()\[\]{}]*(?:\[[^\]]*\])?)\s*[)\]}]\s*$"),
    re.compile(r"[,;_]\s*([^,;_(]+)$"),
    re.compile(r"\s(\S+)$"),
)


@dataclass(frozen=True)
class Column:
    """One column and what it is read as."""

    index: int
    header: str
    role: str = ""  # quantity, stay, time, date, clock, site, sample, note; empty: not read
    quantity: Quantity | None = None
    unit: UnitOfMeasure | None = None
    site: Site = Site.NONE
    why: str = ""  # where the unit comes from
    sure: bool = True

    def shown(self) -> dict[str, Any]:
        """The column for a preview."""
        reads_as = self.quantity.label if self.quantity else self.role or "not read"
        unit = (self.unit.label or "no unit") if self.unit else ("unit not known" if self.quantity else "")
        site = self.site.name.lower().replace("_", " ") if self.site else ""
        return {
            "header": self.header, "reads_as": reads_as, "unit": unit, "site": site, "why": self.why,
            "confirm": "" if self.sure else "please confirm", "role": self.role, "site_code": int(self.site),
            "quantity": self.quantity.name if self.quantity else "", "ucum": self.unit.ucum if self.unit else "",
        }  # fmt: skip


@dataclass(frozen=True)
class Plan:
    """How one table is read, and what somebody has to confirm first."""

    columns: tuple[Column, ...]
    contract: bool = False
    decimal_comma: bool | None = None
    order: Order = ""
    site: Site | None = None  # of every row, when no column says it
    questions: tuple[str, ...] = ()
    notes: tuple[str, ...] = field(default=())

    def column(self, role: str) -> Column | None:
        """The first column with a role."""
        return next((c for c in self.columns if c.role == role), None)


def propose(table: Table, saved: Mapping[str, Any] | None = None) -> Plan:
    """The plan for a table. ``saved`` maps headers to what a person confirmed before (see :func:`as_saved`)."""
    texts = _texts(table)
    comma = _decimal_comma(texts)
    kept = (saved or {}).get("columns", {})
    contract = {"stay", "time"} <= set(table.header) and len(set(table.header) & set(MEASURED)) >= 1
    columns = tuple(_column(i, h, texts[i], comma, kept.get(h), contract) for i, h in enumerate(table.header))
    columns = _without_doubles(columns if contract else _by_content(columns, texts))
    order, order_sure = _date_order(columns, texts)
    if saved and saved.get("order"):
        order, order_sure = saved["order"], True
    plan = Plan(columns, contract, comma, order)
    return replace(plan, questions=tuple(_questions(plan, texts, order_sure)), notes=tuple(_notes(plan)))


def as_saved(plan: Plan) -> dict[str, Any]:
    """What is kept of a confirmed plan."""
    return {
        "order": plan.order,
        "columns": {
            c.header: {"role": c.role, "quantity": c.quantity.name if c.quantity else "",
                       "unit": c.unit.ucum if c.unit else "", "site": int(c.site)}
            for c in plan.columns
        },
    }  # fmt: skip


def _texts(table: Table) -> list[list[str]]:
    """The first filled texts of each column."""
    rows = table.records[:SAMPLE]
    return [[t for _, cells in rows if i < len(cells) and (t := cells[i].strip())] for i in range(len(table.header))]


def _decimal_comma(texts: list[list[str]]) -> bool | None:
    commas = sum("," in t for column in texts for t in column if number(t)[0] is not None)
    points = sum("." in t for column in texts for t in column if number(t)[0] is not None)
    return None if commas == points == 0 else commas > points


def _column(index: int, header: str, texts: list[str], comma: bool | None, kept: Mapping[str, Any] | None,
            contract: bool) -> Column:  # fmt: skip
    if kept is not None:
        quantity = CATALOGUE.get(kept["quantity"]) if kept["role"] == "quantity" else None
        unit = next((u for u in quantity.units if u.ucum == kept["unit"]), None) if quantity else None
        if quantity is None or unit is not None:
            return Column(index, header, kept["role"], quantity, unit, Site(kept["site"]), "as chosen")
    if contract:
        if header in MEASURED:
            return _contract_column(index, CATALOGUE[header], texts, comma)
        return Column(index, header, header if header in CONTRACT else "")
    name, site = column_named(header)
    if name not in MEASURED:
        return Column(index, header, name)
    quantity = CATALOGUE[name]
    unit, why, sure = _unit(quantity, header, texts, comma)
    return Column(index, header, "quantity", quantity, unit, site, why, sure)


def _contract_column(index: int, quantity: Quantity, texts: list[str], comma: bool | None) -> Column:
    """A column named as in the batch contract has the contract's unit, unless its values cannot be in it."""
    fits = _fitting(quantity, texts, comma)
    if fits and quantity.unit not in fits and not _mixed(quantity, texts, comma):
        likely = " or ".join(u.label for u in fits)
        return Column(
            index, quantity.name, "quantity", quantity, quantity.unit, why=f"values look like {likely}", sure=False
        )
    return Column(index, quantity.name, "quantity", quantity, quantity.unit, why="a column name of the command derive")


def _mixed(quantity: Quantity, texts: list[str], comma: bool | None) -> bool:
    """Fractions in a percent column are allowed for FiO2 and only asked about, value by value, elsewhere."""
    return quantity.unit.ucum == "%"


def _unit(
    quantity: Quantity, header: str, texts: list[str], comma: bool | None
) -> tuple[UnitOfMeasure | None, str, bool]:
    """The unit of a column: from its header, from texts behind its values, else proposed from the values."""
    for pattern in _UNIT_IN_HEADER:
        match = pattern.search(header)
        unit = quantity.unit_named(match.group(1)) if match and match.group(1).strip() else None
        if unit is not None:
            return unit, "header", True
    trailing = {rest for t in texts if (rest := number(t, comma)[2])}
    units = {u.ucum: u for rest in trailing if (u := quantity.unit_named(rest)) is not None}
    if len(units) == 1 and all(quantity.unit_named(rest) for rest in trailing):
        return next(iter(units.values())), "written behind the values", True
    if len(quantity.units) == 1:
        return quantity.unit, "the only unit of this quantity", True
    fits = _fitting(quantity, texts, comma)
    if len(fits) == 1:
        return fits[0], "values fit no other unit", False
    return None, "not given, and the values do not tell" if texts else "not given", False


def _fitting(quantity: Quantity, texts: list[str], comma: bool | None) -> list[UnitOfMeasure]:
    """Units in which at least nine of ten values are likely ones."""
    values = np.array([v for t in texts if (v := number(t, comma)[0]) is not None], dtype=np.float64)
    if not len(values):
        return []
    low, high = quantity.unlikely
    share = [
        (u, float(np.mean((u.to_canonical(values) >= low) & (u.to_canonical(values) <= high)))) for u in quantity.units
    ]
    distinct = {(u.factor, u.offset): u for u, s in reversed(share) if s >= 0.9}
    return list(distinct.values())


def _by_content(columns: tuple[Column, ...], texts: list[list[str]]) -> tuple[Column, ...]:
    """Headers that mean two things: "Time" beside "Date" is the clock, "Sample" may say where it was drawn."""
    roles = {c.role for c in columns}
    out = []
    for c in columns:
        if c.role == "time" and "date" in roles and "clock" not in roles:
            c = replace(c, role="clock")
        elif c.role == "sample" and "site" not in roles and texts[c.index]:
            named = sum(site_named(t) is not None for t in texts[c.index])
            c = replace(c, role="site") if 2 * named >= len(texts[c.index]) else c
        out.append(c)
    return tuple(out)


def _without_doubles(columns: tuple[Column, ...]) -> tuple[Column, ...]:
    """A second column for the same thing (same quantity and site) is not read unless the first is empty of meaning."""
    seen: set[tuple[str, str, int]] = set()
    out = []
    for c in columns:
        mark = (c.role, c.quantity.name if c.quantity else "", int(c.site))
        if c.role and c.role != "note" and mark in seen:
            c = Column(c.index, c.header, why="a column before this one already holds it")
        seen.add(mark)
        out.append(c)
    return tuple(out)


def _date_order(columns: tuple[Column, ...], texts: list[list[str]]) -> tuple[Order, bool]:
    for role in ("time", "date"):
        for c in columns:
            if c.role == role:
                return order_of(texts[c.index])
    return "", True


def _questions(plan: Plan, texts: list[list[str]], order_sure: bool) -> list[str]:
    asked = []
    for c in plan.columns:
        if c.quantity is not None and not c.sure:
            sample = ", ".join(texts[c.index][:3]) or "no values"
            proposal = f"{c.unit.label or 'no unit'} is proposed ({c.why})" if c.unit else f"its unit is {c.why}"
            asked.append(f"Column '{shortened(c.header)}' ({sample} …): {proposal}.")
    if not order_sure:
        asked.append("The dates can be read in two ways: say whether the day or the month comes first"
                     + (" (proposed: the day)." if plan.order == "dmy" else "."))  # fmt: skip
    if plan.column("stay") is None:
        asked.append("No column names the stay or patient.")
    if plan.column("time") is None and not (plan.column("date") and plan.column("clock")):
        asked.append("No column gives the time.")
    return asked


def _notes(plan: Plan) -> list[str]:
    unread = [c.header for c in plan.columns if not c.role]
    computed = [h for h in unread if h in COMPUTED or h.endswith("_age_h")]
    ignored = [h for h in unread if h not in computed]
    notes = [f"Columns not read: {', '.join(ignored)}."] if ignored else []
    if computed:
        notes.append(f"{len(computed)} columns are computed by the worksheet and not read.")
    if plan.decimal_comma:
        notes.append("Numbers have a decimal comma.")
    return notes
