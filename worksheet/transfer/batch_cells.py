"""The batch file cell by cell: what its columns are, and what is wrong with a cell, in words."""

from __future__ import annotations

import csv
import io
import math
import re
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass, field
from datetime import datetime

import numpy as np
import pyarrow as pa

from worksheet.oxygen.quantities import MEASURED
from worksheet.oxygen.readings import Device, Event, Floats, FlowMethod, Ints, Site

NUMBERS = tuple(name for name in MEASURED if name != "oxygen_flow")
SITES = {"": Site.NONE, "arterial": Site.ARTERIAL, "mixed_venous": Site.MIXED_VENOUS,
         "central_venous": Site.CENTRAL_VENOUS, "venous": Site.VENOUS}  # fmt: skip
WORDS: dict[str, type[Device | FlowMethod | Event]] = {"device": Device, "flow_method": FlowMethod, "event": Event}
KNOWN = ("stay", "time", "site", *NUMBERS)
_DECIMAL_COMMA = re.compile(r"-?\d+,\d+")
MICROSECONDS = 3.6e9  # in an hour


@dataclass(frozen=True)
class Problem:
    """One reason why a file cannot be derived."""

    line: int
    column: str
    reason: str

    def __str__(self) -> str:
        column = f", column {self.column}" if self.column else ""
        return f"line {self.line}{column}: {self.reason}"


class BatchError(Exception):
    """The file cannot be derived; ``problems`` say why (the first of them), ``count`` how many there are."""

    def __init__(self, problems: Sequence[Problem], count: int | None = None) -> None:
        self.problems = list(problems)
        self.count = len(self.problems) if count is None else count
        super().__init__("; ".join(map(str, self.problems)))


@dataclass(frozen=True)
class Header:
    """The header row: names as given, and which columns are read."""

    text: bytes
    names: tuple[str, ...]

    @property
    def places(self) -> dict[str, int]:
        """Place of each known column."""
        return {name: i for i, name in enumerate(self.names) if name in KNOWN or name in WORDS}

    @property
    def unread(self) -> tuple[str, ...]:
        """Columns that pass through without being read."""
        return tuple(name for name in self.names if name not in KNOWN and name not in WORDS)

    @property
    def serial(self) -> bool:
        """Whether rows belong together: without stay and time each row stands alone."""
        return "stay" in self.names and "time" in self.names


@dataclass(frozen=True)
class Block:
    """Some records of a file: their bytes as given, and the line each starts at."""

    records: list[bytes]
    lines: Ints


@dataclass
class Columns:
    """The known columns of a block, as read; stay and time only where the file has them."""

    stay: pa.Array | None
    time: Floats | None
    words: dict[str, Ints]
    numbers: dict[str, Floats]


def code_of(name: str, text: str) -> int | None:
    """Code of a word; None for an unknown site. An unknown word in the other columns says nothing."""
    word = text.strip()
    if name == "site":
        return SITES.get(word)
    found = WORDS[name].__members__.get(word.upper())
    return int(found) if found is not None else 0


def cell_by_cell(header: Header, block: Block) -> Columns:
    """Cell by cell: slower by far, but it can say what is wrong."""
    places, problems = header.places, _Problems()
    numbers = {name: np.full(len(block.records), np.nan) for name in NUMBERS if name in places}
    words = {name: np.zeros(len(block.records), dtype=np.int64) for name in ("site", *WORDS) if name in places}
    stays, hours = [], np.zeros(len(block.records))
    for i, cells in enumerate(_rows(header, block, problems)):
        line = int(block.lines[i])
        if cells is None:
            continue
        for name, column in numbers.items():
            column[i] = _read(_number_of, cells[places[name]], line, name, problems)
        for name, codes in words.items():
            codes[i] = _word(name, cells[places[name]], line, problems)
        if "time" in places:
            hours[i] = _read(_hours_of, cells[places["time"]], line, "time", problems)
        if "stay" in places:
            stays.append(cells[places["stay"]].encode("utf-8", "surrogateescape"))
            if not stays[-1].strip():
                problems.add(line, "stay", "the stay is missing")
    if problems.count:
        raise BatchError(problems.kept, problems.count)
    return Columns(
        pa.array(stays, type=pa.binary()) if "stay" in places else None,
        hours if "time" in places else None,
        words,
        numbers,
    )


@dataclass
class _Problems:
    """The first problems, and how many there are."""

    kept: list[Problem] = field(default_factory=list)
    count: int = 0

    def add(self, line: int, column: str, reason: str) -> None:
        self.count += 1
        if len(self.kept) < 20:
            self.kept.append(Problem(line, column, reason))


def _rows(header: Header, block: Block, problems: _Problems) -> Iterator[list[str] | None]:
    wanted = len(header.names)
    for record, line in zip(block.records, block.lines.tolist(), strict=True):
        text = record.decode("utf-8", "surrogateescape")
        if "\x00" in text:
            problems.add(line, "", "the row holds a null character; is the file binary or UTF-16?")
            yield None
            continue
        try:
            cells = next(csv.reader(io.StringIO(text, newline=""), strict=True), [])
        except csv.Error as error:
            problems.add(line, "", f"the row cannot be read as CSV ({error})")
            yield None
            continue
        if len(cells) != wanted:
            problems.add(line, "", f"{len(cells)} cells, but the header row has {wanted}")
            yield None
            continue
        yield cells


def _read(parse: Callable[[str], float], text: str, line: int, column: str, problems: _Problems) -> float:
    try:
        return parse(text.strip())
    except ValueError as error:
        problems.add(line, column, str(error))
        return math.nan


def _number_of(text: str) -> float:
    if not text:
        return math.nan
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value) or "_" in text:
        hint = "; a decimal point is needed" if _DECIMAL_COMMA.fullmatch(text) else ""
        raise ValueError(f"'{text[:40]}' is not a number{hint}")
    return value


def _hours_of(text: str) -> float:
    if not text:
        raise ValueError("the time is missing")
    try:
        moment = datetime.fromisoformat(text)
    except ValueError:
        raise ValueError(f"'{text[:40]}' is not a time like 2025-03-01T05:40:00+01:00") from None
    if moment.tzinfo is None:
        raise ValueError(f"'{text[:40]}' has no offset from UTC (+01:00 or Z)")
    return round(moment.timestamp() * 1e6) / MICROSECONDS


def _word(name: str, text: str, line: int, problems: _Problems) -> int:
    code = code_of(name, text)
    if code is None:
        problems.add(line, name, f"'{text[:40]}' is none of {', '.join(word for word in SITES if word)}")
        return 0
    return code
