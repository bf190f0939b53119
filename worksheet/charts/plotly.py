"""A chart description as a Plotly figure: a plain dict, checked against Plotly's own schema in the tests."""

from __future__ import annotations

import json
import math
import textwrap
from typing import Any

from .description import Axis, Chart, Series
from .steps import colour, recolouring
from .table import number

_FONT = "system-ui, -apple-system, 'Segoe UI', sans-serif"
_X_DIGITS = 5  # of a position or an hour; the readout finds its words by this text
_SYMBOL = {"circle": "circle", "square": "square", "diamond": "diamond", "triangle": "triangle-up", "cross": "x"}
CONFIG = {
    "displaylogo": False,
    "responsive": False,  # the page's script watches each box
    "scrollZoom": False,
    "doubleClick": "reset",
    "showTips": False,
    "modeBarButtons": [["zoom2d", "resetScale2d"]],
}


def figure(chart: Chart, theme: str = "light") -> dict[str, Any]:
    """The figure as ``{"data": …, "layout": …, "config": …}``."""
    places = {axis.key: f"y{n + 1 if n else ''}" for n, axis in enumerate(chart.y)}
    data = [_contour(chart, contour, places, theme) for contour in chart.contours]
    data += [trace for series in chart.series for trace in _traces(chart, series, places[series.axis], theme)]
    return {"data": data, "layout": _layout(chart, places, theme), "config": CONFIG}


def page(chart: Chart) -> dict[str, Any]:
    """What the page's script mounts: the light figure, how to recolour it, and how to tell time when zoomed."""
    drawn = figure(chart)
    clock = chart.clock
    drawn["dark"] = recolouring()
    drawn["clock"] = {"zone": clock.zone, "origin": clock.origin} if clock else None
    return drawn


def page_json(chart: Chart) -> str:
    """The same as JSON that is safe inside a script element."""
    text = json.dumps(page(chart), ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    return text.replace("<", "\\u003C").replace(">", "\\u003E").replace("&", "\\u0026")


def _numbers(values: tuple[float, ...]) -> list[float | None]:
    return [float(f"{v:.10g}") if math.isfinite(v) else None for v in values]


def _times(values: tuple[float, ...]) -> list[float]:
    return [round(v, 6) for v in values]


def _traces(chart: Chart, series: Series, place: str, theme: str) -> list[dict[str, Any]]:
    maker = {"bar": _bar, "band": _band}.get(series.kind, _line)
    return maker(chart, series, place, theme)


def _base(chart: Chart, series: Series, place: str) -> dict[str, Any]:
    return {
        "name": _wrapped(series.name) if _by_panel(chart) else series.name,
        "x": _times(series.x),
        "yaxis": place,
        "xaxis": "x",
        "showlegend": series.legend,
        "customdata": [[series.note(i)] for i in range(len(series.x))],
    } | ({"legend": place.replace("y", "legend")} if _by_panel(chart) else {})


def _wrapped(name: str) -> str:
    """A name of the legend beside a panel, no wider than the margin."""
    return "<br>".join(textwrap.wrap(name, 18))


def _hover(chart: Chart, series: Series, value: str = "y") -> str:
    decimals = chart.axis(series.axis).decimals
    said = f"{series.name} %{{{value}:.{decimals}f}}"
    return f"{said} %{{customdata[0]}}<extra></extra>"


def _line(chart: Chart, series: Series, place: str, theme: str) -> list[dict[str, Any]]:
    style, stroke = series.style, colour(series.style.role, theme)
    mode = "markers" if series.kind == "points" else "lines+markers" if style.marker else "lines"
    trace = _base(chart, series, place) | {
        "type": "scatter",
        "y": _numbers(series.y),
        "mode": mode + ("+text" if any(series.marks) else ""),
        "connectgaps": False,
        "hovertemplate": _hover(chart, series),
    }
    if not series.tabled:
        trace["hoverinfo"] = "skip"
        del trace["hovertemplate"]
    if series.kind != "points":
        shape = "hv" if series.kind == "steps" else "linear"
        trace["line"] = {"color": stroke, "width": style.width, "dash": style.dash, "shape": shape}
    if style.marker:
        trace["marker"] = _marker(series, theme)
    if any(series.marks):
        trace |= {"text": list(series.marks), "textposition": "top right", "textfont": {"size": 13}}
    return [trace]


def _marker(series: Series, theme: str) -> dict[str, Any]:
    """Measured points are filled, carried ones hollow."""
    stroke, paper = colour(series.style.role, theme), colour("paper", theme)
    fill: Any = [paper if was else stroke for was in series.carried] if any(series.carried) else stroke
    return {
        "symbol": _SYMBOL[series.style.marker],
        "size": 9 if series.kind == "points" else 7,
        "color": fill,
        "line": {"color": stroke, "width": 1.5},
    }


def _band(chart: Chart, series: Series, place: str, theme: str) -> list[dict[str, Any]]:
    """Two edges; the upper one fills down to the lower. Gaps in either end the band."""
    edge = {"color": colour(series.style.role, theme), "width": 0.5}
    lower = _base(chart, series, place) | {
        "type": "scatter", "mode": "lines", "y": _numbers(series.low), "line": edge, "hoverinfo": "skip",
        "showlegend": False, "name": f"{series.name}, lower edge",
    }  # fmt: skip
    upper = lower | {
        "y": _numbers(series.y), "fill": "tonexty", "fillcolor": colour(series.style.role, theme),
        "name": series.name, "showlegend": series.legend,
    }  # fmt: skip
    return [lower, upper]


def _bar(chart: Chart, series: Series, place: str, theme: str) -> list[dict[str, Any]]:
    stroke = colour(series.style.role, theme)
    marker: dict[str, Any] = {"color": stroke, "line": {"color": colour("ink", theme), "width": 0.6}}
    if series.style.hatch:
        marker["pattern"] = {
            "shape": series.style.hatch, "fgcolor": colour("paper", theme), "bgcolor": stroke,
            "size": 7, "solidity": 0.3,
        }  # fmt: skip
    decimals = chart.axis(series.axis).decimals
    trace = _base(chart, series, place) | {
        "type": "bar",
        "y": _numbers(series.y),
        "base": _numbers(series.low or (0.0,) * len(series.x)),
        "width": 0.7,
        "marker": marker,
        "hovertemplate": f"{series.name} %{{customdata[1]}} %{{customdata[0]}}<extra></extra>",
    }
    # The readout of a bar would tell where it ends, not how long it is.
    for i, told in enumerate(trace["customdata"]):
        told.append(number(chart, series.y[i], decimals))
    return [trace]


def _contour(chart: Chart, contour: Any, places: dict[str, str], theme: str) -> dict[str, Any]:
    return {
        "type": "scatter", "mode": "lines", "name": contour.label, "x": _numbers(contour.x), "y": _numbers(contour.y),
        "xaxis": "x", "yaxis": places[contour.axis],
        "line": {"color": colour("contour", theme), "width": 1, "dash": "dot"},
        "hoverinfo": "skip", "showlegend": False,
    }  # fmt: skip


def _layout(chart: Chart, places: dict[str, str], theme: str) -> dict[str, Any]:
    linked = chart.clock is not None or bool(chart.x_words)
    layout: dict[str, Any] = {
        "height": chart.height,
        "autosize": True,
        "margin": {"l": 74, "r": 136 if _by_panel(chart) else 40 if chart.x_words else 16, "t": 46, "b": 52},
        "font": {"family": _FONT, "size": 13, "color": colour("ink", theme)},
        "paper_bgcolor": colour("paper", theme),
        "plot_bgcolor": colour("paper", theme),
        "separators": ",." if chart.decimal_comma else ".,",
        "showlegend": len(chart.series) > 1,
        "hovermode": "x unified" if linked else "closest",
        "hoverlabel": {"bgcolor": colour("paper", theme), "bordercolor": colour("soft", theme)},
        "dragmode": "zoom" if chart.clock else False,
        "barmode": "overlay",
        "xaxis": _x_axis(chart, theme) | _x_place(chart, places),
        "annotations": _annotations(chart, places, theme),
        "shapes": _shapes(chart, places, theme),
    }
    if linked:
        layout["hoversubplots"] = "axis"
    for axis in chart.y:
        layout[places[axis.key].replace("y", "yaxis")] = _y_axis(axis, theme, _by_panel(chart))
    return layout | _legends(chart, places)


def _by_panel(chart: Chart) -> bool:
    """Whether each panel has a legend of its own, beside it."""
    return len(chart.y) > 2


def _legends(chart: Chart, places: dict[str, str]) -> dict[str, Any]:
    plain = {"bgcolor": "rgba(0,0,0,0)", "itemclick": False, "itemdoubleclick": False, "tracegroupgap": 0,
             "traceorder": "normal"}  # fmt: skip
    if not _by_panel(chart):
        return {"legend": plain | {"orientation": "h", "x": 0, "xanchor": "left", "y": 1.0, "yanchor": "bottom"}}
    beside = plain | {"x": 1.01, "xanchor": "left", "yanchor": "top", "font": {"size": 12}}
    return {places[axis.key].replace("y", "legend"): beside | {"y": round(axis.domain[1], 6)} for axis in chart.y}


def _x_place(chart: Chart, places: dict[str, str]) -> dict[str, Any]:
    """Under the last panel. Without a line there, its axis is none to Plotly, which would go to the first panel."""
    if chart.y and not any(series.axis == chart.y[-1].key for series in chart.series):
        return {"anchor": "free", "position": round(chart.y[-1].domain[0], 6)}
    return {"anchor": list(places.values())[-1] if places else "y"}


def _x_axis(chart: Chart, theme: str) -> dict[str, Any]:
    axis = {
        "title": {"text": chart.x.title, "standoff": 8},
        "range": [round(chart.x.low, 6), round(chart.x.high, 6)],
        "tickvals": [value for value, _ in chart.x.ticks],
        "ticktext": [text for _, text in chart.x.ticks],
        "gridcolor": colour("grid", theme),
        "linecolor": colour("soft", theme),
        "zeroline": False,
        "ticklabeloverflow": "allow",
        "tickangle": 0,
        "fixedrange": chart.clock is None,
    }
    if chart.clock or chart.x_words:
        axis |= {"showspikes": True, "spikemode": "across", "spikedash": "dot", "spikethickness": 1,
                 "spikecolor": colour("soft", theme), "hoverformat": f".{_X_DIGITS}f",
                 "labelalias": {f"{x:.{_X_DIGITS}f}": words for x, words in chart.x_words}}  # fmt: skip
    return axis


def _y_axis(axis: Axis, theme: str, narrow: bool) -> dict[str, Any]:
    return {
        "title": {
            "text": axis.title.replace(" (", "<br>(") if narrow else axis.title,
            "standoff": 6,
            "font": {"size": 12},
        },
        "range": [axis.low, axis.high],
        "domain": [round(d, 6) for d in axis.domain],
        "tickvals": [value for value, _ in axis.ticks],
        "ticktext": [text for _, text in axis.ticks],
        "gridcolor": colour("grid", theme),
        "linecolor": colour("soft", theme),
        "zeroline": axis.low < 0 < axis.high,
        "zerolinecolor": colour("ink", theme),
        "fixedrange": True,
    }


def _annotations(chart: Chart, places: dict[str, str], theme: str) -> list[dict[str, Any]]:
    soft = {"size": 11, "color": colour("soft", theme)}
    found: list[dict[str, Any]] = [
        {"text": c.label, "x": c.x[-1], "y": c.y[-1], "xref": "x", "yref": places[c.axis], "showarrow": False,
         "font": soft, "xanchor": "right", "yanchor": "bottom"}
        for c in chart.contours
    ]  # fmt: skip
    found += [
        {"text": axis.empty, "x": 0.5, "xref": "paper", "y": sum(axis.domain) / 2, "yref": "paper", "showarrow": False,
         "font": {"size": 13, "color": colour("soft", theme)}}
        for axis in chart.y
        if axis.empty and not any(chart.series_of(axis.key))
    ]  # fmt: skip
    found += [
        {"text": e.label, "x": e.x, "y": 1, "xref": "x", "yref": "paper", "showarrow": False, "font": soft,
         "xanchor": "left", "yanchor": "bottom", "hovertext": e.words}
        for e in chart.events
    ]  # fmt: skip
    return found + [
        {"text": b.label, "x": 1, "xref": "paper", "xanchor": "right", "y": b.high, "yref": places[b.axis],
         "yanchor": "bottom", "showarrow": False, "font": soft}
        for b in chart.bands
    ]  # fmt: skip


def _shapes(chart: Chart, places: dict[str, str], theme: str) -> list[dict[str, Any]]:
    bands: list[dict[str, Any]] = [
        {"type": "rect", "xref": "paper", "x0": 0, "x1": 1, "yref": places[b.axis], "y0": b.low, "y1": b.high,
         "fillcolor": colour("reference", theme), "line": {"width": 0}, "layer": "below"}
        for b in chart.bands
    ]  # fmt: skip
    return bands + [
        {"type": "line", "xref": "x", "x0": e.x, "x1": e.x, "yref": "paper", "y0": 0, "y1": 1, "layer": "below",
         "line": {"color": colour("event", theme), "width": 1, "dash": "dash"}}
        for e in chart.events
    ]  # fmt: skip
