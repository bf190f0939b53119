"""The whole pass on tables with anything missing, absurd or repeated: no warning, nothing lost, laws kept."""

import numpy as np
from hypothesis import Phase, given, settings
from hypothesis import strategies as st

from tests.oxygen.change_world import crowd, derived
from worksheet.oxygen import judgement, ledger, levers, uncertainty, verdict
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.next_measurement import next_measurement
from worksheet.oxygen.readings import Readings, Site

WORDS = {"", "none", "undetermined", *ledger.STEPS}
ABSURD = {"po2": [0.0, 790.0, 1.0], "hb": [0.0, 0.5, 27.0], "so2": [0.0, 1.0, 1.004], "ph": [6.3, 8.2, 100.0],
          "cardiac_output": [0.0, 35.0], "cohb": [-0.01, 0.9], "methb": [0.0, 0.95], "pco2": [0.0, 300.0],
          "fio2": [0.15, 1.0], "lactate": [0.0, 50.0], "height": [0.0], "o2hb": [0.3, 0.99]}  # fmt: skip


def dirty(seed, missing, odd):
    """A crowd with holes, absurd values, doubled times and other sites."""
    random = np.random.default_rng(seed)
    readings = crowd(stays=6, gases=5, seed=seed)
    n = len(readings)
    values = {}
    for name, column in readings.values.items():
        column = np.where(random.random(n) < missing, np.nan, column)
        if name in ABSURD:
            column = np.where(random.random(n) < odd, random.choice(ABSURD[name], n), column)
        values[name] = column
    time = np.where(random.random(n) < 0.1, readings.time.round(), readings.time)
    site = np.where(random.random(n) < 0.1, random.integers(0, 5, n), readings.site)
    return Readings.build(
        readings.stay, time, site, values, random.integers(0, 8, n), random.integers(0, 6, n), random.integers(0, 6, n)
    )


@given(st.integers(0, 2**32 - 1), st.floats(0.0, 0.6), st.floats(0.0, 0.3))
# without shrinking: a table of 60 rows does not shrink in useful time
@settings(max_examples=40, deadline=None, phases=[Phase.explicit, Phase.reuse, Phase.generate])
def test_laws_hold_on_anything(seed, missing, odd):
    snapshots, found = derived(dirty(seed, missing, odd))
    sds = uncertainty.standard_uncertainties(snapshots, found, DEFAULT)
    for name, column in sds.items():
        assert not np.any(column < 0.0), name
        assert np.all(np.isnan(column[~snapshots.arterial]))
    review = verdict.review(snapshots, found, DEFAULT)
    for made in (ledger.consecutive(snapshots, found, DEFAULT), review.ledger, review.ends):
        there = made.level > 0
        scale = np.maximum(np.abs(made.start_supply), np.abs(made.end_supply))[there]
        steps = sum(made.step(name) for name in ledger.STEPS)[there]
        assert np.all(np.abs(steps - made.total[there]) <= 1e-9 * scale + 1e-9)
        assert np.all(np.isfinite(steps))
        assert np.all(np.isnan(made.total[~there]))
        assert all(not np.any(column < 0.0) for column in made.sd.values())
        assert set(judgement.limiting_steps(snapshots, found, made)) <= WORDS
    for stay, end, start in zip(review.stay, review.ends.end_row, review.ends.start_row, strict=True):
        said = verdict.verdict(snapshots, found, review, int(stay), DEFAULT)
        assert 1 <= len(said.sentences) <= 2
        assert "nan" not in said.text
        if end >= 0:
            levers.levers(snapshots, found, int(end), DEFAULT, start_row=int(start))
            next_measurement(snapshots, found, int(end), DEFAULT)


def test_rows_that_are_no_samples_have_no_ledger():
    readings = crowd(stays=4)
    bedside = Readings(**{**vars(readings), "site": np.full(len(readings), Site.NONE, dtype=np.int8)})
    snapshots, found = derived(bedside)
    assert np.all(ledger.consecutive(snapshots, found, DEFAULT).level == 0)
