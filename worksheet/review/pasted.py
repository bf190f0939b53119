"""A row copied from a spreadsheet, put into the fields of the form: nothing is stored before it was looked at."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from datetime import datetime
from zoneinfo import ZoneInfo

from worksheet.oxygen.quantities import CATALOGUE
from worksheet.oxygen.readings import Site
from worksheet.ward.display import Display

from . import moments, numbers
from .entry_form import read_value
from .slip import Slip, ValueField
from .slip_words import SITE_WORDS, names

LONGEST = 8000
_UNIT = re.compile(r"^(.*?)\s*[(\[]\s*([^)\]]*(?:\][^)\]]*)*)\s*[)\]]\s*$")
_ALSO = {  # how heads of columns are often written (common practice)
    "pao2": "po2", "paco2": "pco2", "hgb": "hb", "thb": "hb", "cthb": "hb", "haemoglobin": "hb", "hemoglobin": "hb",
    "sao2": "so2", "fo2hb": "o2hb", "fcohb": "cohb", "fmethb": "methb", "lac": "lactate", "hco3": "bicarbonate",
    "temp": "temperature", "pmean": "mean_airway_pressure", "o2flow": "oxygen_flow", "saturation": "spo2",
    "vo2": "vo2_measured",
}  # fmt: skip
_OTHERS = {"time": "time", "datetime": "time", "date": "time", "site": "site", "sample": "sample", "note": "note"}


@dataclass
class Filled:
    """What became of a pasted row."""

    taken: list[tuple[str, str]] = field(default_factory=list)  # column (or field), text
    unused: list[tuple[str, str]] = field(default_factory=list)  # column or text, why
    problem: str = ""
    by_position: bool = False


def fill(slip: Slip, text: str, display: Display, zone: ZoneInfo, now: datetime) -> Filled:
    """Put the cells of one row into the slip's fields; the fields stay open for a look."""
    lines = _lines(text)
    problem = _problem(text, lines)
    if problem:
        return Filled(problem=problem)
    heads = lines[0] if len(lines) == 2 else []
    result = Filled(by_position=not heads)
    columns = list(_named(heads)) if heads else list(_in_order(lines[-1]))
    for (head, target, unit), cell in zip(columns, lines[-1], strict=False):
        if cell:
            _put(slip, head, target, unit, cell, display, zone, result)
    slip.moment = moments.read(slip.date, slip.clock, slip.fold, zone, now)
    return result


def _lines(text: str) -> list[list[str]]:
    rows = [line for line in text.replace("\r\n", "\n").replace("\r", "\n").split("\n") if line.strip()]
    mark = "\t" if "\t" in text else ";"
    return [[cell.strip().strip('"').strip() for cell in row.split(mark)] for row in rows]


def _problem(text: str, lines: Sequence[Sequence[str]]) -> str:
    if not lines:
        return "Nothing was pasted."
    if len(text) > LONGEST:
        return f"The pasted text has {len(text)} characters; one row has at most {LONGEST}."
    if len(lines) > 2 or (len(lines) == 2 and not _is_head(lines[0])):
        return f"{len(lines)} rows were pasted, but a slip is one row, with or without its head. Import reads files."
    if len(lines) == 1 and _is_head(lines[0]):
        return "Only the head of a table was pasted; copy the row of values too."
    if len(lines[-1]) == 1:
        return "No columns were found: copy the cells in the spreadsheet, so that tabs stand between them."
    if len(lines) == 1 and len(lines[0]) > len(list(names())) + 1:
        return f"{len(lines[0])} cells without a head: copy the head of the table too, so that each finds its field."
    return ""


def _is_head(cells: Sequence[str]) -> bool:
    """A head has words of the catalogue and hardly a number."""
    known = sum(1 for _, target, _ in _named(cells) if target)
    values = sum(1 for cell in cells if numbers.parse(cell).value is not None)
    return known > values


def _named(heads: Sequence[str]) -> Iterator[tuple[str, str, str]]:
    """Head as written, the field it names (or nothing), the unit it names (or nothing)."""
    for head in heads:
        match = _UNIT.match(head)
        words, unit = (match.group(1), match.group(2)) if match else (head, "")
        folded = re.sub(r"[\W_]+", "", words.casefold())
        yield head, _WORDS.get(folded, ""), unit


def _in_order(cells: Sequence[str]) -> Iterator[tuple[str, str, str]]:
    """Without a head: the order of the form, after a time if the row begins with one."""
    order = list(names())
    if cells and _moment(cells[0], None) is not None:
        order.insert(0, "time")
    for name in order:
        yield (CATALOGUE[name].symbol if name in CATALOGUE else "time"), name, ""


def _words() -> dict[str, str]:
    found = dict(_OTHERS)
    for name in names():
        quantity = CATALOGUE[name]
        for words in (name, quantity.symbol, quantity.label):
            found.setdefault(re.sub(r"[\W_]+", "", words.casefold()), name)
    return {**_ALSO, **found}


_WORDS = _words()


def _put(
    slip: Slip, head: str, target: str, unit: str, cell: str, display: Display, zone: ZoneInfo, result: Filled
) -> None:
    if not target:
        result.unused.append((head, "no field of this name"))
    elif target == "time":
        _put_time(slip, head, cell, zone, result)
    elif target == "site":
        _put_site(slip, head, cell, result)
    elif target in {"sample", "note"}:
        setattr(slip, target, cell)
        result.taken.append((head, cell))
    else:
        _put_value(slip.fields[target], head, unit, cell, display, result)


def _put_value(field_: ValueField, head: str, unit: str, cell: str, display: Display, result: Filled) -> None:
    named = field_.quantity.unit_named(unit) if unit else field_.unit
    if named is None:
        result.unused.append((head, f"'{unit}' is not a unit of {field_.quantity.symbol}"))
        return
    fresh = read_value(field_.name, {field_.name: cell, f"{field_.name}_unit": named.ucum}, display)
    field_.unit, field_.text, field_.value = named, cell, fresh.value
    field_.comparator, field_.notices = fresh.comparator, fresh.notices
    result.taken.append((field_.quantity.symbol, f"{cell} {named.label}".strip()))


def _put_time(slip: Slip, head: str, cell: str, zone: ZoneInfo, result: Filled) -> None:
    moment = _moment(cell, zone)
    if moment is None:
        result.unused.append((head, f"'{cell[:40]}' is no date and time like 2026-03-29 06:35"))
        return
    day, clock = moment
    slip.date, slip.clock = day or slip.date, clock
    result.taken.append(("time", f"{slip.date} {clock}"))


def _moment(cell: str, zone: ZoneInfo | None) -> tuple[str, str] | None:
    """Date text (may be empty) and clock text of a cell, in the unit's zone where the cell has an offset."""
    if ":" in cell and moments.parse_clock(cell):
        return "", cell
    day, _, clock = cell.replace("T", " ").partition(" ")
    if moments.parse_date(day) and moments.parse_clock(clock):
        return day, clock
    try:
        moment = datetime.fromisoformat(cell)
    except ValueError:
        return None
    if moment.tzinfo is None or len(cell) < 16:
        return None
    local = moment.astimezone(zone) if zone else moment
    return f"{local:%Y-%m-%d}", f"{local:%H:%M}"


def _put_site(slip: Slip, head: str, cell: str, result: Filled) -> None:
    wanted = re.sub(r"[\W_]+", "_", cell.casefold()).strip("_")
    for site in Site:
        if wanted in {site.name.casefold(), re.sub(r"[\W_]+", "_", SITE_WORDS[site]).strip("_")}:
            slip.site = str(int(site))
            result.taken.append(("site", SITE_WORDS[site]))
            return
    result.unused.append((head, f"'{cell[:40]}' is no sampling site of the list"))
