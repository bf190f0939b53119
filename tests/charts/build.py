"""A small invented course as a derived sheet, without a database."""

from datetime import UTC, datetime
from types import SimpleNamespace
from zoneinfo import ZoneInfo

import numpy as np

from worksheet import charts
from worksheet.oxygen import align, derive
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.readings import Device, Event, FlowMethod, Readings, Site
from worksheet.ward.display import Display
from worksheet.ward.sheet import Sheet

START = datetime(2026, 3, 28, 18, tzinfo=UTC).timestamp() / 3600  # the night to 29 March loses an hour in Zurich
DISPLAY = Display(ZoneInfo("Europe/Zurich"))


def readings(
    gases: int = 12, *, every: float = 2.0, flow: bool = True, hb_every: int = 1, venous: bool = True
) -> Readings:
    """Gases every two hours with falling haemoglobin; flow with every second one; a venous sample with each."""
    rows = []
    for n in range(gases):
        share = n / max(gases - 1, 1)
        values = {
            "ph": 7.40 - 0.08 * share, "pco2": 40 + 6 * share, "po2": 96 - 20 * share, "so2": 0.97 - 0.02 * share,
            "so2_calculated": 0.972 - 0.018 * share, "cohb": 0.01, "methb": 0.008, "fio2": 0.4 + 0.1 * share,
            "spo2": 0.98 - 0.02 * share, "lactate": 1.4 * np.exp(share), "temperature": 37.0,
        }  # fmt: skip
        if n % hb_every == 0:
            values["hb"] = 10.5 - 3.0 * share
        if flow and n % 2 == 0:
            values["cardiac_output"] = 5.0 + 0.6 * share
        rows.append((START + every * n, Site.ARTERIAL, values, Event.NONE))
        if venous:
            pair = {"ph": 7.36, "pco2": 46.0, "po2": 36 - 4 * share, "so2": 0.68 - 0.1 * share, "lactate": 1.6}
            rows.append((START + every * n + 0.1, Site.CENTRAL_VENOUS, pair, Event.NONE))
    if gases > 2:
        rows.append((START + every * gases / 2 + 0.5, Site.NONE, {}, Event.BLEED))
    return table(rows)


def table(rows: list) -> Readings:
    """Rows of (time, site, values, event) as readings of one stay of an adult of 176 cm and 79 kg."""
    names = sorted({name for _, _, values, _ in rows for name in values})
    columns = {name: [values.get(name, np.nan) for _, _, values, _ in rows] for name in names}
    n = len(rows)
    columns |= {"height": [176.0] * n, "weight": [79.0] * n, "age": [66.0] * n}
    return Readings.build(
        [1] * n, [t for t, *_ in rows], [site for _, site, *_ in rows], columns,
        [Device.VENTILATOR] * n, [FlowMethod.THERMODILUTION] * n, [event for *_, event in rows],
    )  # fmt: skip


def sheet_of(got: Readings) -> Sheet:
    """Derived, as a page would have it."""
    snapshots = align.align(got, DEFAULT.carry)
    derived = derive.derive(snapshots, DEFAULT)
    unit = SimpleNamespace(name="Test unit", uncertainties={})
    return Sheet(unit, (), np.arange(len(got)), got, snapshots, derived, DEFAULT)


def rows_of(sheet: Sheet) -> np.ndarray:
    """All rows in time order."""
    return sheet.snapshots.order


def strip(sheet: Sheet, display: Display = DISPLAY):
    """The time strip of everything."""
    return charts.time_strip(sheet, None, rows_of(sheet), display)


def all_charts(sheet: Sheet, display: Display = DISPLAY) -> list:
    """The five charts of everything."""
    rows = rows_of(sheet)
    return [
        strip(sheet, display),
        charts.change_ledger(charts.changes_of(sheet, rows), display),
        charts.content_map(sheet, None, rows, display),
        charts.delivery_map(sheet, None, rows, display),
        charts.curve_chart(sheet, None, rows, display),
    ]
