"""Benchmarks: medians and ratios of one run on one machine, printed as one table at the end.

``python -m pytest tests/bench -m bench`` prints the table; ``WORKSHEET_BENCH_TABLE=FILE.md`` also writes it. A
benchmark states a ratio to something measured in the same run, so that the machine cancels.
"""

import os
import platform
import statistics
import time
from dataclasses import dataclass
from datetime import date

import pytest


@dataclass(frozen=True)
class Row:
    """One line of the table."""

    what: str
    seconds: float
    against: str
    reference: float
    goal: str
    rate: str

    @property
    def ratio(self) -> float:
        return self.seconds / self.reference


_rows: list[Row] = []


def median_seconds(function, *, repeats: int = 5, warm: bool = True) -> float:
    """Median wall time of a call [s]."""
    if warm:
        function()
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        function()
        times.append(time.perf_counter() - start)
    return statistics.median(times)


@pytest.fixture
def ratio_row():
    """Add a line to the table: ``ratio_row(what, seconds, against, reference_seconds, goal, rate)`` → the ratio."""

    def add(what: str, seconds: float, against: str, reference: float, goal: str = "", rate: str = "") -> float:
        row = Row(what, seconds, against, reference, goal, rate)
        _rows.append(row)
        return row.ratio

    return add


def pytest_collection_modifyitems(items):
    for item in items:
        if "tests/bench" in str(item.path):
            item.add_marker(pytest.mark.bench)


def _table() -> list[str]:
    lines = ["| what | median | against | ratio | goal | rate |", "| --- | ---: | --- | ---: | --- | --- |"]
    lines += [
        f"| {r.what} | {r.seconds * 1000:.4g} ms | {r.against} ({r.reference * 1000:.4g} ms) | {r.ratio:.3g} "
        f"| {r.goal} | {r.rate} |"
        for r in _rows
    ]
    return lines


def pytest_terminal_summary(terminalreporter):
    if not _rows:
        return
    import django
    import numpy

    head = (
        f"{date.today().isoformat()}, {os.cpu_count()} cores ({platform.machine()}), "
        f"Python {platform.python_version()}, Django {django.__version__}, numpy {numpy.__version__}"
    )
    terminalreporter.section("ratios")
    for line in (head, "", *_table()):
        terminalreporter.write_line(line)
    target = os.environ.get("WORKSHEET_BENCH_TABLE")
    if target:
        with open(target, "w", encoding="utf-8") as out:
            out.write("\n".join([head, "", *_table(), ""]))
