"""Entries to snapshots: at each time, everything that was known then, with its origin and age.

What stands in for a value that was not measured, and for how long (:class:`~worksheet.oxygen.constants.CarryLimits`):

==============================  =========================================================  =========================
needed                          taken from                                                 for at most
==============================  =========================================================  =========================
venous sample                   nearest mixed-venous, else central-venous entry            30 min either side
haemoglobin                     the sample, else the last entry with one                   12 h, never across a bleed
                                                                                           or a transfusion
FiO2, device, PEEP, Pmaw, flow  the entry, else the last setting                           until changed, 6 h
cardiac output and index        the entry, else the nearest, both from one entry           60 min before, 30 after
temperature                     the entry, else the last                                   4 h
SpO2                            the entry, else the nearest                                10 min either side
measured VO2                    the entry, else the nearest                                60 min before, 30 after
dyshaemoglobins                 the sample, else the last CO-oximetry                      4 h
height, weight, age             the last known of the stay, else its first known           no limit: facts of a person
==============================  =========================================================  =========================

Everything else is the entry's own or missing. A value read at the same time in another entry has age 0. A haemoglobin
drawn at the very time of a bleed or transfusion counts as drawn before it. Settings are changed by an entry marked as
a device change and by an entry with another device than the last recorded one. Nothing depends on the order of rows:
entries of one stay and time are ranked by their content.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping
from typing import Generic, TypeVar

import numpy as np

from .constants import CarryLimits
from .line import Line, earlier, empty
from .quantities import MEASURED
from .readings import Bools, Codes, Event, Floats, Ints, Readings, Site, Snapshots

SETTINGS = ("fio2", "peep", "mean_airway_pressure", "oxygen_flow")
DYSHAEMOGLOBINS = ("cohb", "methb", "sulfhb")
FLOWS = ("cardiac_output", "cardiac_index")
PERSON = ("height", "weight", "age")
CARRIED = ("hb", *SETTINGS, *FLOWS, "vo2_measured", "temperature", "spo2", *DYSHAEMOGLOBINS, *PERSON)
VENOUS = ("ph", "pco2", "po2", "hb", "so2", "o2hb", "cohb", "methb", "sulfhb", "lactate")
_SAMPLE = ("so2", "o2hb", "po2", "pco2")  # a venous entry with none of them has nothing to pair


T = TypeVar("T")


class Lazy(Mapping[str, T], Generic[T]):
    """Arrays by name, each made when first asked for: a table holds only what is used."""

    def __init__(self, names: Iterable[str], make: Callable[[str], T]) -> None:
        self._names = dict.fromkeys(names)
        self._make = make
        self._made: dict[str, T] = {}

    def __getitem__(self, name: str) -> T:
        if name not in self._made:
            if name not in self._names:
                raise KeyError(name)
            self._made[name] = self._make(name)
        return self._made[name]

    def __iter__(self) -> Iterator[str]:
        return iter(self._names)

    def __len__(self) -> int:
        return len(self._names)


def align(readings: Readings, limits: CarryLimits | None = None) -> Snapshots:
    """Everything known at the time of each entry, for all stays at once.

    Parameters
    ----------
    readings : Readings
        Entries, any order [canonical units].
    limits : CarryLimits, optional
        For how long a value stands in for one that was not measured [h].

    Returns
    -------
    Snapshots
        Row i belongs to row i of the readings [canonical units, ages in h].
    """
    limits = limits or CarryLimits()
    line = Line.of(readings)
    source = _sources(readings, line, limits)
    venous_row = _venous_rows(readings, line, limits)
    device = _device(readings, source, line, limits)
    return Snapshots(
        readings=readings,
        values={name: _filled(readings[name], source.get(name)) for name in MEASURED},
        source=Lazy(MEASURED, lambda name: source[name] if name in source else _own(readings[name])),
        age=Lazy(MEASURED, lambda name: _age(readings, source.get(name), name)),
        device=device,
        flow_method=_code_of(readings.flow_method, np.maximum(*(source[name] for name in FLOWS))),
        venous_row=venous_row,
        venous_site=_code_of(readings.site, venous_row),
        venous=Lazy(VENOUS, lambda name: taken(readings[name], venous_row)),
        previous=_previous(readings, line),
        order=line.order,
    )


def taken(column: Floats, rows: Ints) -> Floats:
    """Values of other rows of the same column.

    Parameters
    ----------
    column : ndarray of float64
        Values [any unit].
    rows : ndarray of int64
        Row to take each value from, -1 for none [row number].

    Returns
    -------
    ndarray
        The values [unchanged], NaN where the row is -1.
    """
    if not len(column):
        return column.copy()
    return np.where(rows >= 0, column[rows], np.nan)


def _sources(readings: Readings, line: Line, limits: CarryLimits) -> dict[str, Ints]:
    """Row that each value is taken from, for the quantities that may be carried."""
    known = {name: ~np.isnan(readings[name]) for name in CARRIED}
    flow = known["cardiac_output"] | known["cardiac_index"]
    lost = _reached(line, np.isin(readings.event, (Event.TRANSFUSION, Event.BLEED)))
    changed = _reached(line, _device_changes(readings, line))
    ways: dict[str, Callable[[Bools], Ints]] = {
        "hb": lambda valid: _before_loss(line, line.within(line.last_position(valid), limits.hb), lost),
        "vo2_measured": lambda valid: line.nearest(valid, limits.vo2_before, limits.vo2_after),
        "temperature": lambda valid: line.within(line.last_position(valid), limits.temperature),
        "spo2": lambda valid: line.nearest(valid, limits.spo2, limits.spo2),
    }
    ways |= dict.fromkeys(SETTINGS, lambda valid: _since_change(line, valid, changed, limits))
    ways |= dict.fromkeys(FLOWS, lambda valid: line.nearest(flow, limits.flow_before, limits.flow_after))
    ways |= dict.fromkeys(DYSHAEMOGLOBINS, lambda valid: line.within(line.last_position(valid), limits.dyshaemoglobins))
    ways |= dict.fromkeys(PERSON, lambda valid: line.nearest_known(valid))
    own = np.arange(len(readings))
    nowhere = np.full(len(readings), -1)
    found: dict[str, Ints] = {}
    for name in CARRIED:
        valid = flow if name in FLOWS else known[name]
        found[name] = np.where(valid, own, line.back(ways[name](valid))) if np.any(valid) else nowhere
        if name in FLOWS:  # the entry nearest in time may hold only the other of the two
            found[name] = np.where((found[name] >= 0) & known[name][found[name]], found[name], -1)
    return found


def _reached(line: Line, happened: Bools) -> Floats:
    """Time of the last such event of the stay, not later than each position; -inf for none. In line order."""
    at = line.last_position(happened)
    return np.where(at >= 0, line.time[at], -np.inf) if len(at) else line.time


def _before_loss(line: Line, positions: Ints, lost: Floats) -> Ints:
    """Without those that a bleed or transfusion lies after; what was read at the same time stays."""
    drawn = line.time[positions]
    return np.where((lost >= drawn) & (drawn < line.time), -1, positions)


def _since_change(line: Line, valid: Bools, changed: Floats, limits: CarryLimits) -> Ints:
    positions = line.within(line.last_position(valid), limits.settings)
    return np.where(changed > line.time[positions], -1, positions)


def _device_changes(readings: Readings, line: Line) -> Bools:
    """Entries at which the device is not the one recorded last before, or that say so."""
    device = readings.device[line.order]
    known = np.where(device != 0, np.arange(len(device)), -1)
    before = np.append(-1, np.maximum.accumulate(known)[:-1])[: len(device)]
    other = (device != 0) & (before >= line.start) & (device != device[before])
    changed = readings.event == Event.DEVICE_CHANGE
    changed[line.order] |= other
    return np.asarray(changed)


def _device(readings: Readings, source: Mapping[str, Ints], line: Line, limits: CarryLimits) -> Codes:
    """Device of the entry that FiO2 was taken from, else the last one recorded."""
    recorded = readings.device != 0
    changed = _reached(line, _device_changes(readings, line))
    last = np.where(recorded, np.arange(len(readings)), line.back(_since_change(line, recorded, changed, limits)))
    with_fio2 = _code_of(readings.device, source["fio2"])
    return np.where(with_fio2 != 0, with_fio2, _code_of(readings.device, last))


def _venous_rows(readings: Readings, line: Line, limits: CarryLimits) -> Ints:
    """Row of the mixed-venous sample nearest to each arterial one, else of the central-venous one."""
    measured = np.zeros(len(readings), dtype=np.bool_)
    for name in _SAMPLE:
        measured |= ~np.isnan(readings[name])
    mixed, central = (
        line.nearest(measured & (readings.site == site), limits.venous, limits.venous)
        for site in (Site.MIXED_VENOUS, Site.CENTRAL_VENOUS)
    )
    rows = line.back(np.where(mixed >= 0, mixed, central))
    return np.where(readings.site == Site.ARTERIAL, rows, -1)


def _previous(readings: Readings, line: Line) -> Ints:
    arterial = readings.site == Site.ARTERIAL
    return np.where(arterial, earlier(np.where(arterial, 0.0, np.nan), line), -1)


def _filled(column: Floats, source: Ints | None) -> Floats:
    """A column with carried values; the column itself where nothing can be carried."""
    return column if source is None or empty(column) else taken(column, source)


def _own(column: Floats) -> Ints:
    return np.where(np.isnan(column), -1, np.arange(len(column)))


def _age(readings: Readings, source: Ints | None, name: str) -> Floats:
    if source is None:
        return np.where(np.isnan(readings[name]), np.nan, 0.0)
    return np.asarray(readings.time - taken(readings.time, source))


def _code_of(codes: Codes, rows: Ints) -> Codes:
    return np.where(rows >= 0, codes[rows], 0).astype(np.int8) if len(codes) else codes.copy()
