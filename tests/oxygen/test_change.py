"""The real-change test."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.oxygen.change_world import checks, derived, table
from worksheet.oxygen import ledger
from worksheet.oxygen.change import probability_of_fall, real_change, reference_change_value, reference_change_value_log
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.readings import FlowMethod


@pytest.mark.parametrize(("quantity", "inputs", "printed"), checks("rcv_"))
def test_reference_change_values(quantity, inputs, printed):
    args = inputs["cva"], inputs["cvi"], inputs["z"]
    down, up = reference_change_value_log(*args)
    found = {"rcv_sym": reference_change_value(*args), "rcv_log_down": down, "rcv_log_up": up}[quantity]
    assert found == pytest.approx(float(printed), abs=1e-6)


@pytest.mark.parametrize(("name", "index"), [("sdd_pao2_mmHg", 9.09), ("sdd_paco2_mmHg", 2.06)])
def test_smallest_detectable_difference(name, index):
    """Mallat 2015: the change that is just beyond noise is 1.96 sqrt(2) repeat SDs."""
    repeat = index / (1.96 * np.sqrt(2))
    assert not real_change(0.999 * index, repeat * np.sqrt(2)).beyond_noise
    assert real_change(1.001 * index, repeat * np.sqrt(2)).beyond_noise


@given(st.floats(-500, 500), st.floats(0.1, 200), st.floats(0, 300))
def test_probabilities(change, sd, more):
    fall, more_than = probability_of_fall(change, sd), probability_of_fall(change, sd, more)
    assert 0.0 <= more_than <= fall <= 1.0
    assert fall == pytest.approx(1.0 - probability_of_fall(-change, sd))


def test_known_values():
    assert probability_of_fall(0.0, 10.0) == 0.5
    assert probability_of_fall(-19.6, 10.0) == pytest.approx(0.975, abs=1e-4)
    assert probability_of_fall(-30.0, 10.0, 30.0) == 0.5
    assert probability_of_fall(-1.0, 0.0) == 1.0
    assert np.isnan(probability_of_fall(np.nan, 1.0))
    assert not real_change(np.nan, 1.0).beyond_noise


def test_systematic_parts_cancel():
    """Hb 9 to 8, flow 5 to 5.6 by one method: the SD of the change is far smaller than of two unrelated values."""
    pair = ({"hb": 9.0, "cardiac_output": 5.0}, {"hb": 8.0, "cardiac_output": 5.6})
    made = {}
    for name, method in (("one", FlowMethod.THERMODILUTION), ("two", FlowMethod.ULTRASOUND)):
        snapshots, found = derived(table(pair[0], {**pair[1], "method": method}))
        made[name] = ledger.consecutive(snapshots, found, DEFAULT).sd["total"][1]
    assert made["one"] < 0.62 * made["two"]
