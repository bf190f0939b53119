"""Several people, or one impatient one, at the very same moment: nothing twice, nothing lost."""

from concurrent.futures import ThreadPoolExecutor
from datetime import timedelta
from functools import partial

import pytest
from django.conf import settings
from django.db import connection, connections
from django.test import Client
from django.utils import timezone

from worksheet.oxygen.readings import Site
from worksheet.ward import record
from worksheet.ward.models import AuditEvent, Bed, Entry, Membership, Patient, Role, Stay, Unit, User


@pytest.fixture
def ward(transactional_db):
    if connection.vendor == "sqlite" and connection.is_in_memory_db():
        pytest.skip("threads need a data base in a file or a server; the whole suite runs this on a file")
    unit = Unit.objects.create(name="North unit", slug="north")
    for name in ("nurse", "other"):
        Membership.objects.create(user=User.objects.create_user(name, password="x"), unit=unit, role=Role.RECORDER)
    bed = Bed.objects.create(unit=unit, name="1", position=1)
    Bed.objects.create(unit=unit, name="2", position=2)
    return Stay.objects.create(unit=unit, patient=Patient.objects.create(identifier="T-1"), reference="T-1", bed=bed)


def at_once(senders):
    """Run every sender in a thread of its own; the status codes of their answers."""

    def run(sender):
        try:
            return sender().status_code
        finally:
            connections.close_all()

    with ThreadPoolExecutor(len(senders)) as pool:
        return list(pool.map(run, senders))


def client(name):
    browser = Client()
    browser.force_login(User.objects.get(username=name), backend=settings.AUTHENTICATION_BACKENDS[-1])
    return browser


def slip(**more):
    at = timezone.now() - timedelta(minutes=5)
    return {
        "date": f"{at:%Y-%m-%d}",
        "clock": f"{at:%H:%M}",
        "site": "1",
        "ph": "7.4",
        "po2": "90",
        "hb": "9.1",
        **more,
    }


def post(name, address, fields):
    """A sender: a person's own browser, ready to post."""
    return partial(client(name).post, address, fields)


def test_one_form_sent_eight_times_at_once_is_one_entry(ward):
    sent = slip(key="once", begun_by="nurse")
    assert at_once([post("nurse", "/u/north/stay/T-1/entry/new", sent) for _ in range(8)]) == [302] * 8
    assert Entry.objects.count() == 1
    assert AuditEvent.objects.filter(action="recorded").count() == 1


def test_of_two_correctors_at_once_one_is_told(ward):
    nurse = User.objects.get(username="nurse")
    at = timezone.now() - timedelta(minutes=30)
    entry, _ = record.record(ward, nurse, record.NewEntry(at, Site.ARTERIAL, {"ph": 7.4, "po2": 90.0, "hb": 9.1}))
    mine = {"date": f"{at:%Y-%m-%d}", "clock": f"{at:%H:%M}", "reason": "typo"}
    senders = [
        post(name, f"/u/north/stay/T-1/entry/{entry.pk}/correct", slip(**mine, key=name, begun_by=name, hb=hb))
        for name, hb in (("nurse", "9.2"), ("other", "9.3"))
    ]
    assert sorted(at_once(senders)) == [302, 422]
    assert Entry.objects.filter(replaces=entry).count() == 1
    assert Entry.objects.current().count() == 1


def test_two_patients_cannot_take_one_bed_at_once(ward):
    Stay.objects.create(unit=ward.unit, patient=Patient.objects.create(identifier="T-2"), reference="T-2")
    bed = Bed.objects.get(name="2")
    event = slip(kind="4", bed=str(bed.pk), site="", begun_by="nurse")
    senders = [post("nurse", f"/u/north/stay/{ref}/event/new", {**event, "key": ref}) for ref in ("T-1", "T-2")]
    assert sorted(at_once(senders)) == [302, 422]
    assert Stay.objects.filter(bed=bed).count() == 1
    assert Entry.objects.count() == 1, "the move that was refused left no event"
