"""What the charts say in words."""

from __future__ import annotations

import numpy as np

from worksheet.oxygen.readings import Floats, Ints, Site
from worksheet.oxygen.trend import LactateTrend, lactate_trend
from worksheet.oxygen.use import SLOW
from worksheet.ward.display import Display
from worksheet.ward.sheet import Sheet

from . import points
from .description import Series, Style
from .scales import TimeScale


def sd_of(sheet: Sheet, name: str) -> Floats:
    """Standard uncertainty of a derived quantity, row by row; NaN where there is none."""
    return np.asarray(sheet.sds[name]) if name in sheet.sds else np.full(len(sheet.readings), np.nan)


def supply_summary(sheet: Sheet, rows: Ints, display: Display, scale: TimeScale) -> str:
    """First and last value of supply, with times and the 95 % half-widths."""
    name = points.supply_name(sheet, rows)
    keep = points.arterial(sheet, rows)
    keep = keep[np.isfinite(sheet.derived[name][keep])]
    if not len(keep):
        return "No arterial gas with haemoglobin in this window, so there is no supply to show."
    first, last = int(keep[0]), int(keep[-1])
    now = f"{_with_interval(sheet, name, last, display)} at {scale.text(float(sheet.readings.time[last]))}"
    if first == last:
        return f"{points.label(name)} was {now}."
    start = f"{_with_interval(sheet, name, first, display)} at {scale.text(float(sheet.readings.time[first]))}"
    return f"{points.label(name)} went from {start} to {now}."


def _with_interval(sheet: Sheet, name: str, row: int, display: Display) -> str:
    value = display.value(name, float(sheet.derived[name][row]))
    half = points.Z95 * float(points.spread(display, name, sd_of(sheet, name)[row]))
    unit = display.unit(name).label
    if not np.isfinite(half):
        return f"{value} {unit}".rstrip()
    return f"{value} ± {display.number(half, display.decimals(name))} {unit}".rstrip()


def lactate_course(sheet: Sheet, rows: Ints) -> LactateTrend:
    """What can be said of the course of lactate over these rows."""
    readings = sheet.readings
    return lactate_trend(readings.time[rows], readings["lactate"][rows], readings.site[rows], sheet.settings)


def lactate_words(found: LactateTrend, display: Display) -> str:
    """The course in a few words: ``doubling in 5 h (3–11)``, or why there is nothing to say."""
    if found.kind in ("falling", "rising") and found.time > SLOW:
        return f"{found.kind} slowly"
    if found.kind in ("falling", "rising"):
        verb = "halving" if found.kind == "falling" else "doubling"
        low, high = (display.number(t, 0 if t >= 9.5 else 1) for t in (found.time_low, found.time_high))
        return f"{verb} in {display.number(found.time, 0 if found.time >= 9.5 else 1)} h ({low}–{high})"
    if found.kind == "unclear":
        return "no clear course"
    return found.reason


def lactate_fit(sheet: Sheet, rows: Ints, display: Display) -> tuple[Series, ...]:
    """The fitted course of lactate over the samples that were used."""
    found = lactate_course(sheet, rows)
    if found.line is None:
        return ()
    used = rows[np.isfinite(sheet.readings["lactate"][rows])]
    apart = used[sheet.readings.site[used] <= Site.ARTERIAL]
    end = float(sheet.readings.time[used if found.mixed or not len(apart) else apart].max())
    times = np.linspace(end - found.hours, end, 24)
    course = points.shown(display, "lactate", found.fitted(times))
    name = f"fit: {lactate_words(found, display)}"
    x, y = points.floats(times), points.floats(course)
    return (Series("line", name, "lactate", x, y, Style("use", "longdash", width=1.2), tabled=False),)
