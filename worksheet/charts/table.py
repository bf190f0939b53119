"""The data table of a chart: the same numbers for people who do not see it."""

from __future__ import annotations

import math
from dataclasses import dataclass

from worksheet.ward.display import MINUS, MISSING

from .description import Chart, Series


@dataclass(frozen=True)
class Table:
    """A table of texts; the first column heads each row."""

    caption: str
    head: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]


def table(chart: Chart) -> Table:
    """One row for each x over all series where x is a time or a position, else one row for each point."""
    listed = [s for s in chart.series if s.tabled and s.kind != "band"]
    if chart.x_words:
        return _by_x(chart, listed)
    axes = {axis.key: axis for axis in chart.y}
    rows = tuple(
        (s.name, number(chart, s.x[i], chart.x.decimals), number(chart, s.y[i], axes[s.axis].decimals), s.note(i))
        for s in listed
        for i in range(len(s.x))
    )
    return Table(chart.title, ("", chart.x.title, chart.y[0].title if chart.y else "", "Notes"), rows)


def _by_x(chart: Chart, listed: list[Series]) -> Table:
    words = dict(chart.x_words)
    cells: dict[float, list[str]] = {x: [MISSING] * len(listed) for x in sorted({x for s in listed for x in s.x})}
    for column, s in enumerate(listed):
        decimals = chart.axis(s.axis).decimals
        for i, x in enumerate(s.x):
            note = s.note(i)
            text = number(chart, s.y[i], decimals)
            told = f"{text} ({note})" if note and text != MISSING else text
            # Two samples at one moment are both told.
            cells[x][column] = told if cells[x][column] == MISSING else f"{cells[x][column]}; {told}"
    head = (chart.x.title, *(_heading(chart, s, [t.name for t in listed].count(s.name) > 1) for s in listed))
    return Table(chart.title, head, tuple((words.get(x, number(chart, x, 1)), *row) for x, row in cells.items()))


def _heading(chart: Chart, series: Series, twice: bool) -> str:
    """Name and unit; the panel's title where two panels have a series of one name."""
    if twice:
        return f"{series.name}, {_lower_first(chart.axis(series.axis).title)}"
    unit = _unit(chart, series)
    return f"{series.name} ({unit})" if unit else series.name


def _lower_first(text: str) -> str:
    return text[:1].lower() + text[1:]


def _unit(chart: Chart, series: Series) -> str:
    title = chart.axis(series.axis).title
    return title[title.rindex("(") + 1 : -1] if title.endswith(")") else ""


def number(chart: Chart, value: float, decimals: int) -> str:
    """A number with the reader's decimal sign and a true minus."""
    if not math.isfinite(value):
        return MISSING
    text = f"{value:.{decimals}f}"
    text = text.replace("-", "" if float(text) == 0 else MINUS)
    return text.replace(".", ",") if chart.decimal_comma else text
