"""Many people at the same moment: the chain stays one chain, and of two who correct one entry one is told."""

import threading
from datetime import UTC, datetime

import pytest
from django.db import connection

from worksheet.oxygen.readings import Site
from worksheet.ward import audit, record
from worksheet.ward.models import AuditEvent, Entry, Patient, Stay, Unit, User

# Threads have connections of their own; SQLite's in-memory database is one for all, which would test nothing.
pytestmark = pytest.mark.django_db(transaction=True)
T0 = datetime(2026, 3, 1, 6, tzinfo=UTC)


@pytest.fixture
def stay():
    if connection.vendor == "sqlite" and "memory" in str(connection.settings_dict["NAME"]):
        pytest.skip("SQLite serialises writers by processes; tests/bench/load and test_killed_server do this there")
    unit = Unit.objects.create(name="Unit 7", slug="unit-7")
    return Stay.objects.create(unit=unit, patient=Patient.objects.create(identifier="K-1"), reference="K-1")


def at_once(number, action):
    """Run ``action(n)`` in threads that start together; what each returned or raised."""
    gate, answers = threading.Barrier(number), [None] * number

    def run(n):
        gate.wait()
        try:
            answers[n] = action(n)
        except Exception as error:
            answers[n] = error
        finally:
            connection.close()

    threads = [threading.Thread(target=run, args=(n,)) for n in range(number)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join(timeout=60)
    return answers


def slip(key, po2=90.0):
    return record.NewEntry(T0, Site.ARTERIAL, {"po2": po2}, key=key)


def test_the_chain_does_not_fork(stay):
    nurse = User.objects.create_user("nurse")
    audit.write("nurse", "viewed")

    def record_some(n):
        return [record.record(stay, nurse, slip(f"{n}-{i}"))[1] for i in range(8)]

    assert at_once(8, record_some) == [[True] * 8] * 8
    assert AuditEvent.objects.count() == 65
    assert list(audit.broken_places()) == []


def test_an_empty_chain_has_one_beginning(stay):
    at_once(8, lambda n: audit.write(f"nurse-{n}", "viewed"))
    assert AuditEvent.objects.filter(previous_hash="").count() == 1
    assert list(audit.broken_places()) == []


def test_of_two_who_correct_the_same_entry_at_once_one_is_told(stay):
    people = [User.objects.create_user(f"nurse-{n}") for n in range(2)]
    for turn in range(10):
        entry, _ = record.record(stay, people[0], slip(f"turn-{turn}"))
        answers = at_once(
            2, lambda n, e=entry, t=turn: record.correct(e, people[n], slip(f"{t}-{n}", 95.0 + n), "bubble")
        )
        kept = [a for a in answers if isinstance(a, Entry)]
        told = [a for a in answers if isinstance(a, record.AlreadyReplaced)]
        assert (len(kept), len(told)) == (1, 1), answers
        assert told[0].by == kept[0]
    assert list(audit.broken_places()) == []


def test_the_same_form_sent_twice_at_once_is_stored_once(stay):
    nurse = User.objects.create_user("nurse")
    answers = at_once(6, lambda n: record.record(stay, nurse, slip("same")))
    assert sorted(new for _, new in answers) == [False] * 5 + [True]
    assert len({entry.pk for entry, _ in answers}) == 1
    assert Entry.objects.count() == 1
