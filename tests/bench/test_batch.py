"""The batch command as a whole process, against parsing the same file alone."""

import csv
import os
import resource
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from .conftest import median_seconds

MANAGE = Path(__file__).parents[2] / "manage.py"
HEAD = "stay,time,site,ph,pco2,po2,hb,so2,cohb,methb,lactate,temperature,fio2,peep,spo2,cardiac_output,height,weight"
_ROW = (
    "S{0},2025-03-{1:02d}T{2:02d}:{3:02d}:00+01:00,{4},{5:.2f},{6:.0f},{7:.0f},{8:.1f},{9:.1f},{10:.1f},{11:.1f},{12:.1f},"
    "{13:.1f},{14:.0f},8,{15:.0f},{16:.1f},175,80\n"
)


def write(path, rows):
    """Invented stays of 40 rows, arterial and mixed venous in turn, every cell filled."""
    random = np.random.default_rng(1)
    low = np.array([7.3, 35, 60, 8, 90, 1, 0.5, 1, 36, 40, 90, 4])
    high = np.array([7.45, 50, 180, 13, 99, 2, 1, 5, 39, 60, 98, 7])
    values = random.uniform(low, high, (rows, 12))
    values[1::2, 2] = random.uniform(33, 43, rows // 2)
    values[1::2, 4] = random.uniform(60, 76, rows // 2)
    with open(path, "w") as out:
        out.write(HEAD + "\n")
        for i, row in enumerate(values.tolist()):
            stay, j = divmod(i, 40)
            venous = j % 2
            out.write(_ROW.format(stay, 1 + j // 20, j % 20, 5 * venous, ("arterial", "mixed_venous")[venous], *row))


def process(source, target):
    subprocess.run(
        [sys.executable, str(MANAGE), "derive", str(source), "--output", str(target)],
        check=True,
        stderr=subprocess.DEVNULL,
    )


def parse(path):
    with open(path, newline="") as file:
        return sum(1 for _ in csv.reader(file))


@pytest.mark.parametrize(("rows", "goal"), [(10, 0.8), (20_000, 1.5)])
def test_start_up_and_a_small_file(tmp_path, ratio_row, rows, goal):
    source, target = tmp_path / "in.csv", tmp_path / "out.csv"
    write(source, rows)
    bare = median_seconds(lambda: subprocess.run([sys.executable, "-c", "import numpy, pyarrow.compute"], check=True))
    seconds = median_seconds(lambda: process(source, target), repeats=5)
    what, floor = f"derive, whole process, {rows:,} rows", "starting Python with numpy and pyarrow"
    ratio_row(what, seconds, floor, bare, f"≤ {goal} s", f"{rows / seconds:,.0f} rows/s")
    assert seconds <= goal


@pytest.mark.slow
def test_a_million_rows_stream_in_bounded_memory(tmp_path, ratio_row):
    rows = int(os.environ.get("WORKSHEET_BENCH_ROWS", "1000000"))
    source, target = tmp_path / "in.csv", tmp_path / "out.csv"
    write(source, rows)
    parsing = median_seconds(lambda: parse(source), repeats=1)
    begun = time.perf_counter()
    process(source, target)
    seconds = time.perf_counter() - begun
    largest = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss * 1024
    what, floor = f"derive, whole process, {rows:,} rows", "csv.reader over the same file"
    ratio_row(what, seconds, floor, parsing, "≥ 60,000 rows/s", f"{rows / seconds:,.0f} rows/s")
    with open(target, newline="") as file:
        assert sum(1 for _ in file) == rows + 1
    assert 3 * largest <= 1e9, "main process and two workers"
    assert rows / seconds >= 60_000
