"""A small world for the tests of the screens: one unit, its people, one patient."""

from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

import pytest
from django.urls import reverse
from django.utils import timezone

from worksheet.ward.models import Bed, Membership, Patient, Role, Stay, Unit, User


@dataclass
class World:
    """What a test needs to type something, and a client that is logged in as the nurse."""

    client: object
    unit: Unit
    stay: Stay
    people: dict

    def url(self, name, *more):
        return reverse(name, args=[self.unit.slug, self.stay.reference, *more])

    def as_(self, name):
        self.client.force_login(self.people[name])
        return self

    def blank(self, **more):
        """A form as the page sends it, with the time of a few minutes ago."""
        at = (timezone.now() - timedelta(minutes=5)).astimezone(self.unit.zone)
        fields = {
            "date": f"{at:%Y-%m-%d}",
            "clock": f"{at:%H:%M}",
            "key": f"key-{id(more)}-{at.timestamp()}",
            "site": "1",
        }
        return {**fields, "begun_by": "nurse", **more}

    def gas(self, **more):
        """A full arterial slip, as a nurse in Zurich would type it."""
        slip = {"ph": "7.36", "pco2": "38", "po2": "88", "hb": "10.2", "so2": "96.4", "cohb": "0.9", "methb": "0.7",
                "o2hb": "94.9", "lactate": "1.8", "spo2": "96", "fio2": "40", "device": "7", "cardiac_output": "5.2",
                "flow_method": "1"}  # fmt: skip
        return self.blank(**{**slip, **more})


@pytest.fixture
def world(client, db):
    """The unit "north", two recorders, a reader, a stranger; one patient in bed 1."""
    unit = Unit.objects.create(name="North unit", slug="north", time_zone="Europe/Zurich")
    beds = [Bed.objects.create(unit=unit, name=str(n), position=n) for n in (1, 2)]
    roles = {"nurse": Role.RECORDER, "other": Role.RECORDER, "reader": Role.READER, "stranger": None}
    people = {name: User.objects.create_user(name, password="x") for name in roles}
    for name, role in roles.items():
        if role is not None:
            Membership.objects.create(user=people[name], unit=unit, role=role)
    stay = Stay.objects.create(
        unit=unit, patient=Patient.objects.create(identifier="T-1"), bed=beds[0], reference="T-1",
        height=170, weight=70, age=60, admitted_at=datetime.now(UTC) - timedelta(days=3),
    )  # fmt: skip
    return World(client, unit, stay, people).as_("nurse")
