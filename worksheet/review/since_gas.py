"""What happened after the newest gas that its numbers do not hold yet."""

from __future__ import annotations

import numpy as np

from worksheet.oxygen.readings import Event, Ints
from worksheet.ward.display import Display
from worksheet.ward.sheet import Sheet

_CHANGED = {Event.TRANSFUSION: "transfusion", Event.BLEED: "bleed"}


def since_gas(sheet: Sheet, rows: Ints, last: int, display: Display) -> str:
    """Transfusions and bleeds recorded after a gas, in words; empty for none."""
    if last < 0:
        return ""
    event, time = sheet.readings.event[rows], sheet.readings.time[rows]
    later = rows[np.isin(event, list(_CHANGED)) & (time > sheet.readings.time[last])]
    return ", ".join(
        f"{_CHANGED[Event(int(sheet.readings.event[row]))]} {display.clock(float(sheet.readings.time[row]))}"
        for row in later.tolist()
    )
