"""Chart descriptions as plain data, and their two renderers: Plotly for the page, print for the PDF."""

from .bar import ledger_bar
from .curve import curve_chart
from .description import Chart
from .ledger import Changes, change_ledger, changes_of
from .maps import content_map, delivery_map
from .strip import time_strip
from .table import Table, table

__all__ = [
    "Changes",
    "Chart",
    "Table",
    "change_ledger",
    "changes_of",
    "content_map",
    "curve_chart",
    "delivery_map",
    "ledger_bar",
    "table",
    "time_strip",
]
