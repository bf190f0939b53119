"""The batch command: a CSV file in, the same file with every derived column out; no database.

The file streams through in blocks of whole stays, two processes at a time, so that memory does not grow with it. A file
whose stays are not together is found out on the way, brought into order through a temporary file, and comes out in its
own order. Nothing is left behind on an error: the output is written beside its place and moved there at the end.
"""

from __future__ import annotations

import argparse
import os
import sys
import tempfile
import time
from collections import Counter, deque
from collections.abc import Iterable, Iterator
from concurrent.futures import BrokenExecutor, Executor, Future, ProcessPoolExecutor
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass, field
from hashlib import blake2b
from importlib import import_module
from multiprocessing import get_context
from signal import SIGINT, SIGTERM, default_int_handler, signal
from threading import current_thread, main_thread
from typing import BinaryIO

from .batch_cells import BatchError, Header, Problem
from .batch_files import reading, writing
from .batch_read import header_of
from .batch_rows import OUTPUT, TYPES, Derivation, derive_block, summary
from .batch_split import Piece, pieces, regrouped

_SHOWN = 20  # problems that are listed
_PARALLEL_FROM = 6_000_000  # bytes: below, starting a second process costs more than it saves
_ABOUT = """\
Derive oxygen content, delivery, extraction, gas exchange, uncertainty, change ledger and findings for every row of a
CSV file, without a database. Each arterial entry gives an output row, with the values known at its time: carried
forward and paired with the nearest venous sample of its stay. Venous rows are kept with what can be derived for them.
Rows without a sample (settings, haemoglobin, flow) are read to be carried forward and give no row of their own."""
_MORE = """\
example:
  python manage.py derive gases.csv --output derived.csv
  cat gases.csv | python manage.py derive - --output - > derived.csv
  python manage.py derive study.parquet --output derived.parquet

Columns that are read (any order, any of them; an empty cell is "not measured"): stay, time (ISO 8601 with offset), site
(arterial, mixed_venous, central_venous, venous), and the measured quantities in the units of the methods page: mmHg,
g/dL, %, mmol/L, cm[H2O], L/min, mL/min, cm, kg, °C. Without stay and time each row stands alone. Other columns pass
through untouched; device, flow_method and event are read where they hold this program's words. FiO2 of 1 or less is a
fraction; a saturation of 1 or less is a finding and is not used. Impossible values are not used and are named in
findings. A row with a gas and no site is taken as arterial, with a finding.

Numbers have six significant digits. The last column, basis, says what the numbers of a row rest on: assumptions, and
carried values with their age in minutes. Exit code 0: done; 2: the file cannot be derived, and why."""


def add_arguments(parser: argparse.ArgumentParser) -> None:
    """The arguments, also for the management command."""
    parser.add_argument(
        "input", metavar="INPUT.csv", help="the file to derive (.parquet: Parquet), - for standard input"
    )
    parser.add_argument(
        "--output",
        required=True,
        metavar="OUTPUT.csv",
        help="where to write (.parquet: Parquet), - for standard output",
    )
    parser.add_argument(
        "--dask", default="", metavar="ADDRESS", help="derive on a Dask cluster, for example tcp://host:8786"
    )
    parser.add_argument("--processes", type=int, default=2, metavar="N", help="how many processes (default 2)")


def main(argv: list[str]) -> int:
    """Run the command; returns the exit code."""
    parser = argparse.ArgumentParser(
        prog="manage.py derive", description=_ABOUT, epilog=_MORE, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    add_arguments(parser)
    options = parser.parse_args(argv)
    return run(options.input, options.output, max(1, options.processes), options.dask)


def run(source: str, target: str, processes: int = 2, dask: str = "") -> int:
    """Derive one file into another; returns the exit code and says on standard error what was done."""
    begun = time.monotonic()
    try:
        with _stopping_clears_up():
            tally = _derive_file(source, target, processes, dask)
    except BatchError as error:
        for problem in error.problems[:_SHOWN]:
            _say(f"{_name(source)}: {problem}")
        if error.count > _SHOWN:
            _say(f"{_name(source)}: and {error.count - _SHOWN} more")
        _say(f"derive: {error.count} problem{'s'[: error.count != 1]}, nothing written")
        return 2
    except OSError as error:
        _say(f"derive: {error.filename or _name(source)}: {error.strerror or error}; nothing written")
        return 2
    except BrokenExecutor:
        _say("derive: a worker process died, perhaps for want of memory; nothing written")
        return 2
    except KeyboardInterrupt:
        _say("derive: stopped; nothing written")
        return 130
    _say(tally.sentence(target, time.monotonic() - begun))
    return 0


@contextmanager
def _stopping_clears_up() -> Iterator[None]:
    """A request to stop ends like an interrupt, so that nothing half-written stays behind."""
    if current_thread() is not main_thread():
        yield
        return
    before = signal(SIGTERM, default_int_handler)
    try:
        yield
    finally:
        signal(SIGTERM, before)


@contextmanager
def _held() -> Iterator[None]:
    """Hold a request to stop while a worker is started: one that is left half-started would complain on its own."""
    if current_thread() is not main_thread():
        yield
        return
    asked: list[int] = []
    before = {number: signal(number, lambda got, _: asked.append(got)) for number in (SIGINT, SIGTERM)}
    try:
        yield
    finally:
        for number, handler in before.items():
            signal(number, handler)
    if asked:
        raise KeyboardInterrupt


@dataclass
class Tally:
    """What was done, to be said in a line."""

    read: int = 0
    written: int = 0
    stays: int = 0
    refused: Counter[str] = field(default_factory=Counter)

    def sentence(self, target: str, seconds: float) -> str:
        """One line for the person who waits."""
        to = "standard output" if target == "-" else target
        rows = "1 row" if self.read == 1 else f"{self.read:,} rows"
        text = f"derive: {rows} read, {self.written:,} written to {to} in {seconds:.1f} s"
        return text + (f"; impossible values not used: {summary(self.refused)}" if self.refused else "")


def _derive_file(source: str, target: str, processes: int, dask: str) -> Tally:
    if source != "-" and target != "-" and os.path.abspath(source) == os.path.abspath(target):
        raise BatchError([Problem(1, "", "input and output are the same file")])
    with ExitStack() as stack:
        file = stack.enter_context(reading(source))
        data = file.data
        out = stack.enter_context(writing(target, TYPES, file))
        header = header_of(data.readline(), OUTPUT)
        body = data.tell()
        head = header.text + b"," + ",".join(OUTPUT).encode() + b"\n"
        out.write(head)
        pool = stack.enter_context(_cluster(dask) if dask else _pool(processes, data))
        tally = _grouped(header, data, out, pool)
        if tally is None:
            data.seek(body)
            out.truncate(out.seek(len(head)))
            tally = _scattered(header, data, out, pool)
    return tally


def _grouped(header: Header, data: BinaryIO, out: BinaryIO, pool: Executor | None) -> Tally | None:
    """Derive a file whose stays are together; None as soon as one is found to come again."""
    tally, seen, problems = Tally(), set[bytes](), _Problems()
    progress = _Progress()
    for result in _in_order(pool, header, pieces(data, header)):
        if isinstance(result, BatchError):
            problems.add(result)
            continue
        marks = {blake2b(stay, digest_size=8).digest() for stay in result.stays}
        if not seen.isdisjoint(marks):
            return None
        seen |= marks
        _count(tally, result)
        progress.show(tally.read)
        if not problems.count and result.lines:
            out.write(b"\n".join(result.lines) + b"\n")
    progress.done()
    problems.check()
    return tally


def _scattered(header: Header, data: BinaryIO, out: BinaryIO, pool: Executor | None) -> Tally:
    """Derive a file whose stays are not together: blocks of whole stays, then back into the order of the file."""
    tally, problems, progress = Tally(), _Problems(), _Progress()
    with tempfile.TemporaryFile() as spill:
        plan = regrouped(data, header)
        for piece, result in zip(plan.order(), _in_order(pool, header, plan.pieces()), strict=True):
            if isinstance(result, BatchError):
                problems.add(result)
                continue
            _count(tally, result)
            progress.show(tally.read)
            plan.keep(piece, result.kept, result.lines, spill)
        progress.done()
        problems.check()
        plan.write(spill, out)
    return tally


def _count(tally: Tally, result: Derivation) -> None:
    tally.read += result.read
    tally.written += len(result.lines)
    tally.refused += result.refused


class _Problems:
    """Problems of all blocks: a file is read to its end so that all of them are known at once."""

    def __init__(self) -> None:
        self.kept: list[Problem] = []
        self.count = 0

    def add(self, error: BatchError) -> None:
        self.kept += error.problems[: _SHOWN - len(self.kept)]
        self.count += error.count

    def check(self) -> None:
        if self.count:
            raise BatchError(sorted(self.kept, key=lambda problem: problem.line), self.count)


def attempt(header: Header, piece: Piece) -> Derivation | BatchError:
    """Derive a piece, in this process or another."""
    try:
        return derive_block(header, piece.block())
    except BatchError as error:
        return error


def _in_order(pool: Executor | None, header: Header, work: Iterable[Piece]) -> Iterator[Derivation | BatchError]:
    """Results in the order of the pieces; only a few are on their way at a time, so memory stays bounded."""
    if pool is None:
        yield from (attempt(header, piece) for piece in work)
        return
    waiting: deque[Future[Derivation | BatchError]] = deque()
    for piece in work:
        with _held():
            waiting.append(pool.submit(attempt, header, piece))
        if len(waiting) > 4:
            yield waiting.popleft().result()
    while waiting:
        yield waiting.popleft().result()


@contextmanager
def _cluster(address: str) -> Iterator[Executor]:
    """Workers of a Dask cluster, in place of processes of this machine."""
    try:
        distributed = import_module("distributed")
    except ImportError:
        raise OSError(
            None, "Dask is not installed: pip install 'oxygen-delivery-worksheet[cluster]'", "--dask"
        ) from None
    with distributed.Client(address, timeout=10) as client:
        yield client.get_executor(pure=False)


@contextmanager
def _pool(processes: int, data: BinaryIO) -> Iterator[Executor | None]:
    if processes < 2 or os.fstat(data.fileno()).st_size < _PARALLEL_FROM:
        yield None
        return
    with ProcessPoolExecutor(processes, mp_context=get_context("spawn")) as pool:
        yield pool


class _Progress:
    """Rows so far, on a terminal, once it takes more than a second."""

    def __init__(self) -> None:
        self.begun = self.last = time.monotonic()
        self.shown = False

    def show(self, rows: int) -> None:
        now = time.monotonic()
        if sys.stderr.isatty() and now - self.begun > 1.0 and now - self.last > 0.2:
            sys.stderr.write(f"\r{rows:,} rows, {rows / (now - self.begun):,.0f} a second ")
            sys.stderr.flush()
            self.last, self.shown = now, True

    def done(self) -> None:
        if self.shown:
            sys.stderr.write("\r\x1b[K")


def _name(source: str) -> str:
    return "standard input" if source == "-" else source


def _say(text: str) -> None:
    print(text, file=sys.stderr)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
