"""A batch file in pieces of whole stays: as they come where stays are together, else brought together first."""

from __future__ import annotations

import mmap
from collections.abc import Iterator
from dataclasses import dataclass
from typing import BinaryIO

import numpy as np

from worksheet.oxygen.readings import Ints

from .batch_cells import Block, Header
from .batch_read import cell_of, records_of

PIECE = 3_000_000  # bytes: some 20,000 rows


@dataclass(frozen=True)
class Piece:
    """Some records as bytes: cheap to send to another process."""

    data: bytes
    first_line: int = 0
    records: tuple[bytes, ...] = ()
    lines: tuple[int, ...] = ()

    def block(self) -> Block:
        """The records with their line numbers."""
        if self.records:
            return Block(list(self.records), np.array(self.lines, dtype=np.int64))
        return records_of(self.data, self.first_line)


def pieces(data: BinaryIO, header: Header, size: int = PIECE) -> Iterator[Piece]:
    """Pieces that end where a stay ends. A longer stay makes a longer piece."""
    place = header.names.index("stay") if header.serial else None
    rest, line = b"", 2
    while True:
        more = data.read(size)
        whole = rest + more
        cut = _cut(whole, place, len(rest)) if more else len(whole)
        if cut:
            yield Piece(whole[:cut], line)
            line += whole.count(b"\n", 0, cut)
        rest = whole[cut:]
        if not more:
            return


def _cut(data: bytes, place: int | None, one_stay: int) -> int:
    """Where to cut: after the last whole record of the last stay but one; 0 if there is only one stay.

    The first ``one_stay`` bytes hold a single stay, as the last cut left them, and need not be looked at again.
    """
    end = _record_end(data, len(data))
    if place is None or end == 0:
        return end
    start = _record_start(data, end)
    stay = cell_of(data[start : end - 1], place)
    while start > 0:
        before = _record_start(data, start)
        if cell_of(data[before : start - 1], place) != stay:
            return start
        if before < one_stay:
            return 0
        start = before
    return 0


def _record_end(data: bytes, upto: int) -> int:
    """End of the last whole record: a line end with every quote before it closed."""
    end = data.rfind(b"\n", 0, upto) + 1
    while end and data.count(b'"', 0, end) & 1:
        end = data.rfind(b"\n", 0, end - 1) + 1
    return end


def _record_start(data: bytes, end: int) -> int:
    """Start of the record that ends there: a line start with all its quotes in pairs."""
    start = data.rfind(b"\n", 0, end - 1) + 1
    while start and data.count(b'"', start, end) & 1:
        start = data.rfind(b"\n", 0, start - 1) + 1
    return start


class Regrouped:
    """A file on disk, its records known by place, taken out stay by stay and put back in order."""

    def __init__(self, data: BinaryIO, header: Header) -> None:
        begin = data.tell()
        self._map = mmap.mmap(data.fileno(), 0, access=mmap.ACCESS_READ)
        block = records_of(self._map[begin:], 2)
        self._records, self._lines = block.records, block.lines
        place = header.names.index("stay")
        codes: dict[bytes, int] = {}
        stays = np.fromiter(
            (codes.setdefault(cell_of(record, place), len(codes)) for record in block.records), dtype=np.int64
        )
        self._sorted = np.argsort(stays, kind="stable")
        self._cuts = _stay_cuts(stays[self._sorted], np.array([len(record) for record in block.records])[self._sorted])
        self._at = np.full(len(stays), -1, dtype=np.int64)
        self._length = np.zeros(len(stays), dtype=np.int64)
        self._end = 0

    def order(self) -> Iterator[Ints]:
        """Record numbers of each piece."""
        yield from np.split(self._sorted, self._cuts)

    def pieces(self) -> Iterator[Piece]:
        """The pieces themselves."""
        for rows in self.order():
            yield Piece(b"", 0, tuple(self._records[i] for i in rows.tolist()), tuple(self._lines[rows].tolist()))

    def keep(self, rows: Ints, kept: Ints, lines: list[bytes], spill: BinaryIO) -> None:
        """Put the output rows of a piece aside."""
        sizes = np.array([len(line) + 1 for line in lines], dtype=np.int64)
        records = rows[kept]
        self._length[records] = sizes
        self._at[records] = self._end + np.cumsum(sizes) - sizes
        self._end += int(sizes.sum())
        spill.write(b"".join(line + b"\n" for line in lines))

    def write(self, spill: BinaryIO, out: BinaryIO) -> None:
        """Write what was put aside in the order of the file."""
        spill.flush()
        if not self._end:
            return
        with mmap.mmap(spill.fileno(), 0, access=mmap.ACCESS_READ) as aside:
            for at, length in zip(self._at.tolist(), self._length.tolist(), strict=True):
                if at >= 0:
                    out.write(aside[at : at + length])


def _stay_cuts(stays: Ints, sizes: Ints) -> Ints:
    """Positions at which a piece begins: the first stay after so many bytes."""
    fresh = np.flatnonzero(np.diff(stays)) + 1
    piece = np.cumsum(sizes)[fresh - 1] // PIECE
    return fresh[np.flatnonzero(np.diff(piece, prepend=0) > 0)]


def regrouped(data: BinaryIO, header: Header) -> Regrouped:
    """The file, ready to be taken out stay by stay."""
    return Regrouped(data, header)
