"""What a page needs of a chart, for the fragment ``charts/_figure.html``."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

from django.utils.html import escape
from django.utils.safestring import SafeString, mark_safe

from . import plotly
from .description import Chart
from .table import Table, table


@dataclass(frozen=True)
class Drawn:
    """A chart ready for a template."""

    chart: Chart

    @property
    def key(self) -> str:
        """Name of the chart, unique on a page."""
        return self.chart.key

    @property
    def title(self) -> str:
        """Heading."""
        return self.chart.title

    @property
    def alt(self) -> str:
        """What the figure shows."""
        return self.chart.alt

    @property
    def summary(self) -> str:
        """What it says."""
        return self.chart.summary

    @property
    def json(self) -> SafeString:
        """The figure for the page's script."""
        return mark_safe(plotly.page_json(self.chart))  # noqa: S308  every < > & is escaped there

    @cached_property
    def rows_html(self) -> SafeString:
        """The rows of that table, written here: a template takes most of the page's time for its cells."""
        lines = (
            f'<tr><th scope="row">{escape(first)}</th>{"".join(f"<td>{escape(cell)}</td>" for cell in rest)}</tr>'
            for first, *rest in self.table.rows
        )
        return mark_safe("\n".join(lines))  # noqa: S308  every cell is escaped above

    @cached_property
    def table(self) -> Table:
        """The same numbers as a table."""
        return table(self.chart)
