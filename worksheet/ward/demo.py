"""The demo unit: invented patients with known stories, so that every screen has something to show.

Nobody here is real. Each story is a few turning points of the underlying state; samples are read off it at irregular
times with an analyser's noise, so the pages meet what they meet in life: gaps, carried values, contradictions.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from datetime import datetime, timedelta
from typing import Any

import numpy as np
from django.db import transaction

from worksheet.oxygen.curve import po2_tanh, saturation_tanh
from worksheet.oxygen.readings import Device, Event, FlowMethod, Site

from . import audit, record
from .models import Bed, Entry, Membership, Patient, Role, Stay, Unit, User

UNIT_NAME = "Demo unit (invented patients)"
SLUG = "demo"
BEDS = 12
_NOISE = {"ph": 0.006, "pco2": 0.7, "po2": 0.012, "hb": 0.008, "cardiac_output": 0.03, "lactate": 0.03}


@dataclass(frozen=True)
class Story:
    """One invented course: turning points (hours before now → state) and how it was sampled."""

    reference: str
    bed: int
    note: str
    turns: Mapping[str, tuple[tuple[float, float], ...]]
    admitted: float = 72.0  # hours before now
    gas_every: float = 4.0
    flow_every: float = 0.0  # 0: never measured
    venous_every: float = 0.0
    co_oximetry: bool = True
    device: Device = Device.VENTILATOR
    height: float = 172.0
    weight: float = 74.0
    age: float = 61.0
    spo2_offset: float = 0.0
    events: tuple[tuple[float, Event, float | None, str], ...] = ()
    skip: tuple[str, ...] = field(default=())
    last: float = 0.6  # the newest gas is this old


_BASE: dict[str, tuple[tuple[float, float], ...]] = {
    "ph": ((72, 7.39),), "pco2": ((72, 40),), "pf": ((72, 340),), "fio2": ((72, 0.40),), "hb": ((72, 10.8),),
    "co": ((72, 5.6),), "vo2": ((72, 225),), "cohb": ((72, 0.009),), "methb": ((72, 0.007),), "lactate": ((72, 1.3),),
    "temperature": ((72, 37.0),), "peep": ((72, 8),), "rr": ((72, 18),), "map": ((72, 76),), "hr": ((72, 88),),
}  # fmt: skip

STORIES: tuple[Story, ...] = (
    Story("K-2017", 1, "Septic shock, recovering",
          {"co": ((72, 3.9), (40, 5.4), (0, 6.1)), "lactate": ((72, 6.8), (48, 3.1), (24, 1.6), (0, 1.1)),
           "pf": ((72, 170), (36, 250), (0, 330)), "fio2": ((72, 0.6), (36, 0.45), (0, 0.35)),
           "temperature": ((72, 38.9), (0, 37.2)), "map": ((72, 61), (0, 78))},
          flow_every=4, venous_every=8, age=58),
    Story("K-2024", 2, "Pneumonia, gas exchange failing since the evening",
          {"pf": ((72, 290), (16, 270), (9, 150), (0, 62)), "fio2": ((72, 0.45), (14, 0.5), (6, 0.85), (0, 0.95)),
           "pco2": ((72, 39), (10, 42), (0, 52)), "ph": ((72, 7.40), (10, 7.38), (0, 7.29)),
           "lactate": ((72, 1.2), (8, 1.4), (0, 2.6)), "peep": ((72, 8), (8, 10), (0, 14)),
           "temperature": ((72, 38.0), (0, 38.9)), "rr": ((72, 20), (0, 30))},
          gas_every=3, flow_every=3, venous_every=6, height=181, weight=88, age=49, last=0.4),
    Story("K-2031", 3, "After an infarct, output falling",
          {"co": ((72, 5.2), (12, 5.0), (0, 2.8)), "lactate": ((72, 1.4), (10, 1.6), (0, 4.6)),
           "map": ((72, 74), (10, 70), (0, 56)), "hr": ((72, 84), (0, 116)), "ph": ((72, 7.41), (8, 7.39), (0, 7.30)),
           "pco2": ((72, 38), (0, 34))},
          flow_every=4, venous_every=4, height=168, weight=71, age=72, last=0.9),
    Story("K-2041", 4, "Bleeding after bowel surgery",
          {"hb": ((72, 10.6), (11, 10.3), (5, 8.2), (0, 6.7)), "co": ((72, 5.3), (9, 5.4), (0, 5.9)),
           "lactate": ((72, 1.2), (9, 1.5), (0, 3.9)), "hr": ((72, 82), (9, 92), (0, 118)),
           "map": ((72, 78), (9, 72), (0, 60)), "ph": ((72, 7.40), (0, 7.31))},
          gas_every=3, flow_every=3, venous_every=6, height=176, weight=79, age=66, last=0.7,
          events=((6.2, Event.BLEED, 600, "drain filled with fresh blood"),)),
    Story("K-2055", 5, "Swallowed paint remover (dichloromethane): carbon monoxide rises while the finger reads 98",
          {"cohb": ((30, 0.02), (16, 0.05), (0, 0.29)), "pf": ((72, 410),), "fio2": ((72, 0.30),),
           "lactate": ((30, 1.1), (0, 2.8)), "hb": ((72, 13.6),)},
          admitted=30, gas_every=3, flow_every=3, venous_every=9, height=164, weight=62, age=34, last=0.5),
    Story("K-2058", 6, "Methaemoglobin after a topical anaesthetic",
          {"methb": ((72, 0.008), (9, 0.012), (3, 0.21), (0, 0.26)), "pf": ((72, 380),), "fio2": ((72, 0.35),),
           "hb": ((72, 12.4),), "lactate": ((72, 1.0), (0, 2.4))},
          gas_every=3, flow_every=3, venous_every=9, height=170, weight=68, age=45, last=0.8),
    Story("K-2062", 7, "Sparse data: no haemoglobin since yesterday, no flow, old gas",
          {"pf": ((72, 300), (0, 240))}, gas_every=11, co_oximetry=False, device=Device.NASAL_CANNULA, age=80,
          skip=("hb_late", "lactate"), last=7.5),
    Story("K-2077", 8, "Data that contradict each other", {"pf": ((72, 330), (0, 320)), "fio2": ((72, 0.30),)},
          co_oximetry=False, flow_every=0, spo2_offset=-0.115, age=55, last=0.5),
    Story("K-2080", 9, "After cardiac surgery, steady", {"co": ((72, 5.0),)}, flow_every=4, venous_every=8, age=69,
          height=174, weight=82, last=1.1),
    Story("K-2083", 10, "Sepsis: haemoglobin and output fall together",
          {"hb": ((72, 9.6), (12, 9.3), (0, 7.4)), "co": ((72, 6.8), (12, 6.5), (0, 4.6)),
           "pf": ((72, 220), (12, 200), (0, 170)), "fio2": ((72, 0.5), (0, 0.6)), "lactate": ((72, 2.2), (0, 5.1)),
           "map": ((72, 70), (0, 58)), "temperature": ((72, 38.6), (0, 39.3))},
          gas_every=4, flow_every=4, venous_every=6, height=179, weight=91, age=63, last=0.3),
)  # fmt: skip


def _state(story: Story, hours_ago: float) -> dict[str, float]:
    """The underlying state of a story at a moment, interpolated between its turning points."""
    turns = {**_BASE, **story.turns}
    return {
        name: float(np.interp(-hours_ago, [-t for t, _ in points], [v for _, v in points]))
        for name, points in turns.items()
    }


def _times(rng: np.random.Generator, story: Story, every: float) -> list[float]:
    """Irregular sampling times [h before now], newest last."""
    if not every:
        return []
    count = int((story.admitted - story.last) / every - 0.5)
    regular = story.last + every * np.arange(count, -1, -1)
    shaken = regular + np.append(rng.uniform(-0.25, 0.25, count) * every, 0.0)
    return [story.admitted - 0.2, *(float(t) for t in shaken)]


def _beside(gases: list[float], wanted: list[float]) -> list[float]:
    """The gas nearest to each wanted time, oldest first: people measure flow and draw venous blood with the gas."""
    return sorted({min(gases, key=lambda gas: abs(gas - time)) for time in wanted}, reverse=True)


def _noisy(rng: np.random.Generator, name: str, value: float) -> float:
    sd = _NOISE.get(name, 0.0)
    return value + rng.normal(0, sd if name in ("ph", "pco2") else sd * value)


def _gas(rng: np.random.Generator, story: Story, ago: float) -> dict[str, float]:
    """One arterial slip with the bedside readings of that moment, canonical units."""
    s = _state(story, ago)
    po2 = round(_noisy(rng, "po2", s["pf"] * s["fio2"]))
    ph, pco2 = round(_noisy(rng, "ph", s["ph"]), 2), round(_noisy(rng, "pco2", s["pco2"]))
    so2 = float(saturation_tanh(po2, ph, pco2, cohb=s["cohb"], methb=s["methb"])) + rng.normal(0, 0.004)
    inactive = s["cohb"] + s["methb"]
    # Common practice: the finger takes COHb for O2Hb, and MetHb draws it toward 85 %.
    finger = so2 + rng.normal(0, 0.008) - 0.55 * s["methb"] * (so2 > 0.8) + story.spo2_offset
    values = {
        "ph": ph, "pco2": pco2, "po2": po2, "lactate": round(_noisy(rng, "lactate", s["lactate"]), 1),
        "hb": round(_noisy(rng, "hb", s["hb"]), 1), "spo2": round(min(finger, 1.0), 2), "fio2": round(s["fio2"], 2),
        "temperature": round(s["temperature"], 1), "mean_arterial_pressure": round(s["map"]),
        "heart_rate": round(s["hr"]), "respiratory_rate": round(s["rr"]),
    }  # fmt: skip
    if story.device is Device.VENTILATOR:
        values |= {"peep": round(s["peep"]), "mean_airway_pressure": round(s["peep"] + 5)}
    if story.co_oximetry:
        so2 = min(round(so2, 3), 0.998)
        values |= {"so2": so2, "o2hb": round(so2 * (1 - inactive), 3), "cohb": round(s["cohb"], 3),
                   "methb": round(s["methb"], 3)}  # fmt: skip
    if "hb_late" in story.skip and ago < 20:
        del values["hb"]
    return {name: value for name, value in values.items() if name not in story.skip}


def _venous(rng: np.random.Generator, story: Story, ago: float) -> dict[str, float]:
    """The central-venous slip that goes with a gas: content by Fick from the story's consumption."""
    s = _state(story, ago)
    so2 = float(saturation_tanh(s["pf"] * s["fio2"], s["ph"], s["pco2"], cohb=s["cohb"], methb=s["methb"]))
    bound = 13.9 * s["hb"] * (1 - s["cohb"] - s["methb"]) * s["co"]
    venous = float(np.clip(so2 - s["vo2"] / bound, 0.2, 0.95)) + rng.normal(0, 0.006)
    ph = round(_noisy(rng, "ph", s["ph"] - 0.04), 2)
    pco2 = round(_noisy(rng, "pco2", s["pco2"] + 5 + 12 * max(0.0, 0.6 - venous)))
    po2 = _noisy(rng, "po2", float(po2_tanh(venous, ph, pco2, cohb=s["cohb"], methb=s["methb"])))
    values = {"ph": ph, "pco2": pco2, "po2": round(po2), "so2": round(venous, 3)}
    if story.co_oximetry:
        values |= {"cohb": round(s["cohb"], 3), "methb": round(s["methb"], 3)}
    return values


def _entries(story: Story, now: datetime) -> Iterator[record.NewEntry]:
    """All entries of a story."""
    rng = np.random.default_rng(int(story.reference[2:]))

    def at(ago: float) -> datetime:
        return (now - timedelta(hours=ago)).replace(second=0, microsecond=0)

    gases = _times(rng, story, story.gas_every)
    for ago in gases:
        yield record.NewEntry(at(ago), Site.ARTERIAL, _gas(rng, story, ago), device=story.device)
    for ago in _beside(gases, _times(rng, story, story.venous_every)):
        yield record.NewEntry(at(ago - 0.05), Site.CENTRAL_VENOUS, _venous(rng, story, ago))
    for ago in _beside(gases, _times(rng, story, story.flow_every)):
        flow = round(_noisy(rng, "cardiac_output", _state(story, ago)["co"]), 1)
        values = {"cardiac_output": flow}
        yield record.NewEntry(at(ago + 0.15), values=values, flow_method=FlowMethod.THERMODILUTION)
    for ago, event, amount, note in story.events:
        yield record.NewEntry(at(ago), event=event, event_amount=amount, note=note)
    if story.reference == "K-2077":
        yield from _contradictions(at)


def _contradictions(at: Any) -> Iterator[record.NewEntry]:
    """What a tired night produces: a venous sample called arterial, and a PO2 that the lung cannot give."""
    yield record.NewEntry(at(9.3), Site.ARTERIAL, {"ph": 7.33, "pco2": 47, "po2": 39, "so2": 0.71, "fio2": 0.30,
                                                   "hb": 10.9}, device=Device.VENTILATOR)  # fmt: skip
    yield record.NewEntry(at(5.1), Site.ARTERIAL, {"ph": 7.40, "pco2": 40, "po2": 290, "bicarbonate": 34.0,
                                                   "fio2": 0.30, "hb": 10.7}, device=Device.VENTILATOR)  # fmt: skip


@transaction.atomic
def make(now: datetime, password: str) -> Unit:
    """Make the demo unit, its people and its patients, unless they are there."""
    unit, new = Unit.objects.get_or_create(slug=SLUG, defaults={"name": UNIT_NAME})
    people = _people(unit, password)
    if not new:
        return unit
    beds = [Bed.objects.create(unit=unit, name=str(n), position=n) for n in range(1, BEDS + 1)]
    entries: list[Entry] = []
    for story in STORIES:
        patient = Patient.objects.create(system="demo", identifier=story.reference)
        stay = Stay.objects.create(
            unit=unit, patient=patient, bed=beds[story.bed - 1], reference=story.reference,
            admitted_at=now - timedelta(hours=story.admitted + 0.5), height=story.height, weight=story.weight,
            age=story.age, note=f"Invented patient. {story.note}.",
        )  # fmt: skip
        for number, new_entry in enumerate(_entries(story, now)):
            keyed = replace(new_entry, key=f"demo-{story.reference}-{number}", source="demo")
            entries.append(record.build(stay, people["nurse"], keyed))
    Entry.objects.bulk_create(entries)
    audit.write("demo", "imported", unit=unit.name, subject="invented patients", entries=len(entries))
    return unit


def _people(unit: Unit, password: str) -> dict[str, User]:
    """Demo logins, one for each role."""
    roles = {"reader": Role.READER, "nurse": Role.RECORDER, "lead": Role.LEAD}
    people = {}
    for name in (*roles, "admin"):
        user, _ = User.objects.get_or_create(username=name, defaults={"is_superuser": name == "admin"})
        if not user.check_password(password):
            user.set_password(password)
            user.save(update_fields=["password"])
        if name in roles:
            Membership.objects.get_or_create(user=user, unit=unit, defaults={"role": roles[name]})
        people[name] = user
    return people
