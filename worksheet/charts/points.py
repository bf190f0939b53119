"""From the sheet to points in shown units: what was measured, what was carried, and the words for each."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from worksheet.oxygen.quantities import CATALOGUE
from worksheet.oxygen.readings import Flag, Floats, Ints, Site
from worksheet.ward.display import Display, age_words
from worksheet.ward.sheet import Sheet

Z95 = 1.959964  # two-sided 95 % of the normal distribution

_CONTENT_WORDS = (
    (Flag.HB_CARRIED, "Hb carried"),
    (Flag.SATURATION_CALCULATED, "saturation calculated, not measured"),
    (Flag.SATURATION_FROM_FINGER, "saturation from the finger"),
    (Flag.DYSHAEMOGLOBINS_ASSUMED, "dyshaemoglobins not measured: usual share assumed"),
    (Flag.DYSHAEMOGLOBINS_CARRIED, "dyshaemoglobins carried"),
)
_FLOW_WORDS = ((Flag.FLOW_CARRIED, "flow carried"),)
_VENOUS_WORDS = ((Flag.CENTRAL_VENOUS, "central venous: an estimate"),)
_LUNG_WORDS = ((Flag.FIO2_ESTIMATED, "FiO2 estimated"),)
_BASIS_WORDS = {
    "cao2": _CONTENT_WORDS,
    "do2": _CONTENT_WORDS + _FLOW_WORDS,
    "do2i": _CONTENT_WORDS + _FLOW_WORDS,
    "o2er": _CONTENT_WORDS + _VENOUS_WORDS,
    "pf_ratio": _LUNG_WORDS,
}
_CARRIED_BITS = {"cao2": Flag.HB_CARRIED, "o2er": Flag.HB_CARRIED, "pf_ratio": 0}


@dataclass(frozen=True)
class Points:
    """Points of one quantity, in shown units, in time order."""

    x: tuple[float, ...]
    y: tuple[float, ...]
    carried: tuple[bool, ...] = ()
    notes: tuple[str, ...] = ()

    def __bool__(self) -> bool:
        return bool(self.x)


def floats(values: Floats) -> tuple[float, ...]:
    """An array as plain numbers."""
    return tuple(values.tolist())


def shown(display: Display, name: str, canonical: Floats) -> Floats:
    """Values of a quantity in the unit shown."""
    return display.unit(name).from_canonical(canonical)


def spread(display: Display, name: str, canonical: Floats) -> Floats:
    """Differences or standard uncertainties of a quantity in the unit shown (no offset)."""
    return np.asarray(canonical, dtype=np.float64) / display.unit(name).factor


def arterial(sheet: Sheet, rows: Ints) -> Ints:
    """The arterial ones among some rows."""
    chosen: Ints = rows[sheet.readings.site[rows] == Site.ARTERIAL]
    return chosen


def measured(
    sheet: Sheet, rows: Ints, name: str, display: Display, sites: Sequence[Site] = (), unit_of: str = ""
) -> Points:
    """What was measured: own values only; in the unit of another quantity where two share an axis."""
    keep = rows[np.isfinite(sheet.readings[name][rows])]
    if sites:
        keep = keep[np.isin(sheet.readings.site[keep], sites)]
    values = shown(display, unit_of or name, sheet.readings[name][keep])
    return Points(floats(sheet.readings.time[keep]), floats(values))


def known(sheet: Sheet, rows: Ints, name: str, display: Display) -> Points:
    """What was measured at any row, and what arterial rows carry; carried points say from when."""
    snap = sheet.snapshots
    own = (snap.source[name][rows] == rows) & (sheet.readings.site[rows] != Site.VENOUS)
    carried = ~own & np.isfinite(snap[name][rows]) & snap.arterial[rows]
    keep, is_carried = rows[own | carried], carried[own | carried]
    notes = tuple(_carried_words(age) if was else "" for age, was in zip(snap.age[name][keep], is_carried, strict=True))
    values = floats(shown(display, name, snap[name][keep]))
    return Points(floats(sheet.readings.time[keep]), values, tuple(is_carried.tolist()), notes)


def _carried_words(age: float) -> str:
    return f"carried {age_words(age)}" if age > 0 else f"read {age_words(age)} later"


def derived(sheet: Sheet, rows: Ints, name: str, display: Display, unit_of: str = "") -> Points:
    """A derived quantity of arterial rows; points resting on a carried value are marked and say on what."""
    keep = arterial(sheet, rows)
    keep = keep[np.isfinite(sheet.derived[name][keep])]
    flags = sheet.derived.flags[keep]
    return Points(
        floats(sheet.readings.time[keep]),
        floats(shown(display, unit_of or name, sheet.derived[name][keep])),
        carried(name, flags),
        tuple(basis_words(name, int(bits)) for bits in flags),
    )


def basis_words(name: str, bits: int) -> str:
    """On what a derived quantity rests, in words."""
    return ", ".join(words for bit, words in _BASIS_WORDS.get(name, ()) if bits & bit)


def supply_name(sheet: Sheet, rows: Ints) -> str:
    """The fullest measure of supply these rows have: DO2I, else DO2, else CaO2."""
    keep = arterial(sheet, rows)
    for name in ("do2i", "do2"):
        if np.isfinite(sheet.derived[name][keep]).any():
            return name
    return "cao2"


def flow_name(sheet: Sheet, rows: Ints) -> str:
    """Cardiac index if these rows have it or can have it from output and body surface, else cardiac output."""
    return "cardiac_index" if np.isfinite(_index(sheet, rows)).any() else "cardiac_output"


def _index(sheet: Sheet, rows: Ints) -> Floats:
    """Cardiac index, where not given as output over body surface [L/min/m2]."""
    index = sheet.snapshots["cardiac_index"][rows]
    return np.where(np.isnan(index), sheet.snapshots["cardiac_output"][rows] / sheet.derived["bsa"][rows], index)


def flow(sheet: Sheet, rows: Ints, display: Display) -> tuple[str, Points]:
    """Name and points of the flow that supply is made with; an index made from an output says so."""
    name = flow_name(sheet, rows)
    if name == "cardiac_output":
        return name, known(sheet, rows, name, display)
    given, made = (known(sheet, rows, measured_as, display) for measured_as in ("cardiac_index", "cardiac_output"))
    if not made:
        return name, given
    snap = sheet.snapshots
    source = np.maximum(snap.source["cardiac_index"][rows], snap.source["cardiac_output"][rows])
    own = (source == rows) & (sheet.readings.site[rows] != Site.VENOUS)
    values = _index(sheet, rows)
    keep = np.isfinite(values) & (own | snap.arterial[rows])
    age = np.fmax(snap.age["cardiac_index"][rows], snap.age["cardiac_output"][rows])
    direct = np.isfinite(snap["cardiac_index"][rows])
    notes = tuple(
        ", ".join(filter(None, ("" if mine else _carried_words(a), "" if index else _output_words(display, co))))
        for mine, a, index, co in zip(
            own[keep], age[keep], direct[keep], snap["cardiac_output"][rows][keep], strict=True
        )
    )
    return name, Points(floats(sheet.readings.time[rows][keep]), floats(shown(display, name, values[keep])),
                        tuple((~own[keep]).tolist()), notes)  # fmt: skip


def _output_words(display: Display, output: float) -> str:
    return f"from CO {display.value('cardiac_output', float(output), with_unit=True)}"


def label(name: str) -> str:
    """Symbol of a quantity."""
    return CATALOGUE[name].symbol


def carried(name: str, flags: Ints) -> tuple[bool, ...]:
    """Whether a derived quantity of rows with these flags rests on a carried haemoglobin or flow."""
    bits = _CARRIED_BITS.get(name, Flag.HB_CARRIED | Flag.FLOW_CARRIED)
    return tuple((flags & bits != 0).tolist())
