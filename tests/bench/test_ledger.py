"""The ledger and the whole pass: rates on one core (processor time, so that other work does not count)."""

import time

import numpy as np
import pytest

from tests.oxygen.change_world import crowd, random_factors
from worksheet.oxygen import align, derive, ledger, uncertainty, verdict
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.shapley import split


def processor_seconds(function, repeats=5):
    """Least processor time of a call [s]."""
    function()
    times = []
    for _ in range(repeats):
        start = time.process_time()
        function()
        times.append(time.process_time() - start)
    return min(times)


@pytest.fixture
def reference():
    """Processor time of what any of it must do at least: 16 hyperbolic tangents and exponentials for 100,000 rows."""
    values = np.random.default_rng(0).uniform(-2, 2, 100_000)

    def run():
        for _ in range(16):
            np.exp(np.tanh(values))

    return processor_seconds(run)


def whole_pass(readings):
    snapshots = align.align(readings)
    derived = derive.derive(snapshots, DEFAULT)
    uncertainty.standard_uncertainties(snapshots, derived, DEFAULT)
    made = ledger.consecutive(snapshots, derived, DEFAULT)
    verdict.limiting_steps(snapshots, derived, made)
    return verdict.review(snapshots, derived, DEFAULT)


def test_split_of_100_000_pairs(reference, ratio_row):
    random = np.random.default_rng(1)
    start, end = (random_factors(random, 100_000, cohb=False) for _ in (0, 1))
    seconds = processor_seconds(lambda: split(start, end, DEFAULT))
    ratio_row("split of 100,000 pairs, four curve inputs", seconds, "16 tanh and exp of 100,000", reference,
              "≤ 0.2 s on one core", f"{100_000 / seconds:,.0f} pairs/s")  # fmt: skip
    assert seconds <= 0.2


def test_whole_pass(reference, ratio_row):
    readings = crowd(stays=400, gases=72, venous=False)
    seconds = processor_seconds(lambda: whole_pass(readings), repeats=3)
    ratio_row("align, derive, uncertainty, ledger, verdict", seconds, "16 tanh and exp of 100,000", reference,
              "≥ 40,000 rows/s on one core", f"{len(readings) / seconds:,.0f} rows/s")  # fmt: skip
    assert len(readings) / seconds >= 40_000


def test_a_unit_of_40_beds(reference, ratio_row):
    readings = crowd(stays=40, gases=72, venous=False)
    seconds = processor_seconds(lambda: whole_pass(readings))
    ratio_row(f"the same for 40 beds, 72 h, {len(readings)} rows", seconds, "16 tanh and exp of 100,000", reference,
              "< 120 ms", f"{seconds * 1000:.0f} ms")  # fmt: skip
    assert seconds < 0.120
