"""The parts of a gas slip in the order in which it is read out, and the words for what can be chosen on it."""

from __future__ import annotations

from collections.abc import Iterator

from worksheet.oxygen.quantities import MEASURED
from worksheet.oxygen.readings import Device, Event, FlowMethod, Site

GAS = ("ph", "pco2", "po2", "hb", "so2", "o2hb", "cohb", "methb", "lactate", "bicarbonate")
GROUPS: tuple[tuple[str, str, tuple[str, ...]], ...] = (  # in the order in which a gas slip is read out
    ("slip", "Gas slip", GAS),
    ("breathing", "Breathing", ("spo2", "fio2", "oxygen_flow", "peep", "mean_airway_pressure", "respiratory_rate")),
    ("flow", "Flow", ("cardiac_output", "cardiac_index", "vo2_measured")),
    ("body", "Circulation and temperature", ("temperature", "mean_arterial_pressure", "heart_rate")),
)
_LISTED = {name for _, _, names in GROUPS for name in names}
RARE: tuple[str, ...] = tuple(name for name in MEASURED if name not in _LISTED and name != "age")
SAMPLE_ONLY = frozenset({*GAS, "so2_calculated", "sulfhb"})  # what only a blood sample can give
NOTE_LONGEST = 2000

SITE_WORDS = {
    Site.ARTERIAL: "arterial",
    Site.MIXED_VENOUS: "mixed venous (pulmonary artery)",
    Site.CENTRAL_VENOUS: "central venous",
    Site.VENOUS: "peripheral venous",
    Site.NONE: "no sample, bedside readings only",
}
DEVICE_WORDS = {
    Device.UNKNOWN: "not said",
    Device.ROOM_AIR: "room air",
    Device.NASAL_CANNULA: "nasal cannula",
    Device.SIMPLE_MASK: "simple mask",
    Device.RESERVOIR_MASK: "mask with reservoir",
    Device.HIGH_FLOW: "high-flow nasal oxygen",
    Device.NONINVASIVE: "non-invasive ventilation or CPAP",
    Device.VENTILATOR: "ventilator",
}
METHOD_WORDS = {
    FlowMethod.UNKNOWN: "not said",
    FlowMethod.THERMODILUTION: "thermodilution",
    FlowMethod.PULSE_CONTOUR: "pulse contour",
    FlowMethod.ULTRASOUND: "ultrasound",
    FlowMethod.FICK: "Fick",
    FlowMethod.OTHER: "other",
}
KIND_WORDS = {
    Event.TRANSFUSION: "transfusion of red cells",
    Event.BLEED: "bleed",
    Event.DEVICE_CHANGE: "change of the oxygen device or its setting",
    Event.BED_MOVE: "move to another bed",
    Event.OTHER: "something else",
}
AMOUNT_UNITS = {Event.TRANSFUSION: "units", Event.BLEED: "mL"}


def names() -> Iterator[str]:
    """Every quantity of the form, in its order."""
    for _, _, group in GROUPS:
        yield from group
    yield from RARE
