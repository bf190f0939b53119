"""Spreadsheets to tables: all sheets with a readable header, merged identifiers, dates as they were meant."""

from __future__ import annotations

import io
import os
import re
import warnings
import zipfile
import zlib
from datetime import date, datetime, time
from typing import Any

os.environ.setdefault("OPENPYXL_LXML", "False")  # the guarded standard parser, whatever else is installed

import openpyxl
from defusedxml.common import DefusedXmlException
from openpyxl.utils.cell import coordinate_to_tuple
from openpyxl.utils.exceptions import InvalidFileException

from .limits import MAX_COLUMNS, MAX_ROWS, check_zip
from .names import column_named
from .rows import Refused
from .table import HEADER_WITHIN, Table, known_names, tidy_header

_MERGED = re.compile(rb'<(?:\w+:)?mergeCell\s[^>]{0,80}?ref="([A-Z]{1,3}\d{1,7}):([A-Z]{1,3}\d{1,7})"')
_FILL_DOWN = {"stay", "date", "time", "site"}
Rows = list[tuple[int, list[str]]]
_DAMAGED = (  # what the libraries raise on damaged files
    InvalidFileException, SyntaxError, zipfile.BadZipFile, KeyError, ValueError, TypeError, IndexError, AttributeError,
    OSError, EOFError, OverflowError, zipfile.LargeZipFile, RuntimeError, NotImplementedError, zlib.error,
)  # fmt: skip


def read(data: bytes) -> tuple[list[Table], list[str]]:
    """The tables in a spreadsheet, and notes on what was left out."""
    check_zip(data)
    if not openpyxl.DEFUSEDXML:
        raise Refused("Spreadsheets are not read on this machine: the guard against hostile XML is missing.")
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # openpyxl warns about styles and extensions that do not matter here
            book = openpyxl.load_workbook(io.BytesIO(data), read_only=True, data_only=True, keep_links=False)
            try:
                sheets = [(sheet.title, _texts(sheet), _merged(data, sheet)) for sheet in book.worksheets]
            finally:
                book.close()
    except Refused:
        raise
    except DefusedXmlException:
        raise Refused("The spreadsheet holds XML entities; such a file is not read.") from None
    except _DAMAGED as error:
        raise Refused(f"The spreadsheet is damaged and cannot be read ({type(error).__name__}).") from None
    return _tables(sheets)


def _tables(sheets: list[tuple[str, Rows, list[Any]]]) -> tuple[list[Table], list[str]]:
    found, notes = [], []
    for title, rows, merged in sheets:
        table = _table(title, rows, merged)
        if table is not None:
            found.append(table)
        elif rows:
            notes.append(f"Sheet '{title}' has no header row that can be read; it is left out.")
    if not found:
        raise Refused(
            "No sheet has a header row that can be read: expected are column names such as stay, time, ph, po2."
        )
    return found, notes


def _texts(sheet: Any) -> Rows:
    """All filled rows of a sheet as texts, with their numbers."""
    out: Rows = []
    for cells in sheet.iter_rows(max_col=MAX_COLUMNS):
        texts = [_text(cell) for cell in cells]
        if any(texts):
            number = next((c.row for c in cells if getattr(c, "row", None)), len(out) + 1)
            out.append((number, texts))
        if len(out) > MAX_ROWS:
            raise Refused(f"Sheet '{sheet.title}' has more than {MAX_ROWS:,} rows; split it by month or stay.")
    return out


def _text(cell: Any) -> str:
    """A cell as a person sees it: dates as ISO text, percent formats in percent, whole numbers without a point."""
    value = cell.value
    if value is None:
        return ""
    if isinstance(value, bool):
        return str(value)
    if isinstance(value, datetime):
        return value.isoformat(sep=" ", timespec="seconds")
    if isinstance(value, (date, time)):
        return value.isoformat()
    if isinstance(value, (int, float)):
        percent = "%" in (cell.number_format or "")
        return f"{value * 100:.10g} %" if percent else f"{value:.15g}"
    return str(value).replace("\x00", "")


def _merged(data: bytes, sheet: Any) -> list[tuple[int, int, int, int]]:
    """Merged ranges of a sheet as first row, first column, last row, last column (1-based)."""
    path = getattr(sheet, "_worksheet_path", "")
    with zipfile.ZipFile(io.BytesIO(data)) as archive:
        if path not in archive.namelist():
            return []
        found = _MERGED.findall(archive.read(path)[-2_000_000:])
    return [(*coordinate_to_tuple(a.decode()), *coordinate_to_tuple(b.decode())) for a, b in found[:20_000]]


def _table(title: str, rows: Rows, merged: list[tuple[int, int, int, int]]) -> Table | None:
    best = max(range(min(HEADER_WITHIN, len(rows))), key=lambda i: known_names(rows[i][1]), default=-1)
    if best < 0 or known_names(rows[best][1]) < 2:
        return None
    header = tidy_header(rows[best][1])
    width = len(header)
    records = [(line, (cells + [""] * width)[:width]) for line, cells in rows[best + 1 :]]
    table = Table(header, [r for r in records if any(r[1])], rows[best][0], title)
    filled = _fill_down(table, merged)
    if filled:
        table.notes.append(f"{filled} merged cells of identifying columns were filled down; merged values were not.")
    return table


def _fill_down(table: Table, merged: list[tuple[int, int, int, int]]) -> int:
    """Merged cells hold their text only in the first row; identifiers and times are meant for all, values are not."""
    by_line = dict(table.records)
    filled = 0
    for top, left, bottom, right in merged:
        inside = left == right and left <= len(table.header) and bottom - top < 5_000
        if not inside or top not in by_line or column_named(table.header[left - 1])[0] not in _FILL_DOWN:
            continue
        for line in range(top + 1, bottom + 1):
            if line in by_line and not by_line[line][left - 1]:
                by_line[line][left - 1] = by_line[top][left - 1]
                filled += 1
    return filled
