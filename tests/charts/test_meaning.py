"""What the charts say is what the numbers are."""

import itertools
import re
from dataclasses import replace
from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from tests.charts import build
from worksheet import charts
from worksheet.charts.bar import ledger_bar
from worksheet.charts.maps import path_marks
from worksheet.charts.scales import Elapsed, WallClock, round_step
from worksheet.charts.steps import RESIDUAL, STEPS
from worksheet.charts.words import lactate_words
from worksheet.oxygen.readings import Event, Site
from worksheet.oxygen.trend import lactate_trend
from worksheet.ward.display import Display


def hour(*parts):
    return datetime(*parts, tzinfo=UTC).timestamp() / 3600


@pytest.fixture(scope="module")
def sheet():
    return build.sheet_of(build.readings(hb_every=3))


def test_clock_change_in_spring_keeps_true_hours_and_skips_the_hour_that_is_not():
    scale = WallClock(build.DISPLAY)  # 02:00 to 03:00 does not exist on 29 March 2026 in Zurich
    ticks = scale.ticks(hour(2026, 3, 28, 22), hour(2026, 3, 29, 6), most=9)
    texts = [text for _, text in ticks]
    assert texts == ["23:00", "29 Mar", "01:00", "03:00", "04:00", "05:00", "06:00", "07:00", "08:00"]
    moments = {text: moment for moment, text in ticks}
    assert moments["03:00"] - moments["01:00"] == pytest.approx(1.0)


def test_clock_change_in_autumn_keeps_both_hours_apart():
    scale = WallClock(build.DISPLAY)
    one, two = hour(2026, 10, 25, 0, 30), hour(2026, 10, 25, 1, 30)
    assert scale.text(one) == "2026-10-25 02:30 CEST"
    assert scale.text(two) == "2026-10-25 02:30 CET"
    ticks = scale.ticks(hour(2026, 10, 24, 22), hour(2026, 10, 25, 4), most=9)
    assert all(b - a > 0.99 for (a, _), (b, _) in itertools.pairwise(ticks))


@pytest.mark.parametrize("zone", ["Asia/Kolkata", "Australia/Lord_Howe", "America/St_Johns", "UTC"])
@pytest.mark.parametrize("span", [0.5, 3, 10, 30, 72, 500, 3000])
def test_ticks_are_whole_local_times(zone, span):
    display = Display(ZoneInfo(zone))
    low = hour(2026, 4, 4, 3)
    ticks = WallClock(display).ticks(low, low + span, most=9)
    assert 1 <= len(ticks) <= 11
    assert all(low <= moment <= low + span for moment, _ in ticks)
    assert all(display.local(moment).minute % 15 == 0 for moment, _ in ticks)


def test_elapsed_time_tells_no_date():
    scale = Elapsed(hour(2026, 3, 28), build.DISPLAY)
    assert [text for _, text in scale.ticks(hour(2026, 3, 28), hour(2026, 3, 30), most=9)] == [
        "0", "6", "12", "18", "24", "30", "36", "42", "48"]  # fmt: skip
    assert scale.text(hour(2026, 3, 28, 6, 30)) == "6.5 h"


def test_carried_points_are_hollow_and_say_their_age(sheet):
    hb = next(s for s in build.strip(sheet).series if s.name == "Hb")
    # Measured with every third gas; after the bleed behind the seventh it is not carried until measured again.
    assert hb.carried == (False, True, True, False, True, True, False, False, True, True)
    assert hb.notes[1] == "carried 2 h"
    assert hb.notes[2] == "carried 4 h"


def test_strip_follows_the_snapshot_values(sheet):
    chart = build.strip(sheet)
    arterial = np.flatnonzero(sheet.readings.site == Site.ARTERIAL)
    pao2 = next(s for s in chart.series if s.name == "PaO2")
    assert pao2.y == pytest.approx(sheet.readings["po2"][arterial])
    supply = next(s for s in chart.series if s.name == "DO2I")
    ok = arterial[np.isfinite(sheet.derived["do2i"][arterial])]
    assert supply.y == pytest.approx(sheet.derived["do2i"][ok])
    o2er = next(s for s in chart.series if s.name == "O2ER")
    ok = arterial[np.isfinite(sheet.derived["o2er"][arterial])]
    assert o2er.y == pytest.approx(100 * sheet.derived["o2er"][ok])


def test_flow_times_content_is_the_supply_drawn(sheet):
    """Within a chart the arithmetic must be visible: ten times flow times content is delivery."""
    delivery = charts.delivery_map(sheet, None, build.rows_of(sheet), build.DISPLAY)
    path = delivery.series[0]
    arterial = np.flatnonzero(np.isfinite(sheet.derived["do2i"]))
    assert 10 * np.array(path.x) * np.array(path.y) == pytest.approx(sheet.derived["do2i"][arterial])


def test_contours_hold_equal_values(sheet):
    rows = build.rows_of(sheet)
    content, delivery = (make(sheet, None, rows, build.DISPLAY) for make in (charts.content_map, charts.delivery_map))
    assert len(content.contours) >= 2
    assert len(delivery.contours) >= 2
    for line in delivery.contours:
        assert 10 * np.array(line.x) * np.array(line.y) == pytest.approx(float(line.label), rel=2e-3)
    po2 = np.median(sheet.snapshots["po2"][sheet.snapshots.arterial])
    for line in content.contours:
        held = np.array(line.x) * np.array(line.y) / 100 + 0.0031 * po2  # Christoforides & Hedley-Whyte 1969
        assert held == pytest.approx(float(line.label), rel=2e-3)


def test_contours_stay_in_the_panel(sheet):
    rows = build.rows_of(sheet)
    for make in (charts.content_map, charts.delivery_map):
        chart = make(sheet, None, rows, build.DISPLAY)
        for line in chart.contours:
            assert min(line.x) >= chart.x.low - 1e-9
            assert max(line.x) <= chart.x.high + 1e-9
            assert min(line.y) >= chart.y[0].low - 1e-6
            assert max(line.y) <= chart.y[0].high + 1e-6


@pytest.mark.parametrize("count", [1, 2, 3, 8, 9, 50, 2000])
def test_path_is_numbered_at_both_ends_and_not_crowded(count):
    marks = path_marks(count)
    said = [int(mark) for mark in marks if mark]
    assert len(marks) == count
    assert (said[0], said[-1]) == (1, count)
    assert len(said) <= 9


@pytest.mark.parametrize("gases", [2, 12, 90])
def test_ledger_adds_up_to_the_change_of_the_window(gases):
    sheet = build.sheet_of(build.readings(gases, every=0.9 if gases > 12 else 2.0))
    changes = charts.changes_of(sheet, build.rows_of(sheet))
    chart = charts.change_ledger(changes, build.DISPLAY)
    supply = sheet.derived[changes.quantity]
    known = supply[np.isfinite(supply) & sheet.snapshots.arterial]
    last = {s.name: s for s in chart.series_of("window")}
    assert last["total"].y[-1] == pytest.approx(known[-1] - known[0])
    parts = sum(last[step.word].y[-1] for step in (*STEPS, RESIDUAL))
    assert parts == pytest.approx(last["total"].y[-1])
    assert len(last["total"].x) <= 32
    each = {s.name: np.array(s.y) for s in chart.series_of("interval")}
    assert sum(each[step.word] for step in (*STEPS, RESIDUAL)) == pytest.approx(each["total"])


def test_the_ledgers_words_give_a_step_the_number_of_the_table():
    """Function whole, its residual named as a part of it: four steps add up to the total."""
    rows = [(build.START + 4 * n, 1, {"ph": 7.4, "pco2": 40.0, "po2": 90.0 - 15 * n, "hb": 10.0 - n, "cohb": 0.01,
                                       "methb": 0.01, "so2": so2, "cardiac_output": 5.0 - 0.2 * n}, 0)
            for n, so2 in enumerate((0.97, 0.90))]  # fmt: skip
    sheet = build.sheet_of(build.table(rows))
    changes = charts.changes_of(sheet, build.rows_of(sheet))
    chart = charts.change_ledger(changes, build.DISPLAY)
    told = dict(re.findall(r"(total|lung|haemoglobin|function|flow) ([−+]?\d+)", chart.summary))
    whole = float(build.DISPLAY.unit("do2i").from_canonical(1.0)) * changes.steps["function"][0]
    assert float(told["function"].replace("−", "-")) == pytest.approx(whole, abs=0.5)
    assert "of function measured minus curve" in chart.summary
    numbers = {name: float(text.replace("−", "-")) for name, text in told.items()}
    assert sum(numbers[name] for name in ("lung", "haemoglobin", "function", "flow")) == pytest.approx(
        numbers["total"], abs=2.0
    )


def test_ledger_of_content_where_flow_is_missing():
    sheet = build.sheet_of(build.readings(flow=False))
    changes = charts.changes_of(sheet, build.rows_of(sheet))
    assert changes.quantity == "cao2"
    assert np.all(changes.steps["flow"] == 0)


def test_bars_stack_without_overlap(sheet):
    chart = charts.change_ledger(charts.changes_of(sheet, build.rows_of(sheet)), build.DISPLAY)
    for panel in ("interval", "window"):
        bars = [s for s in chart.series_of(panel) if s.kind == "bar"]
        for i in range(len(bars[0].x)):
            spans = sorted((min(s.low[i], s.low[i] + s.y[i]), max(s.low[i], s.low[i] + s.y[i])) for s in bars)
            assert all(b[0] >= a[1] - 1e-9 for a, b in itertools.pairwise(spans))


def test_steps_differ_without_colour():
    styles = [step.style for step in (*STEPS, RESIDUAL)]
    for attribute in ("dash", "marker", "hatch"):
        assert len({getattr(style, attribute) for style in styles}) == len(styles)


def test_curve_runs_through_its_sample(sheet):
    """The arterial point of a sample made on the curve lies near it: within the analyser's 2 points."""
    chart = charts.curve_chart(sheet, None, build.rows_of(sheet), build.DISPLAY)
    by_name = {s.name: s for s in chart.series}
    own, point = by_name["Patient's own curve"], by_name["Arterial"]
    assert np.interp(point.x[0], own.x, own.y) == pytest.approx(point.y[0], abs=4)
    standard = by_name["Standard curve"]
    # P50 of the tanh curve's standard blood, 26.8 mmHg: Siggaard-Andersen 1984
    assert np.interp(50, standard.y, standard.x) == pytest.approx(26.84, abs=0.1)


def test_carboxyhaemoglobin_lowers_and_shifts_the_curve():
    gas = {"ph": 7.4, "pco2": 40.0, "po2": 90.0, "so2": 0.97, "hb": 13.0, "cohb": 0.30, "methb": 0.0}
    sheet = build.sheet_of(build.table([(build.START, Site.ARTERIAL, gas, Event.NONE)]))
    chart = charts.curve_chart(sheet, None, build.rows_of(sheet), build.DISPLAY)
    own = next(s for s in chart.series if s.name == "Patient's own curve")
    assert max(own.y) < 70.1
    half = np.interp(max(own.y) / 2, own.y, own.x)
    assert half < 22  # left of 26.8: Roughton & Darling 1944


def test_events_are_marked_and_named(sheet):
    chart = build.strip(sheet)
    assert [event.label for event in chart.events] == ["bleed"]
    assert chart.events[0].words.startswith("bleed, 2026-03-29")


def test_panel_without_data_says_what_is_missing():
    chart = build.strip(build.sheet_of(build.readings(flow=False, venous=False)))
    empty = [axis.empty for axis in chart.y if axis.empty]
    assert empty == ["No flow measured: supply is shown as CaO2", "No paired venous sample"]
    assert chart.y[0].title == "CaO2 (mL/dL)"


def test_ledger_bar_keeps_proportion_and_sides():
    bar = ledger_bar({"lung": -10, "haemoglobin": -90, "function": 0.0, "flow": 40}, largest=100)
    pieces = {piece.step.name: piece for piece in bar.pieces}
    assert set(pieces) == {"lung", "haemoglobin", "flow"}
    assert pieces["haemoglobin"].width == pytest.approx(9 * pieces["lung"].width)
    assert pieces["haemoglobin"].x == pytest.approx(0)
    assert pieces["flow"].x == bar.zero
    assert pieces["haemoglobin"].word == "haemoglobin"


def test_ledger_bar_of_nothing():
    assert ledger_bar({}, largest=0).pieces == ()
    assert ledger_bar({"lung": float("nan")}, largest=10).pieces == ()


@pytest.mark.parametrize(("span", "most", "step"), [(10, 5, 2), (1, 5, 0.2), (0.03, 5, 0.01), (700, 4, 200)])
def test_round_steps(span, most, step):
    assert round_step(span, most) == pytest.approx(step)


@pytest.mark.parametrize("po2", [55.0, 149.0, 151.0, 480.0])
def test_curve_reaches_as_far_as_the_sample(po2):
    gas = {"ph": 7.4, "pco2": 40.0, "po2": po2, "so2": 0.97, "hb": 13.0}
    sheet = build.sheet_of(build.table([(build.START, Site.ARTERIAL, gas, Event.NONE)]))
    chart = charts.curve_chart(sheet, None, build.rows_of(sheet), build.DISPLAY)
    point = next(s for s in chart.series if s.name == "Arterial")
    assert point.x == (po2,)
    assert chart.x.high >= max(po2, 150)
    assert all(max(s.x) <= chart.x.high for s in chart.series)
    assert next(row for row in charts.table(chart).rows if row[0] == "Arterial")[1] == f"{po2:.0f}"


def test_table_tells_both_of_two_samples_at_one_moment():
    one, two = ({"ph": 7.4, "pco2": 40.0, "po2": po2, "hb": 10.0} for po2 in (90.0, 120.0))
    sheet = build.sheet_of(build.table([(build.START, Site.ARTERIAL, gas, Event.NONE) for gas in (one, two)]))
    told = charts.table(build.strip(sheet))
    column = told.head.index("PaO2 (mmHg)")
    assert told.rows[0][column] == "90; 120"


def test_quantities_on_one_axis_share_its_unit(sheet):
    """A reader may choose a unit for one of them only."""
    display = replace(build.DISPLAY, units={"spo2": "1", "so2_calculated": "1", "pf_ratio": "kPa"})
    chart = build.strip(sheet, display)
    assert "Saturation (%)" in [axis.title for axis in chart.y]
    by_name = {s.name: s for s in chart.series}
    for name in ("sO2 measured", "sO2 calculated", "SpO2"):
        assert min(by_name[name].y) > 50
    plain = {s.name: s for s in build.strip(sheet).series}
    assert by_name["P/F"].y == plain["P/F"].y


def test_a_lactate_that_doubles_in_days_is_told_without_hours():
    hours = np.arange(0.0, 28.0, 4.0)
    slow, fast = (lactate_trend(hours, 2.2 * 2.0 ** (hours / doubling)) for doubling in (150.0, 12.0))
    assert lactate_words(slow, build.DISPLAY) == "rising slowly"
    assert lactate_words(fast, build.DISPLAY).startswith("doubling in 12 h")
