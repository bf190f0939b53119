"""Charts 3 and 4: content and delivery as a path in time across lines of equal value."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from worksheet.oxygen.readings import Floats, Ints
from worksheet.ward.display import Display
from worksheet.ward.models import Stay
from worksheet.ward.sheet import Sheet

from . import points
from .description import Axis, Chart, Contour, Series, Style
from .scales import TimeScale, WallClock, round_step, value_axis

HEIGHT = 380
_SHORTEST = 0.15  # of the panel: a contour that only cuts a corner says nothing
_LABEL_WIDTH, _LABEL_HEIGHT = 0.05, 0.04  # of the panel, what a number takes
MOST_NUMBERS = 7  # numbered points on a path; the first and the last always


def content_map(sheet: Sheet, stay: Stay, rows: Ints, display: Display, scale: TimeScale | None = None) -> Chart:
    """Oxygen capacity of the working haemoglobin against saturation, with lines of equal CaO2.

    To the left is less (working) haemoglobin, down is less saturation. The lines hold bound oxygen plus the
    dissolved oxygen of the middle (median) sample shown.
    """
    rows = points.arterial(sheet, rows)
    capacity = sheet.constants.hufner * sheet.snapshots["hb"][rows] * (1 - sheet.derived.inactive[rows])
    saturation = sheet.derived.saturation[rows]
    keep = np.isfinite(capacity) & np.isfinite(saturation)
    rows, capacity, saturation = rows[keep], capacity[keep], saturation[keep]
    unit = display.unit("cao2")
    x = points.spread(display, "cao2", capacity)
    y = points.shown(display, "so2", saturation)
    full = float(points.shown(display, "so2", np.array(1.0)))
    x_axis = value_axis("capacity", f"O2 capacity of working Hb ({unit.label})", x, display, decimals=1, floor=0,
                        least=float(points.spread(display, "cao2", np.array(3.0))))  # fmt: skip
    y_axis = value_axis("saturation", f"Saturation ({display.unit('so2').label or 'fraction'})", y, display,
                        decimals=display.decimals("so2"), floor=0, ceiling=full, least=0.08 * full,
                        empty="No sample with haemoglobin and saturation")  # fmt: skip
    dissolved = _middle_dissolved(sheet, rows)
    lines = tuple(_content_lines(x_axis, y_axis, dissolved / unit.factor, full, display))
    return _map(
        "content", "Content map", sheet, rows, display, scale, x_axis, y_axis, x, y, lines,
        f"Path of {len(rows)} samples in time order over lines of equal CaO2 ({unit.label}). Left is less working "
        "haemoglobin, down is less saturation.",
        "cao2",
    )  # fmt: skip


def delivery_map(sheet: Sheet, stay: Stay, rows: Ints, display: Display, scale: TimeScale | None = None) -> Chart:
    """CaO2 against cardiac index (or output), with lines of equal DO2I (or DO2)."""
    rows = points.arterial(sheet, rows)
    supply = "do2i" if np.isfinite(sheet.derived["do2i"][rows]).any() else "do2"
    flow = "cardiac_index" if supply == "do2i" else "cardiac_output"
    rows = rows[np.isfinite(sheet.derived[supply][rows])]
    content = sheet.derived["cao2"][rows]
    x = points.shown(display, "cao2", content)
    y = points.shown(display, flow, sheet.derived[supply][rows] / (10.0 * content))
    x_axis = value_axis("cao2", display.heading("cao2"), x, display, decimals=display.decimals("cao2"), floor=0,
                        least=float(points.spread(display, "cao2", np.array(3.0))))  # fmt: skip
    y_axis = value_axis(flow, display.heading(flow), y, display, decimals=display.decimals(flow), floor=0, least=1.0,
                        empty="No cardiac output within an hour of a gas: measure flow to see delivery")  # fmt: skip
    factor = 10.0 * display.unit("cao2").factor / display.unit(supply).factor
    lines = tuple(_delivery_lines(x_axis, y_axis, factor, display)) if len(rows) else ()
    return _map(
        "delivery", "Delivery map", sheet, rows, display, scale, x_axis, y_axis, x, y, lines,
        f"Path of {len(rows)} samples in time order over lines of equal {points.label(supply)} "
        f"({display.unit(supply).label}). Left is less oxygen in each litre, down is less flow.",
        supply,
    )  # fmt: skip


def _map(
    key: str, title: str, sheet: Sheet, rows: Ints, display: Display, scale: TimeScale | None, x_axis: Axis,
    y_axis: Axis, x: Floats, y: Floats, lines: tuple[Contour, ...], alt: str, held: str,
) -> Chart:  # fmt: skip
    """What both maps share: the numbered path."""
    scale = scale or WallClock(display)
    times = sheet.readings.time[rows]
    value = [display.value(held, float(v), with_unit=True) for v in sheet.derived[held][rows]]
    basis = [points.basis_words(held, int(bits)) for bits in sheet.derived.flags[rows]]
    notes = tuple(
        "; ".join(filter(None, (f"{n + 1}", scale.text(float(t)), f"{points.label(held)} {v}", b)))
        for n, (t, v, b) in enumerate(zip(times, value, basis, strict=True))
    )
    flags = sheet.derived.flags[rows]
    series: tuple[Series, ...] = ()
    if len(rows):
        series = (
            Series("line", "Samples in time order", y_axis.key, points.floats(x), points.floats(y),
                   Style("ink", "solid", "circle", width=1.4), carried=points.carried(held, flags), notes=notes,
                   marks=_uncrowded(path_marks(len(rows)), x_axis, y_axis, x, y)),
        )  # fmt: skip
    ends = dict.fromkeys((0, len(rows) - 1)) if len(rows) else ()
    summary = (
        " ".join(f"Sample {n + 1}, {scale.text(float(times[n]))}: {points.label(held)} {value[n]}." for n in ends)
        or f"{y_axis.empty}."
    )
    return Chart(key, title, alt, summary, x_axis, (y_axis,), series, (), lines, (), HEIGHT, display.decimal_comma)


def path_marks(count: int) -> tuple[str, ...]:
    """Numbers beside the points of a path: the first, the last and a few between."""
    every = max(1, -(-count // MOST_NUMBERS))
    numbered = {0, count - 1, *range(0, max(count - every // 2 - 1, 0), every)}
    return tuple(str(n + 1) if n in numbered else "" for n in range(count))


def _uncrowded(marks: tuple[str, ...], x_axis: Axis, y_axis: Axis, x: Floats, y: Floats) -> tuple[str, ...]:
    """The marks without those that would print over another; the first and the last stay."""
    across = (np.asarray(x) - x_axis.low) / (x_axis.high - x_axis.low)
    up = (np.asarray(y) - y_axis.low) / (y_axis.high - y_axis.low)
    last = len(marks) - 1
    kept: list[int] = []
    for i in dict.fromkeys((last, 0, *range(1, last))):
        apart = all(abs(across[i] - across[j]) > _LABEL_WIDTH or abs(up[i] - up[j]) > _LABEL_HEIGHT for j in kept)
        if marks[i] and (apart or i == 0):
            kept.append(i)
    return tuple(mark if i in kept else "" for i, mark in enumerate(marks))


def _middle_dissolved(sheet: Sheet, rows: Ints) -> float:
    po2 = sheet.snapshots["po2"][rows]
    po2 = po2[np.isfinite(po2)]
    return float(sheet.constants.o2_solubility * np.median(po2)) if len(po2) else 0.0


def _levels(low: float, high: float, most: int = 7) -> Iterator[tuple[float, int]]:
    step = round_step(high - low, most)
    decimals = 0 if step >= 1 else 1 if step >= 0.1 else 2
    for n in range(int(np.ceil(low / step)), int(np.floor(high / step)) + 1):
        if n > 0:
            yield n * step, decimals


def _content_lines(x: Axis, y: Axis, dissolved: float, full: float, display: Display) -> Iterator[Contour]:
    grid = np.linspace(max(x.low, 1e-6), x.high, 60)
    lowest, highest = x.low * y.low / full + dissolved, x.high * y.high / full + dissolved
    for level, decimals in _levels(lowest, highest):
        line = full * (level - dissolved) / grid
        yield from _clipped(grid, line, y, display.number(level, decimals))


def _delivery_lines(x: Axis, y: Axis, factor: float, display: Display) -> Iterator[Contour]:
    grid = np.linspace(max(x.low, 1e-6), x.high, 60)
    for level, decimals in _levels(factor * x.low * y.low, factor * x.high * y.high):
        yield from _clipped(grid, level / (factor * grid), y, display.number(level, decimals))


def _clipped(grid: Floats, line: Floats, y: Axis, label: str) -> Iterator[Contour]:
    """The part of a line inside the panel, with its ends on the frame."""
    lo, hi = y.low, y.high
    edges = np.interp([-hi, -lo], -line, grid)  # the lines fall from left to right
    inside = np.unique(np.concatenate([grid[(line >= lo) & (line <= hi)], edges]))
    values = np.interp(inside, grid, line)
    ok = (values >= lo - 1e-6 * abs(hi)) & (values <= hi + 1e-6 * abs(hi))
    wide = np.ptp(inside[ok]) / (grid[-1] - grid[0]) if ok.any() else 0.0
    tall = np.ptp(values[ok]) / (hi - lo) if ok.any() else 0.0
    if wide + tall > _SHORTEST:
        yield Contour(y.key, label, points.floats(inside[ok]), points.floats(values[ok]))
