"""CSV out: raw values as recorded, derived ones with their uncertainty, and how old every carried value was."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Iterator
from typing import Any

import numpy as np

from worksheet.oxygen.quantities import CATALOGUE, DERIVED, MEASURED, WITH_SD
from worksheet.oxygen.readings import Device, Event, FlowMethod, Site
from worksheet.ward.models import Entry

from .csv_text import safe
from .leaving import Leaving

CARRIED = (
    "hb",
    "fio2",
    "cardiac_output",
    "cardiac_index",
    "temperature",
    "spo2",
    "vo2_measured",
    "cohb",
    "methb",
    "peep",
    "mean_airway_pressure",
)
_BLOCK = 1000


def header(leaving: Leaving) -> list[str]:
    """Column names: those of the batch contract, then ages of carried values in hours."""
    who = ["stay", "hours", "site"] if leaving.deidentify else ["stay", "time", "site", "sample"]
    last = [] if leaving.deidentify else ["note"]
    bedside = ["device", "flow_method", "event", "event_amount"]
    sds = [f"{name}_sd" for name in WITH_SD]
    return [*who, *MEASURED, *bedside, *DERIVED, *sds, *(f"{name}_age_h" for name in CARRIED), *last]


def lines(leaving: Leaving) -> Iterator[str]:
    """The file in blocks of text."""
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\r\n")
    writer.writerow(header(leaving))
    computed = _computed(leaving)
    for count, entry in enumerate(leaving.entries, 1):
        writer.writerow(_row(leaving, entry, computed))
        if count % _BLOCK == 0:
            yield buffer.getvalue()
            buffer.seek(0)
            buffer.truncate()
    yield buffer.getvalue()


def _computed(leaving: Leaving) -> tuple[dict[int, int], list[np.ndarray]]:
    """Row of each entry, and the derived columns, uncertainties and ages in edge units."""
    sheet = leaving.sheet
    columns = [np.asarray(CATALOGUE[n].unit.from_canonical(sheet.derived[n])) for n in DERIVED]
    factors = {n: CATALOGUE[n].unit.factor for n in WITH_SD}
    columns += [sheet.sds[n] / factors[n] for n in WITH_SD]
    for name in CARRIED:
        age = np.asarray(sheet.snapshots.age[name])
        columns.append(np.where(age == 0, np.nan, age))
    return sheet.row_of_entry, columns


def _row(leaving: Leaving, entry: Entry, computed: tuple[dict[int, int], list[np.ndarray]]) -> list[Any]:
    rows, columns = computed
    name, site = safe(leaving.names[entry.stay_id]), _site(entry)
    if leaving.deidentify:
        who = [name, number(leaving.hours(entry.stay_id, entry.time), 4), site]
    else:
        who = [name, leaving.moment(entry.stay_id, entry.time).isoformat(), site, safe(entry.sample)]
    at = rows.get(entry.pk)
    derived = [number(float(column[at]), 6) if at is not None else "" for column in columns]
    note = [] if leaving.deidentify else [safe(entry.note)]
    return [*who, *(_measured(leaving, entry, n) for n in MEASURED), *_bedside(entry), *derived, *note]


def _site(entry: Entry) -> str:
    return "" if entry.site == Site.NONE else Site(entry.site).name.lower()


def _measured(leaving: Leaving, entry: Entry, name: str) -> str:
    """A value in the contract's unit; a comparator stays in front of it, so that nobody takes a limit for a value."""
    value = getattr(entry, name)
    if value is None:
        return ""
    edge = float(CATALOGUE[name].unit.from_canonical(value))
    if name == "age":
        edge = leaving.age(edge)
    return str(entry.typed.get(name, {}).get("comparator", "")) + number(edge, 10)


def _bedside(entry: Entry) -> list[str]:
    codes = ((Device, entry.device), (FlowMethod, entry.flow_method), (Event, entry.event))
    words = [kind(code).name.lower() if code else "" for kind, code in codes]
    return [*words, "" if entry.event_amount is None else number(entry.event_amount, 6)]


def number(value: float, digits: int) -> str:
    """A plain number, empty if there is none."""
    return f"{value:.{digits}g}" if math.isfinite(value) else ""
