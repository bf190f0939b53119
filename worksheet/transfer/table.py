"""Text tables: encoding, delimiter, header row, and every line accounted for."""

from __future__ import annotations

import csv
import re
from collections import Counter
from dataclasses import dataclass, field
from itertools import islice
from sys import intern

from .cells import shortened
from .limits import MAX_CELL, MAX_COLUMNS, MAX_ROWS
from .names import column_named
from .rows import Refused

_DELIMITERS = {",": "comma", ";": "semicolon", "\t": "tab", "|": "bar"}
_BOMS = ((b"\xef\xbb\xbf", "utf-8-sig"), (b"\xff\xfe", "utf-16"), (b"\xfe\xff", "utf-16"))
_FOOTER = re.compile(
    r"^(total|sum|summe|mean|average|mittelwert|n\s*=|printed|exported|gedruckt|page|seite|source|\*|#)", re.I
)
HEADER_WITHIN = 30


@dataclass
class Table:
    """One table: its header and the records below it, each with its line in the file."""

    header: list[str]
    records: list[tuple[int, list[str]]]
    header_line: int = 1
    sheet: str = ""
    broken: dict[int, str] = field(default_factory=dict)  # line -> why it cannot be read
    skipped: list[tuple[int, list[str]]] = field(default_factory=list)  # footers and repeated headers
    notes: list[str] = field(default_factory=list)

    def place(self, line: int) -> str:
        """How a person finds a line again."""
        return f"sheet '{self.sheet}', row {line}" if self.sheet else f"row {line}"


def decode(data: bytes) -> tuple[str, str]:
    """The text of a file and the encoding it was in: byte-order mark, UTF-8, UTF-16 by its zeros, else Windows-1252."""
    for mark, name in _BOMS:
        if data.startswith(mark):
            return _decoded(data, name)
    if data[:2000].count(0) > len(data[:2000]) // 4:
        low = data[1:2000:2].count(0) > data[0:2000:2].count(0)
        return _decoded(data, "utf-16-le" if low else "utf-16-be")
    try:
        return _without_nul(data.decode("utf-8")), "UTF-8"
    except UnicodeDecodeError:
        return _decoded(data, "cp1252")


def _decoded(data: bytes, name: str) -> tuple[str, str]:
    try:
        text = data.decode(name)
    except UnicodeDecodeError as error:
        raise Refused(f"The text cannot be decoded as {name} (byte {error.start}); save it as UTF-8.") from None
    return _without_nul(text.lstrip("\ufeff")), {"cp1252": "Windows-1252", "utf-8-sig": "UTF-8"}.get(name, name.upper())


def _without_nul(text: str) -> str:
    at = text.find("\x00")
    if at >= 0:
        raise Refused(f"Line {text.count(chr(10), 0, at) + 1} contains NUL bytes: the file is damaged or is not text.")
    return text


def read(data: bytes) -> Table:
    """The table in the bytes of a CSV file."""
    text, encoding = decode(data)
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    while lines and not lines[-1].strip():
        lines.pop()
    if len(lines) > MAX_ROWS + HEADER_WITHIN:
        raise Refused(
            f"The file has {len(lines):,} lines; at most {MAX_ROWS:,} rows are read at once. Split it by month or stay."
        )
    delimiter, at = _find_header(lines)
    header = _split([lines[at]], delimiter)[0]
    if len(header) > MAX_COLUMNS:
        raise Refused(f"The header has {len(header)} columns; at most {MAX_COLUMNS} are read.")
    table = Table(tidy_header(header), [], at + 1)
    _records(table, lines, at + 1, delimiter)
    if encoding != "UTF-8":
        table.notes.append(f"The text is in {encoding}.")
    if delimiter != ",":
        table.notes.append(f"Columns are separated by a {_DELIMITERS[delimiter]}.")
    return table


def tidy_header(cells: list[str]) -> list[str]:
    """Header texts without blanks and line breaks; empty and doubled ones numbered."""
    names = [" ".join(c.split()) for c in cells]
    while names and not names[-1]:
        names.pop()
    seen: Counter[str] = Counter()
    for i, name in enumerate(names):
        seen[name] += 1
        if not name or seen[name] > 1:
            names[i] = f"{name or 'column'} #{i + 1}"
    return names


def known_names(cells: list[str]) -> int:
    """How many cells of a row name a column that can be read."""
    return len({column_named(c)[0] for c in cells if c and len(c) <= 80} - {""})


def _find_header(lines: list[str]) -> tuple[str, int]:
    """Delimiter and line index of the header: the first line that names at least two readable columns."""
    best = (0, ",", 0)
    for index, line in enumerate(islice(lines, HEADER_WITHIN)):
        for delimiter in _DELIMITERS:
            if delimiter in line[:20_000]:
                named = known_names(_split([line[:20_000]], delimiter)[0])
                if named > best[0]:
                    best = (named, delimiter, index)
        if best[0] >= 2 and index > best[2]:
            break
    if best[0] >= 2:
        return best[1], best[2]
    first = next((line for line in lines if line.strip()), "")
    raise Refused(
        f"No header row was found. The first line reads '{shortened(first, 60)}'. Expected are column names such "
        "as stay, time, ph, po2, separated by comma, semicolon, tab or bar."
    )


def _split(lines: list[str], delimiter: str) -> list[list[str]]:
    try:
        return list(csv.reader(lines, delimiter=delimiter, skipinitialspace=True))
    except csv.Error:
        return [line.split(delimiter) for line in lines]


def _records(table: Table, lines: list[str], start: int, delimiter: str) -> None:
    """Every line below the header: a record, a broken line with its reason, or a skipped one."""
    width = len(table.header)
    plain = '"' not in "".join(lines[start : start + 50])
    reader = csv.reader((line + "\n" for line in lines[start:]), delimiter=delimiter, skipinitialspace=not plain)
    previous = 0
    while True:
        try:
            cells = next(reader, None)
        except csv.Error:
            line = start + reader.line_num
            table.broken[line] = f"a cell has more than {csv.field_size_limit():,} characters"
            previous = reader.line_num
            continue
        if cells is None:
            return
        first, last, previous = previous, reader.line_num, reader.line_num
        if last - first > 1:
            _open_quote(table, lines, start + first, start + last, delimiter, cells)
        elif len(cells) == width:
            if "".join(cells).strip():
                table.records.append((start + last, [intern(c) for c in cells]))  # gas values repeat
        else:
            _odd(table, start + last, cells, width)


def _open_quote(table: Table, lines: list[str], first: int, last: int, delimiter: str, cells: list[str]) -> None:
    """A record over several lines: a comment with line breaks, or a quotation mark that was never closed."""
    if len(cells) == len(table.header) and last - first <= 20:
        table.records.append((first + 1, [" ".join(c.split("\n")) for c in cells]))
        return
    table.broken[first + 1] = "a quotation mark is opened and not closed"
    for number in range(first + 1, last):
        cells = next(csv.reader([lines[number]], delimiter=delimiter, quoting=csv.QUOTE_NONE), [])
        _odd(table, number + 1, cells, len(table.header))


def _odd(table: Table, line: int, cells: list[str], width: int) -> None:
    """A line that may have another number of cells than the header."""
    while len(cells) > width and not cells[-1].strip():
        cells = cells[:-1]
    filled = [c for c in cells if c.strip()]
    if not filled:
        return
    if len(cells) == width:
        table.records.append((line, cells))
    elif len(cells) == 1 or (len(filled) <= 2 and _FOOTER.match(filled[0].strip())):
        table.skipped.append((line, cells))
    else:
        table.broken[line] = f"it has {len(cells)} cells, the header has {width}"


def is_footer(cells: list[str], header: list[str]) -> bool:
    """A total, a print note, or the header again."""
    filled = [c for c in cells if c.strip()]
    return bool(filled) and (
        cells[: len(header)] == header or bool(_FOOTER.match(filled[0].strip()) and len(filled) <= 2)
    )


def oversized(cells: list[str]) -> str:
    """Why a record's cells are too long to be values; empty if they are not."""
    worst = max((len(c) for c in cells), default=0)
    return f"a cell has {worst:,} characters; at most {MAX_CELL:,} are read" if worst > MAX_CELL else ""
