"""Chart 2, the change ledger: what each step added or took in each interval, and over the window."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from worksheet.oxygen import ledger as ledgers
from worksheet.oxygen.ledger_table import Level
from worksheet.oxygen.readings import Floats, Ints
from worksheet.ward.display import Display
from worksheet.ward.sheet import Sheet

from . import points
from .description import Axis, Chart, Series, Style
from .scales import TimeScale, WallClock, value_axis
from .steps import RESIDUAL, STEPS, Step

HEIGHT = 480
_NONE = "Two arterial gases with haemoglobin are needed for a ledger"
MOST_BARS = 32  # more intervals are added up in groups: the ledger is additive, so nothing is lost


@dataclass(frozen=True)
class Changes:
    """Consecutive ledgers of one stay: row i is the change from ``start[i]`` to ``end[i]``.

    ``steps`` holds lung, haemoglobin, function and flow; ``residual`` is the part of function that is measured minus
    curve. All in the canonical unit of ``quantity`` (``do2i``, ``do2`` or ``cao2``).
    """

    quantity: str
    start: Floats
    end: Floats
    steps: Mapping[str, Floats]
    residual: Floats

    def __len__(self) -> int:
        return len(self.start)


_QUANTITY = {Level.CAO2: "cao2", Level.DO2: "do2", Level.DO2I: "do2i"}


def changes_of(sheet: Sheet, rows: Ints) -> Changes:
    """Consecutive ledgers from the first to the last arterial row among ``rows``, all counted alike.

    Counted in what both ends know; samples between that know less are stepped over, so that the intervals add up to
    the change of the window.
    """
    rows = points.arterial(sheet, rows)
    rows = rows[np.isfinite(sheet.derived["cao2"][rows])]
    if len(rows) < 2:
        return Changes("cao2", np.zeros(0), np.zeros(0), {step.name: np.zeros(0) for step in STEPS}, np.zeros(0))
    first, last = int(rows[0]), int(rows[-1])
    got = ledgers.intervals(sheet.snapshots, sheet.derived, first, last, sheet.constants, sheet.settings)
    times = sheet.readings.time
    steps = {step.name: got.step(step.name) for step in STEPS}
    quantity = _QUANTITY[Level(int(got.level[0]))]
    return Changes(quantity, times[got.start_row], times[got.end_row], steps, got.residual)


def change_ledger(changes: Changes, display: Display, scale: TimeScale | None = None) -> Chart:
    """Stacked contributions of each interval, and below them their running sum: its last bar is the window."""
    scale = scale or WallClock(display)
    grouped = _grouped(changes)
    n = len(grouped)
    columns = _columns(grouped, display)
    running = {name: np.nancumsum(values) for name, values in columns.items()}
    places = np.arange(n, dtype=np.float64)
    panels = [_panel(key, got, places, display) for key, got in (("interval", columns), ("window", running))]
    unit = display.unit(grouped.quantity).label
    titles = {"interval": f"By interval ({unit})", "window": f"Since the start ({unit})"}
    axes = tuple(
        value_axis(key, titles[key], [low, high, 0.0], display, decimals=display.decimals(grouped.quantity),
                   domain=domain, empty="" if key == "window" else _NONE)
        for (key, _, low, high), domain in zip(panels, ((0.53, 1.0), (0.0, 0.47)), strict=True)
    )  # fmt: skip
    words = tuple(zip(places.tolist(), _interval_words(grouped, scale), strict=True))
    x_axis = Axis("end", "Interval ending", -0.7, max(n, 6) - 0.3, _ticks(grouped, scale, places))
    symbol = display.quantity(grouped.quantity).symbol
    return Chart(
        "ledger", f"Change ledger of {symbol}", _alt(changes, n, symbol), _summary(running, display, grouped.quantity),
        x_axis, axes, tuple(s for _, series, _, _ in panels for s in series), height=HEIGHT,
        decimal_comma=display.decimal_comma, x_words=words,
    )  # fmt: skip


def _panel(
    key: str, columns: Mapping[str, Floats], places: Floats, display: Display
) -> tuple[str, tuple[Series, ...], float, float]:
    """Bars upward from zero for gains and downward for losses, in the order of the steps; a mark at the total."""
    if not len(places):
        return key, (), 0.0, 0.0
    up, down = np.zeros(len(places)), np.zeros(len(places))
    series = []
    for step in (*STEPS, RESIDUAL):
        values = np.nan_to_num(columns[step.name])
        base = np.where(values >= 0, up, down)
        up, down = up + np.maximum(values, 0), down + np.minimum(values, 0)
        series.append(_bar(step, key, columns[step.name], base, places))
    total = Series("points", "total", key, points.floats(places), points.floats(columns["total"]),
                   Style("ink", marker="diamond"), legend=key == "interval")  # fmt: skip
    return key, (*series, total), float(down.min()), float(up.max())


def _bar(step: Step, key: str, values: Floats, base: Floats, places: Floats) -> Series:
    return Series("bar", step.word, key, points.floats(places), points.floats(values), step.style,
                  points.floats(base), legend=key == "interval")  # fmt: skip


def _grouped(changes: Changes) -> Changes:
    """Add up neighbouring intervals until they fit."""
    n = len(changes)
    if n <= MOST_BARS:
        return changes
    first = np.unique(np.linspace(0, n, MOST_BARS + 1).astype(int)[:-1])
    last = np.append(first[1:], n) - 1
    summed = {name: np.add.reduceat(values, first) for name, values in changes.steps.items()}
    return Changes(changes.quantity, changes.start[first], changes.end[last], summed,
                   np.add.reduceat(changes.residual, first))  # fmt: skip


def _columns(changes: Changes, display: Display) -> dict[str, Floats]:
    """Each drawn thing by interval, in shown units; the residual stands beside function, not in it."""
    parts = {name: np.asarray(values) for name, values in changes.steps.items()}
    total = np.sum(list(parts.values()), axis=0)
    parts["function"] = parts["function"] - changes.residual
    parts |= {"residual": changes.residual, "total": total}
    return {name: points.spread(display, changes.quantity, values) for name, values in parts.items()}


def _ticks(changes: Changes, scale: TimeScale, places: Floats) -> tuple[tuple[float, str], ...]:
    every = max(1, -(-len(changes) // 7))
    marked = range((len(changes) - 1) % every, len(changes), every) if len(changes) else ()
    return tuple((float(places[i]), scale.brief(float(changes.end[i]))) for i in marked)


def _interval_words(changes: Changes, scale: TimeScale) -> Iterator[str]:
    for start, end in zip(changes.start, changes.end, strict=True):
        yield f"{scale.text(float(start))} to {scale.text(float(end))}"


def _alt(changes: Changes, bars: int, symbol: str) -> str:
    if not bars:
        return f"No ledger: {_NONE[0].lower()}{_NONE[1:]}."
    many = "" if bars == len(changes) else f" ({len(changes)} intervals added up in {bars} groups)"
    return (
        f"Stacked bars by interval{many}: what lung, haemoglobin, function and flow added to or took from {symbol}; "
        "below, the same summed from the start, so that the last bar is the window."
    )


def _summary(running: Mapping[str, Floats], display: Display, quantity: str) -> str:
    if not len(running["total"]):
        return f"{_NONE}."
    decimals, unit = display.decimals(quantity), display.unit(quantity).label
    last = {name: float(values[-1]) for name, values in running.items()}
    rest = last["residual"]
    last["function"] += rest  # the whole step, as every table tells it; the chart draws its two parts

    def said(name: str) -> str:
        return display.number(last[name], decimals, signed=True)

    parts = ", ".join(f"{step.word} {said(step.name)}" for step in STEPS)
    inside = f" (of function {RESIDUAL.word} {said('residual')})" if abs(rest) >= 0.5 * 10.0**-decimals else ""
    return f"Window total {said('total')} {unit}: {parts}{inside}."
