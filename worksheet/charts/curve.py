"""Chart 5: the patient's own dissociation curve against the standard one, and what can be unloaded."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from worksheet.oxygen.constants import Constants
from worksheet.oxygen.curve import saturation
from worksheet.oxygen.readings import Flag, Floats, Ints
from worksheet.ward.display import MISSING, Display
from worksheet.ward.models import Stay
from worksheet.ward.sheet import Sheet

from . import points
from .description import Chart, Series, Style
from .maps import HEIGHT
from .scales import TimeScale, WallClock, value_axis

_USUAL_END = 150.0  # mmHg; further only where the sample lies further


@dataclass(frozen=True)
class _Blood:
    """The latest arterial sample as blood: what shifts its curve and how much haemoglobin works."""

    row: int
    ph: float
    pco2: float
    cohb: float
    methb: float
    inactive: float

    def oxyhaemoglobin(self, po2: Floats, constants: Constants) -> Floats:
        """O2Hb as a share of all haemoglobin [0-1] at PO2 [mmHg], 37 °C."""
        own = saturation(po2, self.ph, self.pco2, 37.0, self.cohb, self.methb, constants)
        return np.asarray(own * (1.0 - self.inactive))


def curve_chart(sheet: Sheet, stay: Stay, rows: Ints, display: Display, scale: TimeScale | None = None) -> Chart:
    """Oxyhaemoglobin against PO2: the latest sample's own curve, the standard one, and the unloadable part.

    Oxyhaemoglobin is shown as a share of all haemoglobin, so that carboxy- and methaemoglobin lower the curve by
    what they take and shift it by what they do to the rest. All at 37 °C, as the analyser reports.
    """
    scale = scale or WallClock(display)
    blood = _latest(sheet, rows)
    grid = _grid(float(sheet.snapshots["po2"][blood.row]) if blood else np.nan)
    end = float(points.shown(display, "po2", grid[-1:])[0])
    x_axis = value_axis("po2", display.heading("po2"), [0.0, end], display, decimals=display.decimals("po2"), floor=0,
                        ceiling=end, most=6, room=False)  # fmt: skip
    full = float(points.shown(display, "o2hb", np.array(1.0)))
    title = f"O2Hb, share of all Hb ({display.unit('o2hb').label or 'fraction'})"
    y_axis = value_axis("o2hb", title, [0.0, full], display, decimals=display.decimals("o2hb"), floor=0, ceiling=full,
                        empty="No arterial gas with pH and PCO2")  # fmt: skip
    standard = saturation(grid, 7.40, 40.0, 37.0, 0.0, 0.0, sheet.constants)
    series = [_line("Standard curve", grid, standard, display, Style("soft", "dash"))]
    if blood:
        series = [*_unloading(sheet, blood, display), *series, *_patient(sheet, blood, grid, display, scale)]
    return Chart(
        "curve", "Dissociation curve", _alt(blood), _summary(sheet, blood, display, scale), x_axis, (y_axis,),
        tuple(series), height=HEIGHT, decimal_comma=display.decimal_comma,
    )  # fmt: skip


def _grid(po2: float) -> Floats:
    """PO2 to draw the curves at [mmHg]: to 150, or as far as the sample lies; close where the curve bends."""
    end = _USUAL_END if not po2 > _USUAL_END else 50.0 * np.ceil(po2 / 50.0)
    return np.concatenate([np.linspace(0.0, 60.0, 61), np.linspace(62.0, end, 45)])


def _latest(sheet: Sheet, rows: Ints) -> _Blood | None:
    """The newest arterial row whose curve can be drawn; dyshaemoglobins never measured shift nothing."""
    snap = sheet.snapshots
    for row in points.arterial(sheet, rows)[::-1]:
        ph, pco2 = float(snap["ph"][row]), float(snap["pco2"][row])
        if np.isfinite(ph) and np.isfinite(pco2):
            cohb, methb = (max(float(np.nan_to_num(snap[name][row])), 0.0) for name in ("cohb", "methb"))
            share = float(sheet.derived.inactive[row])
            inactive = share if np.isfinite(share) else sheet.constants.usual_inactive
            return _Blood(int(row), ph, pco2, cohb, methb, inactive)
    return None


def _line(name: str, po2: Floats, o2hb: Floats, display: Display, style: Style) -> Series:
    x, y = points.shown(display, "po2", po2), points.shown(display, "o2hb", o2hb)
    return Series("line", name, "o2hb", points.floats(x), points.floats(y), style, tabled=False)


def _unloading(sheet: Sheet, blood: _Blood, display: Display) -> Iterator[Series]:
    """The stretch of the patient's curve between the end-capillary PO2 and the arterial one, shaded from below."""
    po2 = float(sheet.snapshots["po2"][blood.row])
    end = sheet.constants.end_capillary_po2
    if not np.isfinite(po2) or po2 <= end:
        return
    grid = np.linspace(end, po2, 40)
    upper = points.shown(display, "o2hb", blood.oxyhaemoglobin(grid, sheet.constants))
    x = points.floats(points.shown(display, "po2", grid))
    name = f"Can be unloaded down to {display.value('po2', end, with_unit=True)}"
    yield Series(
        "band", name, "o2hb", x, points.floats(upper), Style("band"), (float(upper[0]),) * len(x), tabled=False
    )


def _patient(sheet: Sheet, blood: _Blood, grid: Floats, display: Display, scale: TimeScale) -> Iterator[Series]:
    snap, row = sheet.snapshots, blood.row
    own = blood.oxyhaemoglobin(grid, sheet.constants)
    yield _line("Patient's own curve", grid, own, display, Style("function", "solid", width=2.4))
    when = scale.text(float(sheet.readings.time[row]))
    active = 1.0 - blood.inactive
    yield from _sample("Arterial", snap["po2"][row], sheet.derived.saturation[row] * active, when, "circle", display)
    if snap.venous_row[row] >= 0:
        when = scale.text(float(sheet.readings.time[snap.venous_row[row]]))
        venous = snap.venous["so2"][row] * active
        yield from _sample("Venous", snap.venous["po2"][row], venous, when, "square", display)


def _sample(name: str, po2: float, o2hb: float, note: str, marker: str, display: Display) -> Iterator[Series]:
    if np.isfinite(po2) and np.isfinite(o2hb):
        x = float(points.shown(display, "po2", np.array(po2)))
        y = float(points.shown(display, "o2hb", np.array(o2hb)))
        yield Series("points", name, "o2hb", (x,), (y,), Style("ink", marker=marker), notes=(note,))  # type: ignore[arg-type]


def _alt(blood: _Blood | None) -> str:
    if blood is None:
        return "The standard dissociation curve only: no arterial gas with pH and PCO2."
    return (
        "The standard dissociation curve, the curve of the latest arterial sample with its arterial and venous points, "
        "and, shaded, the oxygen that can be unloaded."
    )


def _summary(sheet: Sheet, blood: _Blood | None, display: Display, scale: TimeScale) -> str:
    if blood is None:
        return "No arterial gas with pH and PCO2 in this window."
    row = blood.row
    unload = display.value("extractable_o2", float(sheet.derived["extractable_o2"][row]), with_unit=True)
    p50 = display.value("p50", float(sheet.derived["p50"][row]), with_unit=True)
    words = [f"Sample of {scale.text(float(sheet.readings.time[row]))}, curves at 37 °C."]
    words.append("P50 is not reported for this saturation." if p50 == MISSING else f"P50 in the body {p50}.")
    if unload != MISSING:
        words.append(f"{unload} can be unloaded.")
    if sheet.derived.flags[row] & Flag.DYSHAEMOGLOBINS_ASSUMED:
        words.append("Dyshaemoglobins not measured: usual share assumed.")
    return " ".join(words)
