"""``manage.py simulate``: two files that fit together, the same for the same seed, and honest about being invented."""

import csv
from datetime import datetime
from io import StringIO

import numpy as np
import pytest
from django.core.management import CommandError, call_command

from worksheet.oxygen.quantities import MEASURED
from worksheet.ward import simulated
from worksheet.ward.simulated_body import STEPS, Body, po2_for, saturation, true_parts


def run(folder, patients=30, seed=4):
    out = StringIO()
    call_command("simulate", patients=patients, seed=seed, output=folder, stdout=out)
    tables = []
    for name in ("entries.csv", "truth.csv"):
        with (folder / name).open(newline="", encoding="utf-8") as file:
            tables.append(list(csv.DictReader(file)))
    return (*tables, out.getvalue())


def test_files_fit_together(tmp_path):
    entries, truth, said = run(tmp_path / "courses")
    assert f"Wrote {len(entries)} entries of 30 invented courses" in said
    assert said.count("\n") == 1
    assert {row["stay"] for row in entries} == {row["stay"] for row in truth}
    assert all(stay.startswith("SIM-") for stay in {row["stay"] for row in entries})
    assert {row["cause"] for row in truth} <= set(simulated.CAUSES)
    assert set(entries[0]) - set(MEASURED) == {"stay", "time", "site", "flow_method"}
    assert {row["site"] for row in entries} == {"", "arterial", "central_venous"}
    assert all(datetime.fromisoformat(row["time"]).tzinfo for row in entries)


def test_values_are_in_units_of_the_batch_contract(tmp_path):
    entries, _, _ = run(tmp_path)
    gases = [row for row in entries if row["site"] == "arterial"]
    for name, low, high in (("so2", 20, 100), ("fio2", 21, 100), ("hb", 2, 18), ("po2", 15, 250), ("cohb", 0, 60)):
        found = np.array([float(row[name]) for row in gases if row[name]])
        assert low <= found.min() <= found.max() <= high, name
    assert 0.0 < np.mean([row["so2"] == "" for row in gases]) < 0.5


def test_courses_are_two_to_five_days_irregular(tmp_path):
    made = simulated.courses(200, 3)
    rows = np.arange(200)
    assert np.all(made.time[rows, made.last] - made.time[:, 0] <= 120.0)
    assert np.median(made.time[rows, made.last] - made.time[:, 0]) > 48.0
    gaps = np.diff(made.time, axis=1)[made.drawn[:, 1:]]
    assert 1.0 <= gaps.min() < 2.5
    assert gaps.max() > 7.0


def test_same_seed_same_files(tmp_path):
    one, two, other = (run(tmp_path / name, patients=5, seed=seed) for name, seed in (("a", 7), ("b", 7), ("c", 8)))
    assert one[:2] == two[:2]
    assert one[0] != other[0]


def test_truth_adds_up():
    """The true parts of the steps explain the true fall, and the named cause is the largest."""
    made = simulated.courses(400, 5)
    total = sum(made.parts[name] for name in STEPS)
    np.testing.assert_allclose(total, -made.fall, atol=0.01)
    single = np.isin(made.cause, STEPS) & (made.fall > 0.10)
    assert np.mean(made.larger[single] == made.cause[single]) > 0.99
    assert set(made.larger[made.cause == "none"]) == {"none"}


def test_body():
    """Published points of the curve (Severinghaus 1979, table 1): 40 mmHg 75 %, 60 mmHg 89 to 91 %, 27 mmHg half."""
    n = np.array([27.0, 40.0, 60.0, 100.0])
    one = Body(n, 0 * n + 40, 0 * n + 7.4, 0 * n + 10, 0 * n, 0 * n, 0 * n + 3, 0 * n)
    np.testing.assert_allclose(saturation(one), [0.50, 0.75, 0.905, 0.975], atol=0.012)
    np.testing.assert_allclose(po2_for(one, saturation(one)), n, rtol=1e-3)
    assert np.all(np.abs(list(true_parts(one, one).values())) < 1e-12)


@pytest.mark.parametrize(("patients", "seed"), [(0, 1), (10**6, 1), (5, -1)])
def test_bad_numbers_are_refused_in_words(tmp_path, patients, seed):
    with pytest.raises(CommandError, match="must be"):
        call_command("simulate", patients=patients, seed=seed, output=tmp_path)
    assert not list(tmp_path.iterdir())


def test_folder_that_cannot_be_made(tmp_path):
    (tmp_path / "file").write_text("x")
    with pytest.raises(CommandError, match="Could not write"):
        call_command("simulate", patients=1, seed=1, output=tmp_path / "file")
