"""Chart 1, the time strip: supply and each thing it is made of, in panels above one time axis."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from worksheet.oxygen.readings import Event, Ints, Site
from worksheet.ward.display import Display
from worksheet.ward.models import Stay
from worksheet.ward.sheet import Sheet

from . import points, words
from .description import Axis, Band, Chart, EventMark, Series, Style
from .points import Points
from .scales import TimeScale, WallClock, time_axis, value_axis
from .steps import STEP

PANEL_HEIGHT = 96
_GAP = 0.022
_VENOUS_SITES = (Site.MIXED_VENOUS, Site.CENTRAL_VENOUS)
_EVENT_WORDS = {
    Event.TRANSFUSION: "transfusion",
    Event.BLEED: "bleed",
    Event.DEVICE_CHANGE: "device changed",
    Event.BED_MOVE: "bed move",
    Event.OTHER: "event",
}


@dataclass(frozen=True)
class _Panel:
    """One panel before it has its place: series without their axis, and how the axis is made."""

    key: str
    title: str
    series: tuple[Series, ...]
    decimals: int
    empty: str
    least: float
    floor: float | None = None
    ceiling: float | None = None
    bands: tuple[Band, ...] = ()


def time_strip(
    sheet: Sheet,
    stay: Stay,
    rows: Ints,
    display: Display,
    window: tuple[float, float] | None = None,
    scale: TimeScale | None = None,
) -> Chart:
    """Supply, PaO2 with P/F, haemoglobin, saturations, flow, extraction and lactate over time.

    ``rows`` are the rows shown, in time order; ``window`` the span [h since the epoch], by default that of the rows.
    """
    scale = scale or WallClock(display)
    times = sheet.readings.time[rows]
    low, high = window or ((float(times.min()), float(times.max())) if len(rows) else (0.0, 1.0))
    panels = [maker(sheet, rows, display) for maker in _PANELS]
    axes, series = _placed(panels, display)
    return Chart(
        "strip",
        "Time strip",
        _alt(panels),
        words.supply_summary(sheet, rows, display, scale),
        time_axis(low, high, scale),
        axes,
        series,
        tuple(band for panel in panels for band in panel.bands),
        (),
        tuple(_events(sheet, rows, scale)),
        PANEL_HEIGHT * len(panels) + 90,
        display.decimal_comma,
        scale.clock,
        tuple((float(t), scale.text(float(t))) for t in np.unique(times)),
    )


def _placed(panels: list[_Panel], display: Display) -> tuple[tuple[Axis, ...], tuple[Series, ...]]:
    """Stack the panels from the top; each axis spans its own values."""
    share = (1 + _GAP) / len(panels)
    axes = []
    for n, panel in enumerate(panels):
        top = 1 - n * share
        values = [v for s in panel.series for v in (*s.y, *s.low)]
        axes.append(
            value_axis(
                panel.key, panel.title, values, display, decimals=panel.decimals, floor=panel.floor,
                ceiling=panel.ceiling, least=panel.least, most=4, domain=(max(0.0, top - share + _GAP), top),
                empty="" if values else panel.empty,
            )
        )  # fmt: skip
    return tuple(axes), tuple(s for panel in panels for s in panel.series)


def _series(kind: str, name: str, axis: str, got: Points, style: Style, **more: object) -> Series:
    return Series(kind, name, axis, got.x, got.y, style, carried=got.carried, notes=got.notes, **more)  # type: ignore[arg-type]


def _supply(sheet: Sheet, rows: Ints, display: Display) -> _Panel:
    name = points.supply_name(sheet, rows)
    got = points.derived(sheet, rows, name, display)
    series = []
    if got:
        keep = points.arterial(sheet, rows)
        keep = keep[np.isfinite(sheet.derived[name][keep])]
        half = points.Z95 * points.spread(display, name, words.sd_of(sheet, name)[keep])
        middle = np.array(got.y)
        series.append(
            Series("band", f"{points.label(name)}, 95 %", name, got.x, points.floats(middle + half),
                   Style("band"), points.floats(middle - half))
        )  # fmt: skip
        series.append(_series("line", points.label(name), name, got, Style("ink", marker="circle", width=2.2)))
    return _Panel(name, display.heading(name), tuple(series), display.decimals(name), "No arterial gas with Hb", 0, 0)


def _oxygen(sheet: Sheet, rows: Ints, display: Display) -> _Panel:
    pao2 = points.measured(sheet, rows, "po2", display, (Site.ARTERIAL,))
    ratio = points.derived(sheet, rows, "pf_ratio", display, unit_of="po2")
    lung = STEP["lung"].style
    series = [_series("line", "PaO2", "po2", pao2, lung)] if pao2 else []
    if ratio:
        series.append(_series("line", "P/F", "po2", ratio, Style("lung", "dot", "triangle")))
    unit = display.unit("po2").label
    return _Panel("po2", f"PaO2, P/F ({unit})", tuple(series), display.decimals("po2"), "No arterial PO2", 0, 0)


def _haemoglobin(sheet: Sheet, rows: Ints, display: Display) -> _Panel:
    got = points.known(sheet, rows, "hb", display)
    series = (_series("line", "Hb", "hb", got, STEP["haemoglobin"].style),) if got else ()
    least = float(points.spread(display, "hb", np.array(2.0)))
    return _Panel("hb", display.heading("hb"), series, display.decimals("hb"), "No haemoglobin", least, 0)


def _saturations(sheet: Sheet, rows: Ints, display: Display) -> _Panel:
    on_gas = points.measured(sheet, rows, "so2", display, (Site.ARTERIAL,))
    wanted = (
        ("sO2 measured", Style("ink", marker="circle"), on_gas),
        ("sO2 calculated", Style("function", "dash", "square"), _calculated(sheet, rows, display)),
        ("SpO2", Style("soft", "dot", "diamond"), points.measured(sheet, rows, "spo2", display, unit_of="so2")),
    )
    series = tuple(_series("line", name, "so2", got, style) for name, style, got in wanted if got)
    title = f"Saturation ({display.unit('so2').label or 'fraction'})"
    top = float(points.shown(display, "so2", np.array(1.0)))
    return _Panel("so2", title, series, display.decimals("so2"), "No saturation", 0.08 * top, 0, top)


def _calculated(sheet: Sheet, rows: Ints, display: Display) -> Points:
    """The analyser's calculated saturation, else the curve at the sample's PO2."""
    keep = points.arterial(sheet, rows)
    stated = sheet.readings["so2_calculated"][keep]
    values = np.where(np.isnan(stated), sheet.derived["so2_from_po2"][keep], stated)
    notes = np.where(np.isnan(stated), "from the curve", "by the analyser")
    ok = np.isfinite(values)
    shown = points.shown(display, "so2", values[ok])
    return Points(points.floats(sheet.readings.time[keep[ok]]), points.floats(shown), (), tuple(notes[ok].tolist()))


def _flow(sheet: Sheet, rows: Ints, display: Display) -> _Panel:
    name, got = points.flow(sheet, rows, display)
    series = (_series("line", points.label(name), name, got, STEP["flow"].style),) if got else ()
    empty = "No flow measured: supply is shown as CaO2"
    return _Panel(name, display.heading(name), series, display.decimals(name), empty, 1.0, 0)


def _extraction(sheet: Sheet, rows: Ints, display: Display) -> _Panel:
    got = points.derived(sheet, rows, "o2er", display)
    series = (_series("line", "O2ER", "o2er", got, Style("use", "solid", "circle")),) if got else ()
    low, high = points.shown(display, "o2er", np.array([0.22, 0.30])).tolist()  # common practice, resting adults
    bands = (Band("o2er", low, high, "usual at rest"),) if got else ()
    least = float(points.spread(display, "o2er", np.array(0.2)))
    return _Panel("o2er", display.heading("o2er"), series, display.decimals("o2er"), "No paired venous sample", least,
                  0, bands=bands)  # fmt: skip


def _lactate(sheet: Sheet, rows: Ints, display: Display) -> _Panel:
    own = points.measured(sheet, rows, "lactate", display, (Site.ARTERIAL, Site.NONE))
    venous = points.measured(sheet, rows, "lactate", display, (*_VENOUS_SITES, Site.VENOUS))
    series = [_series("line", "Lactate", "lactate", own, Style("use", "dot", "square"))] if own else []
    if venous:
        series.append(_series("points", "Lactate, venous", "lactate", venous, Style("soft", "dot", "diamond")))
    series.extend(words.lactate_fit(sheet, rows, display))
    return _Panel("lactate", display.heading("lactate"), tuple(series), display.decimals("lactate"), "No lactate",
                  float(points.spread(display, "lactate", np.array(2.0))), 0)  # fmt: skip


_PANELS = (_supply, _oxygen, _haemoglobin, _saturations, _flow, _extraction, _lactate)


def _events(sheet: Sheet, rows: Ints, scale: TimeScale) -> Iterator[EventMark]:
    for row in rows[sheet.readings.event[rows] != Event.NONE]:
        word = _EVENT_WORDS[Event(int(sheet.readings.event[row]))]
        when = float(sheet.readings.time[row])
        yield EventMark(when, word, f"{word}, {scale.text(when)}")


def _alt(panels: list[_Panel]) -> str:
    drawn = "; ".join(panel.title for panel in panels if panel.series)
    missing = "; ".join(panel.empty for panel in panels if not panel.series)
    text = f"Panels over one time axis, from the top: {drawn or 'none with data'}."
    return f"{text} Without data: {missing}." if missing else text
