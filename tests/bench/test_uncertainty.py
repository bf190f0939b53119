"""First-order uncertainty for all rows at once against the scalar ``uncertainties`` package, row by row."""

import time

import numpy as np
import pytest
from uncertainties import ufloat, umath

from tests.bench.test_ledger import processor_seconds
from tests.oxygen.change_world import crowd
from worksheet.oxygen import align, derive, uncertainty
from worksheet.oxygen.constants import DEFAULT

ROWS = 200
INPUTS = ("hb", "so2", "cohb", "methb", "po2", "pco2", "fio2", "cardiac_output", "height", "weight")


@pytest.fixture(scope="module")
def world():
    snapshots = align.align(crowd(stays=2000, gases=4, venous=True))
    return snapshots, derive.derive(snapshots, DEFAULT)


def scalar_row(value, sd, venous):
    """All that the one pass gives, for one row with automatic differentiation."""
    x = {name: ufloat(value[name], sd[name]) for name in INPUTS}
    vs, vp = ufloat(venous[0], 0.008), ufloat(venous[1], 2.5)
    active = 1 - x["cohb"] - x["methb"]
    ca = 1.39 * x["hb"] * active * x["so2"] + 0.0031 * x["po2"]
    cv = 1.39 * x["hb"] * active * vs + 0.0031 * vp
    alveolar = x["fio2"] * (ufloat(760, 2) - 47) - x["pco2"] * (x["fio2"] + (1 - x["fio2"]) / 0.8)
    c = alveolar**3 + 150 * alveolar
    end = 1.39 * x["hb"] * active * (c / (c + 23400)) + 0.0031 * alveolar
    index = x["cardiac_output"] / umath.sqrt(x["height"] * x["weight"] / 3600)
    output = x["cardiac_output"]
    found = {
        "cao2": ca, "do2": 10 * output * ca, "do2i": 10 * index * ca, "o2er": (ca - cv) / ca,
        "pf_ratio": x["po2"] / x["fio2"], "shunt_fraction": (end - ca) / (end - cv), "cvo2": cv, "avdo2": ca - cv,
        "vo2": 10 * output * (ca - cv), "vo2i": 10 * index * (ca - cv), "pao2_alveolar": alveolar,
        "aa_gradient": alveolar - x["po2"],
    }  # fmt: skip
    return {name: (one.nominal_value, one.std_dev) for name, one in found.items()}


def scalar_rows(snapshots, rows):
    sds = {name: column for name, column in uncertainty.input_sds(snapshots).items() if name in INPUTS}
    made = []
    for row in rows:
        value = {name: float(snapshots[name][row]) for name in INPUTS}
        sd = {name: float(sds[name][row]) for name in INPUTS}
        venous = float(snapshots.venous["so2"][row]), float(snapshots.venous["po2"][row])
        made.append(scalar_row(value, sd, venous))
    return made


def test_a_row_costs_300_times_less(world, ratio_row):
    snapshots, derived = world
    rows = np.flatnonzero(snapshots.arterial)[:ROWS]
    start = time.process_time()
    by_row = scalar_rows(snapshots, rows)
    scalar = (time.process_time() - start) / ROWS
    all_at_once = processor_seconds(lambda: uncertainty.standard_uncertainties(snapshots, derived, DEFAULT))
    each = all_at_once / int(snapshots.arterial.sum())
    ratio_row("first-order uncertainty, one row", each, "scalar package, one row", scalar, "≥ 300 times faster",
              f"{scalar / each:,.0f} times")  # fmt: skip
    assert scalar / each >= 300
    sds = uncertainty.standard_uncertainties(snapshots, derived, DEFAULT)
    assert set(by_row[0]) == set(sds)
    for name in set(sds) - {"shunt_fraction"}:  # it is given the simpler curve
        expected = np.array([one[name][1] for one in by_row])
        np.testing.assert_allclose(sds[name][rows], expected, rtol=1e-6, err_msg=name)
