"""Units full of invented patients, for the tests of the screens."""

from datetime import timedelta

import numpy as np
from django.utils import timezone

from worksheet.oxygen.readings import Device, FlowMethod, Site
from worksheet.ward import record
from worksheet.ward.models import Bed, Entry, Membership, Patient, Role, Stay, Unit, User


def make_unit(slug="ward", name="Ward unit", zone="Europe/Zurich", **more):
    """A unit without beds."""
    return Unit.objects.create(slug=slug, name=name, time_zone=zone, **more)


def make_user(unit, name="anna", role=Role.RECORDER):
    """A person with a role in the unit."""
    user = User.objects.create_user(name, password="x")
    if role is not None:
        Membership.objects.create(user=user, unit=unit, role=role)
    return user


def make_stay(unit, number, **more):
    """A patient in a bed of the unit."""
    bed = Bed.objects.create(unit=unit, name=str(number), position=number)
    patient = Patient.objects.create(system=unit.slug, identifier=f"{unit.slug}-{number}")
    facts = {"height": 175.0, "weight": 75.0, "age": 60.0, "admitted_at": timezone.now() - timedelta(days=4), **more}
    return Stay.objects.create(unit=unit, patient=patient, bed=bed, reference=f"W-{number:02d}", **facts)


STEADY = {"ph": 7.39, "pco2": 40.0, "po2": 92.0, "hb": 10.5, "so2": 0.965, "cohb": 0.010, "methb": 0.007,
          "lactate": 1.2, "spo2": 0.97, "fio2": 0.4, "temperature": 37.0, "cardiac_output": 5.4}  # fmt: skip


def gas(**more):
    """A full arterial slip; None leaves a value out."""
    return {name: value for name, value in {**STEADY, **more}.items() if value is not None}


def add_gas(stay, user, ago, site=Site.ARTERIAL, **more):
    """An entry so many hours ago."""
    values = gas(**more) if site == Site.ARTERIAL else {k: v for k, v in more.items() if v is not None}
    new = record.NewEntry(timezone.now() - timedelta(hours=ago), site, values, device=Device.VENTILATOR,
                          flow_method=FlowMethod.THERMODILUTION)  # fmt: skip
    entry, _ = record.record(stay, user, new)
    return entry


def fill(unit, user, beds, hours=72.0, every=4.0):
    """Beds with a gas and a venous sample every so many hours; every third bed loses haemoglobin."""
    rng = np.random.default_rng(7)
    entries, now = [], timezone.now()
    for number in range(1, beds + 1):
        stay = make_stay(unit, number)
        for n, ago in enumerate(np.arange(0.3, hours, every)):
            hb = 10.5 - (3.5 * max(0.0, 1 - ago / 10) if number % 3 == 0 else 0.0)
            values = gas(hb=round(hb, 1), po2=float(round(92 + rng.normal(0, 2))))
            when = now - timedelta(hours=float(ago))
            arterial = record.NewEntry(when, Site.ARTERIAL, values, device=Device.VENTILATOR,
                                       flow_method=FlowMethod.THERMODILUTION, key=f"{stay.pk}-{n}")  # fmt: skip
            venous_values = {"ph": 7.35, "pco2": 46.0, "po2": 37.0, "so2": 0.69}
            venous = record.NewEntry(
                when - timedelta(minutes=3), Site.CENTRAL_VENOUS, venous_values, key=f"{stay.pk}-{n}v"
            )
            entries += [record.build(stay, user, arterial), record.build(stay, user, venous)]
    Entry.objects.bulk_create(entries)


def counted(queries):
    """Queries that ask or write something; the marks of nested transactions are none."""
    return [q["sql"] for q in queries.captured_queries if not q["sql"].startswith(("SAVEPOINT", "RELEASE SAVEPOINT"))]
