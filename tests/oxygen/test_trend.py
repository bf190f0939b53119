"""Lactate: fits against an independent implementation and scipy, simulated accuracy, and every reason for refusing."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import stats

from tests.oxygen.change_world import checks
from worksheet.oxygen.readings import Site
from worksheet.oxygen.slopes import kendall_margin, least_squares, robust_slope, turn
from worksheet.oxygen.trend import lactate_trend

FLOOR = np.log1p(0.04**2)  # the analytic variation that the check values were made with


@pytest.mark.parametrize(("quantity", "inputs", "printed"), [*checks("loglin"), *checks("theilsen")])
def test_second_implementation(quantity, inputs, printed):
    method, *scale, what = quantity.split("_")
    times, values = np.array(inputs["t"], float), np.array(inputs["L"], float)
    logs = values if scale == ["lin"] else np.log(values)
    line = robust_slope(times, logs) if method == "theilsen" else least_squares(times, logs, FLOOR)
    found = {"slope": line.slope, "lo": line.low, "hi": line.high, "half": -np.log(2) / line.slope}[what]
    assert found == pytest.approx(float(printed), rel=1e-5)


@pytest.mark.parametrize("n", [5, 6, 8, 12])
def test_kendall_margin_is_exact(n):
    """Coverage under no trend from scipy's exact distribution of Kendall's tau: at least 95 %, the next margin less."""
    pairs, margin = n * (n - 1) // 2, kendall_margin(n)

    def two_sided(score):
        x = np.arange(n)
        order = _ranking_with_score(n, score)
        return stats.kendalltau(x, order, method="exact").pvalue

    assert two_sided(margin + 2) <= 0.05 < two_sided(margin)
    assert margin % 2 == pairs % 2


def _ranking_with_score(n, score):
    """A ranking whose Kendall score (concordant less discordant pairs) is as wanted."""
    inversions = (n * (n - 1) // 2 - score) // 2
    rest, ranking = list(range(n)), []
    for left in range(n - 1, -1, -1):
        take = min(inversions, left)
        ranking.append(rest.pop(take))
        inversions -= take
    return np.array(ranking)


def test_no_interval_below_five_points():
    assert [kendall_margin(n) for n in (2, 3, 4)] == [-1, -1, -1]
    assert np.isnan(robust_slope(np.arange(4.0), np.arange(4.0)).low)


@given(st.lists(st.tuples(st.floats(0, 72), st.floats(0.5, 15)), min_size=5, max_size=15, unique_by=lambda p: p[0]))
@settings(max_examples=80, deadline=None)
def test_slope_against_scipy(points):
    times, values = (np.array(column) for column in zip(*sorted(points), strict=True))
    if np.min(np.diff(times)) < 1e-3:
        return
    line, other = robust_slope(times, values), stats.theilslopes(values, times)
    assert line.slope == pytest.approx(other.slope, rel=1e-9, abs=1e-12)
    assert line.low <= line.slope <= line.high


@pytest.mark.parametrize(("n", "robust"), [(4, False), (8, True)])
def test_simulated_accuracy(n, robust):
    """Half-time 6 h, CV 6 %, irregular over 24 h: slope error 6.7 % (4 samples) and 3.7 % (8), interval covers."""
    random, errors, covered = np.random.default_rng(2), [], 0
    runs = 1500
    for _ in range(runs):
        times = np.sort(random.uniform(0, 24, n))
        logs = np.log(9.0) - np.log(2) / 6 * times + np.sqrt(np.log1p(0.06**2)) * random.standard_normal(n)
        line = robust_slope(times, logs) if robust else least_squares(times, logs, np.log1p(0.06**2))
        errors.append(line.slope / (-np.log(2) / 6) - 1)
        covered += line.low <= -np.log(2) / 6 <= line.high
    assert np.sqrt(np.mean(np.square(errors))) == pytest.approx(0.037 if robust else 0.067, rel=0.35)
    assert covered / runs > 0.94


def test_one_wild_value_moves_it_little():
    times = np.arange(0.0, 16.0, 2.0)
    logs = 2.0 - 0.1 * times
    logs[3] += np.log(1.6)
    assert robust_slope(times, logs).slope == pytest.approx(-0.1, abs=0.015)


HOURS = [0.0, 4.0, 8.0, 12.0, 16.0, 20.0]


def test_falling_and_rising():
    down = lactate_trend(HOURS, 8.0 * 0.5 ** (np.array(HOURS) / 6))
    assert (down.kind, down.method) == ("falling", "Theil-Sen")
    assert down.time == pytest.approx(6.0)
    assert down.time_low <= 6.0 + 1e-9
    assert down.fitted([0.0, 6.0]) == pytest.approx([8.0, 4.0])
    up = lactate_trend(HOURS[:4], 2.0 * 2.0 ** (np.array(HOURS[:4]) / 10))
    assert (up.kind, up.method) == ("rising", "least squares")
    assert up.time == pytest.approx(10.0)
    assert up.time_low < 10.0 < up.time_high
    assert up.decrease == pytest.approx(1 - 2.0**1.2)


def test_decrease_over_its_actual_interval():
    """Nguyen 2004: (L0 - L)/L0; check value 25 % for 6.0 to 4.5 mmol/L in 6 h."""
    (_, inputs, printed) = checks("nguyen")[0]
    found = lactate_trend([0.0, 6.0], [inputs["l0"], inputs["l6h"]])
    assert found.kind == "change"
    assert 100 * found.decrease == pytest.approx(float(printed))
    assert found.hours == 6.0
    assert found.beyond_noise
    assert not lactate_trend([0.0, 6.0], [4.0, 3.8]).beyond_noise


@pytest.mark.parametrize(
    ("times", "values", "reason"),
    [
        ([], [], "no lactate"),
        ([0], [3.0], "a single lactate"),
        ([0, 3, 6], [3.0, 0.0, 2.0], "a lactate of 0 or less"),
        ([0, 0.5, 1.5], [5.0, 4.0, 3.0], "samples span less than 2 h"),
        ([0, 4, 17], [5.0, 4.0, 3.0], "more than 12 h between neighbouring samples"),
        ([0, 4, 8, 12], [2.0, 3.0, 6.0, 4.0], "a peak inside, fewer than three samples after it"),
    ],
)
def test_refuses_with_the_reason(times, values, reason):
    found = lactate_trend(times, values)
    assert (found.kind, found.reason) == ("refused", reason)
    assert np.isnan(found.time)


def test_level_and_normal_courses_have_no_half_time():
    level = lactate_trend(HOURS, [3.0, 3.2, 2.9, 3.1, 3.0, 3.1])
    assert level.kind == "unclear"
    assert np.isnan(level.time)
    assert lactate_trend(HOURS, [1.8, 1.5, 1.2, 1.0, 0.9, 0.8]).kind == "normal"


def test_fits_after_a_peak():
    found = lactate_trend([0, 4, 8, 12, 16], [2.0, 8.0, 4.0, 2.0, 1.0])
    assert (found.kind, found.after_peak, found.n) == ("falling", True, 4)
    assert found.time == pytest.approx(4.0)


LATE_RISE = [1.2, 1.3, 1.2, 1.3, 1.2, 1.3, 1.3, 1.4, 1.3, 1.4, 1.4, 1.4, 1.5, 1.4, 1.4, 1.6, 2.2, 3.0, 3.9]


def test_a_late_rise_is_not_lost_in_the_level_course_before():
    """Level for two days, then doubling about every 7 h: the course of now is told, over 72 h as over 12 h."""
    times = 3.0 * np.arange(len(LATE_RISE))
    whole, late = lactate_trend(times, LATE_RISE), lactate_trend(times[-4:], LATE_RISE[-4:])
    assert (whole.kind, whole.turned) == ("rising", True)
    assert not late.turned
    assert whole.time == pytest.approx(late.time, rel=0.15)
    assert whole.time_low < 7.0 < whole.time_high < 15.0


def test_a_rise_after_a_fall_is_told_as_a_rise():
    times = np.arange(0.0, 40.0, 4.0)
    values = np.concatenate([8.0 * 0.5 ** (times[:6] / 8.0), 8.0 * 0.5**2.5 * 2.0 ** ((times[6:] - 20.0) / 6.0)])
    found = lactate_trend(times, values)
    assert (found.kind, found.turned) == ("rising", True)
    assert found.time == pytest.approx(6.0, rel=0.02)


def test_a_fall_that_ended_high_is_not_told_as_still_falling():
    found = lactate_trend(np.arange(0.0, 40.0, 4.0), [9.0, 7.0, 5.4, 4.2, 4.1, 4.2, 4.1, 4.2, 4.1, 4.2])
    assert found.kind == "unclear"
    assert found.turned


def test_a_joint_against_least_squares_over_all_joints():
    """The best of all joined pairs of lines, fitted here one by one."""
    times, values = np.arange(12.0), np.log([*LATE_RISE[8:], 5.0])
    rest = []
    for joint in range(2, 10):
        design = np.column_stack([np.ones(12), times, np.maximum(times - joint, 0.0)])
        rest.append(float(np.linalg.lstsq(design, values, rcond=None)[1][0]))
    assert turn(times, values, FLOOR) == 2 + int(np.argmin(rest))


def test_a_straight_course_seldom_turns():
    """Half-time 6 h, CV 6 %, as simulated above: a false turn in at most 5 %."""
    random, runs, found = np.random.default_rng(4), 2000, 0
    for n in (6, 8, 12, 20):
        for _ in range(runs // 4):
            times = np.sort(random.uniform(0, 24, n))
            logs = -np.log(2) / 6 * times + np.sqrt(np.log1p(0.06**2)) * random.standard_normal(n)
            found += turn(times, logs, np.log1p(0.04**2)) > 0
    assert found / runs <= 0.05


def test_arterial_and_venous_are_not_mixed_unsaid():
    sites = [Site.ARTERIAL, Site.CENTRAL_VENOUS, Site.ARTERIAL, Site.ARTERIAL]
    found = lactate_trend([0, 2, 4, 8], [4.0, 9.0, 3.0, 1.7], sites)
    assert (found.n, found.mixed) == (3, False)
    few = lactate_trend([0, 2], [4.0, 3.0], [Site.ARTERIAL, Site.VENOUS])
    assert (few.n, few.mixed) == (2, True)


def test_same_time_counts_once():
    assert lactate_trend([0, 0, 4, 8], [4.0, 4.4, 3.0, 2.0]).n == 3
