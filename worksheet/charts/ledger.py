"""Chart 2, the change ledger: what each step added or took in each interval, and over the window."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np

from worksheet.oxygen.readings import Floats
from worksheet.ward.display import Display

from . import points
from .description import Axis, Chart, Series, Style
from .scales import TimeScale, WallClock, value_axis
from .steps import RESIDUAL, STEPS, Step

HEIGHT = 380
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


def change_ledger(changes: Changes, display: Display, scale: TimeScale | None = None) -> Chart:
    """Stacked contributions for each interval, a mark at each total, and the sum of the window at the right."""
    scale = scale or WallClock(display)
    grouped = _grouped(changes)
    columns = _columns(grouped, display)
    n = len(grouped)
    places = np.append(np.arange(n, dtype=np.float64), n + 0.5) if n else np.zeros(0)
    series, low, high = _stacked(columns, places, display, grouped.quantity)
    y_axis = value_axis("change", f"Change of {display.heading(grouped.quantity)}", [low, high, 0.0], display,
                        decimals=display.decimals(grouped.quantity), most=6,
                        empty="Two arterial gases with haemoglobin are needed for a ledger")  # fmt: skip
    words = tuple(zip(places.tolist(), _interval_words(grouped, scale), strict=True))
    x_axis = Axis("interval", "Interval ending", -0.7, n + 1.1 if n else 1.0, _ticks(grouped, scale, places))
    total = columns["total"][-1] if n else np.nan
    return Chart(
        "ledger", "Change ledger", _alt(changes, n, display), _summary(columns, total, display, grouped.quantity),
        x_axis, (y_axis,), series, height=HEIGHT, decimal_comma=display.decimal_comma, x_words=words,
    )  # fmt: skip


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
    """Each drawn thing by interval, with the sum over the window appended, in shown units."""
    parts = {name: np.asarray(values) for name, values in changes.steps.items()}
    total = np.sum(list(parts.values()), axis=0)
    parts["function"] = parts["function"] - changes.residual
    parts |= {"residual": changes.residual, "total": total}
    return {name: points.spread(display, changes.quantity, np.append(v, np.nansum(v))) for name, v in parts.items()}


def _stacked(
    columns: Mapping[str, Floats], places: Floats, display: Display, quantity: str
) -> tuple[tuple[Series, ...], float, float]:
    """Bars upward from zero for gains and downward for losses, in the order of the steps."""
    if not len(places):
        return (), 0.0, 0.0
    up, down = np.zeros(len(places)), np.zeros(len(places))
    series = []
    for step in (*STEPS, RESIDUAL):
        values = np.nan_to_num(columns[step.name])
        base = np.where(values >= 0, up, down)
        up, down = up + np.maximum(values, 0), down + np.minimum(values, 0)
        series.append(_bar(step, columns[step.name], base, places))
    total = Series("points", "total", "change", points.floats(places), points.floats(columns["total"]),
                   Style("ink", marker="diamond"))  # fmt: skip
    return (*series, total), float(down.min()), float(up.max())


def _bar(step: Step, values: Floats, base: Floats, places: Floats) -> Series:
    return Series("bar", step.word, "change", points.floats(places), points.floats(values), step.style,
                  points.floats(base))  # fmt: skip


def _ticks(changes: Changes, scale: TimeScale, places: Floats) -> tuple[tuple[float, str], ...]:
    n = len(changes)
    if not n:
        return ()
    every = max(1, -(-n // 8))
    marked = range((n - 1) % every, n, every)
    return (*((float(places[i]), scale.brief(float(changes.end[i]))) for i in marked), (float(places[-1]), "Window"))


def _interval_words(changes: Changes, scale: TimeScale) -> Iterator[str]:
    for start, end in zip(changes.start, changes.end, strict=True):
        yield f"{scale.text(float(start))} to {scale.text(float(end))}"
    if len(changes):
        yield f"window, {scale.text(float(changes.start[0]))} to {scale.text(float(changes.end[-1]))}"


def _alt(changes: Changes, bars: int, display: Display) -> str:
    if not bars:
        return "No ledger: two arterial gases with haemoglobin are needed."
    many = "" if bars == len(changes) else f", {len(changes)} intervals added up in {bars} groups"
    return (
        f"Stacked bars by interval{many}: what lung, haemoglobin, function and flow added to or took from "
        f"{display.quantity(changes.quantity).symbol}, with the sum of the window at the right."
    )


def _summary(columns: Mapping[str, Floats], total: float, display: Display, quantity: str) -> str:
    if not np.isfinite(total):
        return "Two arterial gases with haemoglobin are needed for a ledger."
    decimals, unit = display.decimals(quantity), display.unit(quantity).label
    parts = ", ".join(
        f"{step.word} {display.number(float(columns[step.name][-1]), decimals, signed=True)}"
        for step in (*STEPS, RESIDUAL)
    )
    return f"Window total {display.number(float(total), decimals, signed=True)} {unit}: {parts}."
