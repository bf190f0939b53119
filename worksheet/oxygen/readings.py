"""The tables passed between the parts of the engine: plain frozen arrays, NaN for "not measured"."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from enum import IntEnum

import numpy as np
from numpy.typing import NDArray

from .quantities import MEASURED

Floats = NDArray[np.float64]
Ints = NDArray[np.int64]
Codes = NDArray[np.int8]
Bools = NDArray[np.bool_]


class Site(IntEnum):
    """Where the sample was drawn. ``NONE``: bedside readings without a sample. Order matters for nothing."""

    NONE = 0
    ARTERIAL = 1
    MIXED_VENOUS = 2
    CENTRAL_VENOUS = 3
    VENOUS = 4  # peripheral: kept, never paired


class Device(IntEnum):
    """How oxygen is given; decides the uncertainty of FiO2 and whether it was set or estimated."""

    UNKNOWN = 0
    ROOM_AIR = 1
    NASAL_CANNULA = 2
    SIMPLE_MASK = 3
    RESERVOIR_MASK = 4
    HIGH_FLOW = 5
    NONINVASIVE = 6
    VENTILATOR = 7


class FlowMethod(IntEnum):
    """How cardiac output was measured; decides its uncertainty."""

    UNKNOWN = 0
    THERMODILUTION = 1
    PULSE_CONTOUR = 2
    ULTRASOUND = 3
    FICK = 4
    OTHER = 5


class Event(IntEnum):
    """Something that happened between samples. Haemoglobin is not carried across a transfusion or a bleed."""

    NONE = 0
    TRANSFUSION = 1
    BLEED = 2
    DEVICE_CHANGE = 3
    BED_MOVE = 4
    OTHER = 5


@dataclass(frozen=True)
class Readings:
    """Entries as they were recorded, one row each, any order.

    Attributes
    ----------
    stay : ndarray of int64, shape (n,)
        Which stay a row belongs to.
    time : ndarray of float64, shape (n,)
        Time of the sample [h since the epoch, UTC]. Hours, so that ages and slopes need no conversion.
    site, device, flow_method, event : ndarray of int8, shape (n,)
        Codes of :class:`Site`, :class:`Device`, :class:`FlowMethod`, :class:`Event`.
    values : mapping of str to ndarray of float64, shape (n,)
        Each measured quantity of the catalogue [its canonical unit]; NaN where not measured.
    """

    stay: Ints
    time: Floats
    site: Codes
    device: Codes
    flow_method: Codes
    event: Codes
    values: Mapping[str, Floats]

    def __len__(self) -> int:
        return len(self.stay)

    def __getitem__(self, name: str) -> Floats:
        return self.values[name]

    @classmethod
    def build(
        cls,
        stay: Sequence[int] | Ints,
        time: Sequence[float] | Floats,
        site: Sequence[int] | Codes,
        values: Mapping[str, Sequence[float] | Floats],
        device: Sequence[int] | Codes | None = None,
        flow_method: Sequence[int] | Codes | None = None,
        event: Sequence[int] | Codes | None = None,
    ) -> Readings:
        """Make a table from sequences; quantities left out are NaN everywhere."""
        n = len(stay)

        def codes(given: Sequence[int] | Codes | None) -> Codes:
            return np.zeros(n, dtype=np.int8) if given is None else np.asarray(given, dtype=np.int8)

        missing = np.full(n, np.nan)
        missing.setflags(write=False)
        unknown = set(values) - set(MEASURED)
        if unknown:
            raise KeyError(f"not in the catalogue: {', '.join(sorted(unknown))}")
        return cls(
            np.asarray(stay, dtype=np.int64),
            np.asarray(time, dtype=np.float64),
            codes(site),
            codes(device),
            codes(flow_method),
            codes(event),
            {name: np.asarray(values[name], dtype=np.float64) if name in values else missing for name in MEASURED},
        )

    def take(self, rows: Ints | Bools) -> Readings:
        """The table of the given rows, in that order."""
        return Readings(
            self.stay[rows],
            self.time[rows],
            self.site[rows],
            self.device[rows],
            self.flow_method[rows],
            self.event[rows],
            {name: column[rows] for name, column in self.values.items()},
        )


@dataclass(frozen=True)
class Snapshots:
    """Readings with everything known at each time: row i of this table is row i of the readings.

    Attributes
    ----------
    readings : Readings
        The entries the snapshots were made from, same rows, same order.
    values : mapping of str to ndarray of float64, shape (n,)
        As in the readings, carried values filled in [canonical unit].
    source : mapping of str to ndarray of int64, shape (n,)
        Row each value was taken from: the row itself, another row when carried, -1 where missing.
    age : mapping of str to ndarray of float64, shape (n,)
        Time of the row minus time of the source row [h]: 0 own, > 0 carried forward, < 0 read a little later,
        NaN missing.
    device, flow_method : ndarray of int8, shape (n,)
        Code that goes with the FiO2 and with the cardiac output in ``values``.
    venous_row : ndarray of int64, shape (n,)
        Row of the paired mixed- or central-venous sample, -1 where there is none.
    venous_site : ndarray of int8, shape (n,)
        Its site code, 0 where there is none.
    venous : mapping of str to ndarray of float64, shape (n,)
        Values of the paired venous sample (ph, pco2, po2, hb, so2, o2hb, cohb, methb, sulfhb, lactate).
    previous : ndarray of int64, shape (n,)
        The stay's previous arterial row, -1 where there is none (and for rows that are not arterial).
    order : ndarray of int64, shape (n,)
        Row numbers sorted by stay, then time, then row.
    """

    readings: Readings
    values: Mapping[str, Floats]
    source: Mapping[str, Ints]
    age: Mapping[str, Floats]
    device: Codes
    flow_method: Codes
    venous_row: Ints
    venous_site: Codes
    venous: Mapping[str, Floats]
    previous: Ints
    order: Ints

    def __len__(self) -> int:
        return len(self.readings)

    def __getitem__(self, name: str) -> Floats:
        return self.values[name]

    @property
    def arterial(self) -> Bools:
        """Rows that are arterial samples."""
        result: Bools = self.readings.site == Site.ARTERIAL
        return result


@dataclass(frozen=True)
class Derived:
    """What follows from the snapshots: row i belongs to snapshot i.

    Attributes
    ----------
    values : mapping of str to ndarray of float64, shape (n,)
        Each derived quantity of the catalogue [its canonical unit]; NaN where it cannot be derived.
    saturation : ndarray of float64, shape (n,)
        The functional saturation that went into content [0-1].
    inactive : ndarray of float64, shape (n,)
        The inactive share of haemoglobin that went into content [0-1].
    flags : ndarray of int64, shape (n,)
        Bits of :class:`Flag`: on what the row's numbers rest.
    """

    values: Mapping[str, Floats]
    saturation: Floats
    inactive: Floats
    flags: Ints
    notes: Mapping[str, str] = field(default_factory=dict)

    def __getitem__(self, name: str) -> Floats:
        return self.values[name]


class Flag(IntEnum):
    """On what a row's numbers rest; bits of ``Derived.flags``, said on every page that shows the numbers."""

    DYSHAEMOGLOBINS_ASSUMED = 1  # never measured: the usual share was taken
    DYSHAEMOGLOBINS_CARRIED = 2
    SATURATION_CALCULATED = 4  # from the curve, not measured
    SATURATION_FROM_FINGER = 8  # SpO2 stands in: no gas saturation and no PO2
    HB_CARRIED = 16
    FLOW_CARRIED = 32
    FIO2_ESTIMATED = 64  # low-flow device
    CENTRAL_VENOUS = 128  # O2ER, VO2 and shunt are estimates
    TEMPERATURE_ASSUMED = 256  # 37 °C taken for the blood in the body
    SPO2_ABOVE_97 = 512  # S/F not reported
    BAROMETRIC_STANDARD = 1024  # site constant, not measured
    VENOUS_HB_SHARED = 2048  # the arterial haemoglobin was used for the venous sample
    VO2_MEASURED = 4096  # measured, because Fick's could not be had
    DISSOLVED_NOT_COUNTED = 8192  # a saturation without a PO2: CaO2 or CvO2 is the bound part alone
