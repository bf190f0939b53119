"""A unit with a recorder, a lead, a reader and a stranger; and files as they come in."""

import json
from datetime import UTC, datetime

import pytest

from worksheet.transfer import pipeline
from worksheet.transfer.times import TimeRules
from worksheet.ward.models import Bed, Membership, Patient, Role, Stay, Unit, User

NOW = datetime(2026, 3, 1, 12, 0, tzinfo=UTC)


@pytest.fixture
def unit(db):
    return Unit.objects.create(name="Unit Seven", slug="u7", time_zone="Europe/Zurich")


@pytest.fixture
def people(unit):
    made = {}
    for name, role in (("reader", Role.READER), ("nurse", Role.RECORDER), ("lead", Role.LEAD), ("stranger", None)):
        made[name] = User.objects.create_user(name, password="not-a-real-password-1")
        if role is not None:
            Membership.objects.create(user=made[name], unit=unit, role=role)
    return made


@pytest.fixture
def nurse(people):
    return people["nurse"]


@pytest.fixture
def stay(unit):
    patient = Patient.objects.create(system="UNIT7", identifier="K-2041")
    bed = Bed.objects.create(unit=unit, name="4")
    return Stay.objects.create(unit=unit, patient=patient, reference="K-2041", bed=bed)


def options(**more):
    rules = {k: more.pop(k) for k in ("zone", "order", "fold", "now", "shifted") if k in more}
    return pipeline.Options(TimeRules(**{"now": NOW, **rules}), **{"create": True, **more})


@pytest.fixture
def bring(unit, nurse):
    """Bring bytes (or text, or JSON data) in through the pipeline; the preview that came of it."""

    def run(data, kind="csv", *, dry_run=False, **more):
        if isinstance(data, (dict, list)):
            data = json.dumps(data)
        raw = data.encode() if isinstance(data, str) else data
        return pipeline.run(unit, nurse, f"file.{kind}", kind, raw, options(**more), dry_run=dry_run)

    return run
