"""A chart description as data for the print template, which draws it natively: same numbers, ink on white."""

from __future__ import annotations

import math
from dataclasses import asdict
from typing import Any

from .description import Axis, Chart, Series
from .steps import LIGHT, colour


def printed(chart: Chart) -> dict[str, Any]:
    """The chart as JSON-safe data: NaN becomes null, roles become colours."""
    return {
        "key": chart.key,
        "title": chart.title,
        "alt": chart.alt,
        "summary": chart.summary,
        "x": _axis(chart.x),
        "y": [_axis(axis) for axis in chart.y],
        "series": [_series(series) for series in chart.series],
        "bands": [asdict(band) for band in chart.bands],
        "contours": [{"axis": c.axis, "label": c.label, "x": numbers(c.x), "y": numbers(c.y)} for c in chart.contours],
        "events": [asdict(event) for event in chart.events],
        "colours": {name: LIGHT[name] for name in ("ink", "soft", "grid", "contour", "reference", "event", "paper")},
    }


def numbers(values: tuple[float, ...]) -> list[float | None]:
    """Finite numbers as they are, to ten digits; the others as null."""
    return [float(f"{v:.10g}") if math.isfinite(v) else None for v in values]


def _axis(axis: Axis) -> dict[str, Any]:
    return {
        "key": axis.key,
        "title": axis.title,
        "low": axis.low,
        "high": axis.high,
        "ticks": [list(tick) for tick in axis.ticks],
        "domain": list(axis.domain),
        "empty": axis.empty,
    }


def _series(series: Series) -> dict[str, Any]:
    style = series.style
    return {
        "kind": series.kind,
        "name": series.name,
        "axis": series.axis,
        "x": [round(v, 6) for v in series.x],
        "y": numbers(series.y),
        "low": numbers(series.low),
        "carried": list(series.carried),
        "marks": list(series.marks),
        "legend": series.legend,
        "colour": colour(style.role),
        "dash": style.dash,
        "marker": style.marker,
        "hatch": style.hatch,
        "width": style.width,
    }
