"""Whose values these are: by identifier, in the stay that covers the time; a further stay only when asked."""

from datetime import UTC, datetime, timedelta

import pytest

from worksheet.ward.models import Entry, Patient, Stay

ADMITTED = datetime(2026, 2, 20, 8, 0, tzinfo=UTC)
LINE = "stay,time,site,ph\nK-2041,{},arterial,7.3\n"


@pytest.fixture
def admitted(stay):
    stay.admitted_at = ADMITTED
    stay.save()
    return stay


def test_values_within_the_stay_and_just_around_it(bring, admitted):
    for hours in (-20, 0, 100):
        assert bring(LINE.format((ADMITTED + timedelta(hours=hours)).isoformat()), create=False).counts() == {"new": 1}


def test_values_from_long_before_admission_wait_or_make_an_earlier_stay(bring, admitted):
    text = LINE.format("2026-02-10T05:00:00Z") + "K-2041,2026-02-11T05:00:00Z,arterial,7.2\n"
    seen = bring(text, create=False)
    assert seen.counts() == {"unmatched": 2}
    assert seen.rows[0].reason == "the stay of K-2041 does not cover this time"
    assert bring(text).counts() == {"new": 2}
    earlier = Stay.objects.exclude(pk=admitted.pk).get()
    assert (earlier.reference, earlier.patient) == ("K-2041-2026-02-10", admitted.patient)
    assert (earlier.admitted_at.day, earlier.discharged_at.day) == (10, 11)
    assert bring(text).counts() == {"same": 2}
    assert bring(LINE.format("2026-02-25T05:00:00Z")).counts() == {"new": 1}
    assert Entry.objects.filter(stay=admitted).count() == 1
    assert Stay.objects.count() == 2


def test_after_discharge_the_next_stay_is_another_one(bring, admitted):
    admitted.discharged_at = ADMITTED + timedelta(days=2)
    admitted.save()
    assert bring(LINE.format("2026-02-26T05:00:00Z")).counts() == {"new": 1}
    assert bring(LINE.format("2026-02-27T05:00:00Z")).counts() == {"new": 1}
    assert Stay.objects.count() == 2
    assert Stay.objects.exclude(pk=admitted.pk).get().discharged_at is None


def test_many_patients_are_looked_up_at_once(bring, django_assert_max_num_queries):
    text = "stay,time,site,ph\n" + "".join(f"P{n},2026-02-10T05:00:00Z,arterial,7.3\n" for n in range(200))
    bring(text)
    with django_assert_max_num_queries(60):
        assert bring(text).counts() == {"same": 200}


def test_the_same_number_in_another_unit_is_another_person(bring, unit):
    other = Patient.objects.create(system="unit:elsewhere", identifier="A-1")
    bring("stay,time,site,ph\nA-1,2026-02-10T05:00:00Z,arterial,7.3\n")
    assert Stay.objects.get().patient != other
