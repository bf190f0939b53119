"""What the charts say in words."""

from __future__ import annotations

import numpy as np

from worksheet.oxygen.readings import Floats, Ints
from worksheet.ward.display import Display
from worksheet.ward.sheet import Sheet

from . import points
from .description import Series
from .scales import TimeScale


def sd_of(sheet: Sheet, name: str) -> Floats:
    """Standard uncertainty of a derived quantity, row by row; NaN where there is none."""
    sds = getattr(sheet, "sds", {})
    return np.asarray(sds[name]) if name in sds else np.full(len(sheet.readings), np.nan)


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


def lactate_fit(sheet: Sheet, rows: Ints, display: Display) -> tuple[Series, ...]:
    """The fitted course of lactate."""
    return ()
