"""The batch file on its way in: header, records, numbers, times; every refusal names line, column and reason.

A block of the file is read by pyarrow; where that refuses or doubts anything, the same block is read cell by cell, to
say what is wrong and where, or to accept what is merely unusual (blanks around a number).
"""

from __future__ import annotations

import csv
import io
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np
import pyarrow as pa
from pyarrow import csv as arrow_csv

from worksheet.oxygen.quantities import CATALOGUE
from worksheet.oxygen.readings import Codes, Floats, Ints, Readings, Site

from .batch_cells import (
    KNOWN,
    MICROSECONDS,
    NUMBERS,
    WORDS,
    BatchError,
    Block,
    Columns,
    Header,
    Problem,
    cell_by_cell,
    code_of,
)

_GAS = ("ph", "pco2", "po2")
_BLOOD_SATURATIONS = ("so2", "o2hb", "so2_calculated")


@dataclass
class Table:
    """A block that was read: the readings, and what was assumed on the way."""

    readings: Readings
    site_assumed: np.ndarray
    site_unknown: np.ndarray
    stays: list[bytes] = field(default_factory=list)


def header_of(line: bytes, taken: Sequence[str]) -> Header:
    """The header row, or a :class:`BatchError`; ``taken`` are the names that the output needs for itself."""
    if line.startswith((b"\xff\xfe", b"\xfe\xff")) or b"\x00" in line:
        raise BatchError([Problem(1, "", "the file is UTF-16 or binary; save it as CSV in UTF-8")])
    text = line.removeprefix(b"\xef\xbb\xbf").rstrip(b"\r\n")
    if not text.strip():
        raise BatchError([Problem(1, "", "the file is empty: a header row with column names is needed")])
    try:
        cells = next(csv.reader([text.decode("utf-8", "surrogateescape")]), [])
    except csv.Error:
        raise BatchError([Problem(1, "", "this is no CSV file: the header row cannot be read as cells")]) from None
    names = tuple(cell.strip() for cell in cells)
    if not any(name in KNOWN for name in names):
        raise BatchError([Problem(1, "", _no_known_column(text.decode("utf-8", "replace"), names))])
    doubled = sorted({name for name in names if name and names.count(name) > 1})
    if doubled:
        raise BatchError([Problem(1, name, "this column is there twice") for name in doubled])
    clash = [name for name in names if name in taken]
    if clash:
        raise BatchError(
            [Problem(1, name, "the output has a column of this name; rename or drop it") for name in clash]
        )
    return Header(text, names)


def _no_known_column(text: str, names: Sequence[str]) -> str:
    for sign, word in ((";", "semicolons"), ("\t", "tabs"), ("|", "bars")):
        if sign in text and len(names) == 1:
            return f"the columns look separated by {word}; commas are needed"
    return f"no known column name in the header row '{text[:60]}': for example stay, time, site, ph, pco2, po2, hb, so2"


def records_of(data: bytes, first_line: int) -> Block:
    """Bytes as records with their line numbers; a record goes on over a line break inside quotes, blank ones go."""
    lines = data.split(b"\n")
    if lines and not lines[-1]:
        lines.pop()
    numbers = np.arange(first_line, first_line + len(lines))
    if b'"' in data and any(line.count(b'"') & 1 for line in lines):
        lines, numbers = _joined(lines, first_line)
    kept = [i for i, line in enumerate(lines) if not line.strip()]
    if kept:
        full = np.ones(len(lines), dtype=np.bool_)
        full[kept] = False
        lines, numbers = [line for line in lines if line.strip()], numbers[full]
    return Block([line[:-1] if line.endswith(b"\r") else line for line in lines], numbers)


def _joined(lines: list[bytes], first_line: int) -> tuple[list[bytes], Ints]:
    records: list[bytes] = []
    numbers: list[int] = []
    open_record = False
    for number, line in enumerate(lines, first_line):
        if open_record:
            records[-1] += b"\n" + line
        else:
            records.append(line)
            numbers.append(number)
        open_record ^= bool(line.count(b'"') & 1)
    return records, np.array(numbers, dtype=np.int64)


def cell_of(record: bytes, place: int) -> bytes:
    """One cell of a record, empty where there is none."""
    if b'"' not in record:
        cells = record.split(b",", place + 1)
        return cells[place] if place < len(cells) else b""
    try:
        row = next(csv.reader([record.decode("utf-8", "surrogateescape")], strict=False), [])
    except csv.Error:  # told with its line where the cells are read
        return b""
    return row[place].encode("utf-8", "surrogateescape") if place < len(row) else b""


def table_of(header: Header, block: Block) -> Table:
    """The readings of a block, or a :class:`BatchError` with every problem in it."""
    try:
        columns = _fast(header, block)
    except (pa.ArrowInvalid, _Doubt):
        columns = cell_by_cell(header, block)
    return _table(header, columns, len(block.records))


class _Doubt(Exception):
    """Something that only reading cell by cell can judge."""


def _fast(header: Header, block: Block) -> Columns:
    places = header.places
    names = [f"{i}" for i in range(len(header.names))]
    types = {names[place]: _arrow_type(name) for name, place in places.items()}
    data = b"\n".join(block.records) + b"\n"
    if b"\x00" in data or data.count(b'"') & 1:
        raise _Doubt
    table = arrow_csv.read_csv(
        io.BytesIO(data),
        read_options=arrow_csv.ReadOptions(column_names=names, use_threads=False, block_size=len(data) + 1),
        parse_options=arrow_csv.ParseOptions(newlines_in_values=b'"' in data),
        convert_options=arrow_csv.ConvertOptions(
            column_types=types, include_columns=[names[p] for p in places.values()], null_values=[""],
            strings_can_be_null=False, quoted_strings_can_be_null=True,
        ),
    )  # fmt: skip
    if table.num_rows != len(block.records):
        raise _Doubt
    column = {name: table[names[place]].combine_chunks() for name, place in places.items()}
    stay, time = column.get("stay"), column.get("time")
    if time is not None and time.null_count:
        raise _Doubt
    if stay is not None and any(not text.strip() for text in stay.unique().to_pylist()):
        raise _Doubt
    hours = None if time is None else time.cast(pa.int64()).to_numpy() / MICROSECONDS
    return Columns(
        stay,
        hours,
        {name: _coded(column[name], name) for name in ("site", *WORDS) if name in column},
        {name: _number(column[name]) for name in NUMBERS if name in column},
    )


def _arrow_type(name: str) -> pa.DataType:
    if name == "time":
        return pa.timestamp("us", tz="UTC")
    return pa.float64() if name in NUMBERS else pa.binary()


def _number(column: pa.Array) -> Floats:
    values = column.to_numpy(zero_copy_only=False)
    if int(np.count_nonzero(~np.isfinite(values))) != column.null_count:
        raise _Doubt
    return np.asarray(values, dtype=np.float64)


def _coded(column: pa.Array, name: str) -> Ints:
    encoded = column.dictionary_encode()
    codes = [code_of(name, text.decode("utf-8", "replace")) for text in encoded.dictionary.to_pylist()]
    if any(code is None for code in codes):
        raise _Doubt
    return np.array(codes, dtype=np.int64)[encoded.indices.to_numpy()] if codes else np.zeros(0, dtype=np.int64)


def _table(header: Header, columns: Columns, n: int) -> Table:
    values = {name: _canonical(name, column) for name, column in columns.numbers.items()}
    site = columns.words.get("site", np.zeros(n, dtype=np.int64))
    gas, blood = (_any(columns.numbers, names, n) for names in (_GAS, _BLOOD_SATURATIONS))
    assumed = (site == Site.NONE) & gas
    site = np.where(assumed, int(Site.ARTERIAL), site)
    stay, time, stays = np.arange(n), np.zeros(n), []
    if columns.stay is not None and columns.time is not None:
        encoded = columns.stay.dictionary_encode()
        stay, time = encoded.indices.to_numpy().astype(np.int64), columns.time
        stays = encoded.dictionary.to_pylist()
    elif columns.time is not None:
        time = columns.time
    codes: dict[str, Codes] = {name: columns.words[name].astype(np.int8) for name in WORDS if name in columns.words}
    readings = Readings.build(stay, time, site.astype(np.int8), values, **codes)
    return Table(readings, assumed, (site == Site.NONE) & blood, stays)


def _canonical(name: str, column: Floats) -> Floats:
    """From the file's unit; a FiO2 of 1 or less is a fraction, by the contract of the batch file."""
    canonical = CATALOGUE[name].unit.to_canonical(column)
    return np.where(column <= 1.0, column, canonical) if name == "fio2" else canonical


def _any(numbers: dict[str, Floats], names: Sequence[str], n: int) -> np.ndarray:
    found = np.zeros(n, dtype=np.bool_)
    for name in names:
        if name in numbers:
            found |= ~np.isnan(numbers[name])
    return found
