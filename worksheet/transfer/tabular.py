"""Tables to rows of the pipeline: every line becomes one row, or more when it holds two sites."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

from worksheet.oxygen.readings import Device, Event, FlowMethod, Site

from . import table as tables
from . import workbook
from .cells import ColumnReader, number, shortened
from .csv_text import unsafe
from .names import site_named
from .plan import BEDSIDE, Plan, propose
from .rows import Cell, Fate, Parsed, PatientRef, Row
from .table import Table
from .times import TimeRules, looks_shifted, parse

_GAS = frozenset({"ph", "pco2", "po2", "so2", "so2_calculated", "o2hb"})
ASSUMED_ARTERIAL = "no site given: read as arterial"
# A refused value may mean that the row slipped by a column, so the whole row waits; a constant of the person does not.
_OF_THE_PERSON = frozenset({"height", "weight", "age"})
Progress = Callable[[int, int], None]


@dataclass(frozen=True)
class TableOptions:
    """What a person chose or confirmed for a table."""

    rules: TimeRules
    saved: Mapping[str, Any] | None = None
    confirmed: bool = False  # proposals that are shown may be taken as they are
    keep_rest: bool = False  # store a row without its refused values instead of leaving the row out
    system: str = ""  # who issues the identifiers in the stay column
    site: Site | None = None
    progress: Progress | None = None


def parse_csv(data: bytes, options: TableOptions) -> Parsed:
    """Rows of a CSV file."""
    return _parse("csv", [tables.read(data)], options)


def parse_xlsx(data: bytes, options: TableOptions) -> Parsed:
    """Rows of all readable sheets of a spreadsheet."""
    found, notes = workbook.read(data)
    parsed = _parse("xlsx", found, options)
    parsed.notes[:0] = notes
    return parsed


def _parse(kind: str, found: list[Table], options: TableOptions) -> Parsed:
    parsed = Parsed(kind, [])
    for table in found:
        plan = propose(table, options.saved)
        mark = f"sheet '{table.sheet}': " if table.sheet and len(found) > 1 else ""
        parsed.columns += [{**c.shown(), "sheet": table.sheet} for c in plan.columns]
        parsed.notes += [mark + note for note in (*table.notes, *plan.notes)]
        if not options.confirmed:
            parsed.questions += [mark + q for q in (*plan.questions, *_zone_question(plan, table, options.rules))]
        rules = _rules(table, plan, options.rules, parsed)
        parsed.rows += _TableReader(table, plan, replace(options, rules=rules)).rows()
    return parsed


def _zone_question(plan: Plan, table: Table, rules: TimeRules) -> list[str]:
    column = plan.column("time") or plan.column("date")
    if column is None or rules.zone is not None:
        return []
    bare = sum(
        parse(c[column.index], rules)[1].endswith("no time zone")
        for _, c in table.records[:200]
        if len(c) > column.index
    )
    return (
        ["The times have no time zone: say which one they are in."] if bare or (plan.column("clock") and column) else []
    )


def _rules(table: Table, plan: Plan, rules: TimeRules, parsed: Parsed) -> TimeRules:
    column = plan.column("time")
    if column is not None and looks_shifted([c[column.index] for _, c in table.records if c[column.index]], rules.now):
        parsed.shifted_dates = True
        parsed.notes.append("Every date lies more than 50 years ahead: read as shifted for de-identification.")
    return replace(rules, order=rules.order or plan.order, shifted=rules.shifted or parsed.shifted_dates)


class _TableReader:
    """Reads the records of one table; texts that repeat (times, stays, values) are read once."""

    def __init__(self, table: Table, plan: Plan, options: TableOptions) -> None:
        self.table, self.plan, self.options = table, plan, options
        self.readers = [
            (c.index, c.quantity.name, c.site, ColumnReader(c.quantity, c.unit, plan.decimal_comma))
            for c in plan.columns
            if c.quantity is not None and c.unit is not None
        ]
        self.unread = [c for c in plan.columns if c.quantity is not None and c.unit is None]
        roles = ("stay", "time", "date", "clock", "site", "sample", "note", *BEDSIDE)
        self.at = {role: c.index for role in roles if (c := plan.column(role)) is not None}
        self.refs: dict[str, PatientRef] = {}
        self.times: dict[str, tuple[Any, str]] = {}
        self.sites: dict[str, Site | None] = {}

    def rows(self) -> list[Row]:
        """Every record, broken line and skipped line of the table."""
        out: list[tuple[int, Row]] = []
        total = len(self.table.records)
        for count, (line, cells) in enumerate(self.table.records):
            out += ((line, row) for row in self._record(line, cells))
            if self.options.progress and count % 2000 == 0:
                self.options.progress(count, total)
        for line, why in self.table.broken.items():
            out.append((line, self._row(line, Fate.INVALID, f"the row is broken: {why}")))
        for line, cells in self.table.skipped:
            out.append(
                (line, self._row(line, Fate.NOT_UNDERSTOOD, f"not a row of values: '{shortened(' '.join(cells))}'"))
            )
        if self.table.broken or self.table.skipped:
            out.sort(key=lambda item: item[0])
        return [row for _, row in out]

    def _row(self, line: int, fate: Fate | None = None, reason: str = "") -> Row:
        row = Row(self.table.place(line), quiet=fate is Fate.NOT_UNDERSTOOD)  # a footer is nobody's work
        if fate is not None:
            row.settle(fate, reason)
        return row

    def _text(self, role: str, cells: list[str]) -> str:
        index = self.at.get(role)
        return cells[index].strip() if index is not None else ""

    def _record(self, line: int, cells: list[str]) -> Iterator[Row]:
        if tables.is_footer(cells, self.table.header):
            yield self._row(
                line, Fate.NOT_UNDERSTOOD, f"not a row of values: '{shortened(' '.join(c for c in cells if c))}'"
            )
            return
        row = self._row(line)
        problems = [p] if (p := tables.oversized(cells)) else []
        problems += self._who_and_when(row, cells) + self._where(row, cells) + self._bedside(row, cells)
        parts = self._values(row, cells, problems)
        if problems:
            row.raw = dict(zip(self.table.header, (shortened(c, 200) for c in cells), strict=False))
            row.settle(Fate.INVALID, "; ".join(problems))
        elif not parts and not row.note and not row.event:
            row.settle(Fate.NOT_UNDERSTOOD, "the row holds no value that can be read")
        for part in parts[1:]:
            if row.fate is not None:
                part.settle(row.fate, row.reason)
        yield row
        yield from parts[1:]

    def _who_and_when(self, row: Row, cells: list[str]) -> list[str]:
        stay = unsafe(self._text("stay", cells))
        problems = [] if stay else ["stay: it is missing"]
        if len(stay) > 64:
            problems.append(f"stay: '{shortened(stay)}' is longer than 64 characters")
        elif stay:
            row.patient = self.refs.get(stay) or self.refs.setdefault(stay, PatientRef(stay, self.options.system))
        text = self._text("time", cells) or f"{self._text('date', cells)} {self._text('clock', cells)}".strip()
        known = self.times.get(text)
        if known is None:
            known = self.times[text] = parse(text, self.options.rules)
        row.time = known[0]
        row.sample = shortened(unsafe(self._text("sample", cells)), 64)
        row.note = unsafe(self._text("note", cells))
        return [*problems, *([f"time: {known[1]}"] if known[1] else [])]

    def _where(self, row: Row, cells: list[str]) -> list[str]:
        text = self._text("site", cells)
        if text not in self.sites:
            self.sites[text] = site_named(text)
        site = self.sites[text]
        if site is None:
            return [f"site: '{shortened(text)}' is not known (arterial, mixed_venous, central_venous, venous)"]
        row.site = site if text else (self.options.site or Site.NONE)
        return []

    def _bedside(self, row: Row, cells: list[str]) -> list[str]:
        """Device, flow method and event of our own export."""
        problems = []
        for name, codes in (("device", Device), ("flow_method", FlowMethod), ("event", Event)):
            text = self._text(name, cells)
            if text and text.upper() in codes.__members__:
                setattr(row, name, codes[text.upper()])
            elif text:
                problems.append(f"{name}: '{shortened(text)}' is not known ({', '.join(codes.__members__).lower()})")
        amount = self._text("event_amount", cells)
        row.event_amount = number(amount)[0] if amount else None
        if amount and row.event_amount is None:
            problems.append(f"event_amount: '{shortened(amount)}' is not a number")
        return problems

    def _values(self, row: Row, cells: list[str], problems: list[str]) -> list[Row]:
        """Fill the row; values whose header names another site go to rows of their own."""
        apart: dict[Site, dict[str, Cell]] = {}
        cautions: list[str] = []
        for index, name, site, read in self.readers:
            cell = read(cells[index])
            if cell is None:
                continue
            if cell.problem:
                spared = self.options.keep_rest or name in _OF_THE_PERSON
                (cautions if spared else problems).append(cell.problem + ("; not stored" if spared else ""))
            if cell.caution:
                cautions.append(cell.caution)
            own = not site or site == row.site
            (row.cells if own else apart.setdefault(site, {}))[name] = cell
        cautions += self._without_unit(cells)
        if row.site is Site.NONE and Site.ARTERIAL in apart:
            row.site = Site.ARTERIAL  # named by a header such as PaO2
            row.cells.update(apart.pop(Site.ARTERIAL))
        elif row.site is Site.NONE and not row.cells.keys().isdisjoint(_GAS):
            row.site = Site.ARTERIAL
            cautions.append(ASSUMED_ARTERIAL)
        row.cautions = tuple(cautions)
        return self._parts(row, apart)

    def _without_unit(self, cells: list[str]) -> list[str]:
        texts = ((c.header, cells[c.index].strip()) for c in self.unread)
        return [f"{name} {shortened(text)}: the unit is not known; not stored" for name, text in texts if text]

    def _parts(self, row: Row, apart: dict[Site, dict[str, Cell]]) -> list[Row]:
        sites = sorted(apart)
        if not row.cells and sites:
            row.site = sites.pop(0)
            row.cells = apart[row.site]
        if not row.cells:
            return []
        return [row, *(Row(row.place, row.patient, row.time, s, row.sample, cells=apart[s]) for s in sites)]


def first_table(kind: str, data: bytes) -> Table:
    """The first readable table of a file."""
    return tables.read(data) if kind == "csv" else workbook.read(data)[0][0]
