"""The review window: handovers by the unit's own clock, also in the nights when clocks change."""

from datetime import UTC, datetime

import pytest
from django.http import QueryDict

from tests.review.wards import make_stay, make_unit, make_user
from worksheet.review.window import last_handover, window_of
from worksheet.ward.models import ReviewMark

pytestmark = pytest.mark.django_db
# Zurich goes from UTC+1 to UTC+2 on 29 March 2026 at 01:00 UTC, and back on 25 October 2026 (IANA time zone data).


def at(text):
    return datetime.fromisoformat(text).replace(tzinfo=UTC)


@pytest.mark.parametrize(
    ("now", "start"),
    [
        ("2026-03-28T14:00", "2026-03-28T06:00"),  # winter: 07:00 is 06:00 UTC
        ("2026-03-29T04:30", "2026-03-28T18:00"),  # the short night: since 19:00 winter time
        ("2026-03-29T09:00", "2026-03-29T05:00"),  # 07:00 summer time
        ("2026-10-25T05:30", "2026-10-24T17:00"),  # the long night: since 19:00 summer time
        ("2026-10-25T10:00", "2026-10-25T06:00"),  # 07:00 winter time
    ],
)
def test_handover_over_a_clock_change(now, start):
    unit = make_unit()
    assert last_handover(unit, at(now)) == at(start)


def test_the_morning_round_still_sees_the_night():
    unit = make_unit()
    assert last_handover(unit, at("2026-07-01T06:30")) == at("2026-06-30T17:00")  # 08:30 local: since 19:00
    assert last_handover(unit, at("2026-07-01T08:30")) == at("2026-07-01T05:00")  # 10:30 local: since 07:00


def test_shift_times_are_the_units_own():
    unit = make_unit(shift_starts=["06:30", "14:30", "22:30"])
    assert last_handover(unit, at("2026-07-01T19:00")) == at("2026-07-01T12:30")


def test_window_is_read_from_the_address_and_written_back():
    unit = make_unit()
    user = make_user(unit)
    window = window_of(QueryDict("window=24"), unit, user)
    assert round((window.until - window.since).total_seconds() / 3600) == 24
    assert window.query == "window=24"
    free = window_of(QueryDict("window=free&from=2026-03-01T19:00&to=2026-03-02T07:00"), unit, user)
    assert (free.since, free.until) == (at("2026-03-01T18:00"), at("2026-03-02T06:00"))
    again = window_of(QueryDict(free.query), unit, user)
    assert (again.since, again.until) == (free.since, free.until)


@pytest.mark.parametrize(
    "query", ["window=free", "window=free&from=x&to=y", "window=free&from=2026-03-02T07:00&to=2026-03-01T07:00"]
)
def test_a_window_that_makes_no_sense_says_so_and_falls_back(query):
    unit = make_unit()
    window = window_of(QueryDict(query), unit, make_user(unit))
    assert window.kind == "handover"
    assert window.problem


def test_since_my_last_review_is_mine_alone():
    unit = make_unit()
    anna, bert = make_user(unit), make_user(unit, "bert")
    stay = make_stay(unit, 1)
    mark = ReviewMark.objects.create(stay=stay, user=anna, at=at("2026-03-01T18:00"))
    assert window_of(QueryDict("window=review"), unit, anna, stay).since == mark.at
    other = window_of(QueryDict("window=review"), unit, bert, stay)
    assert other.kind == "handover"
    assert "not marked a review" in other.problem
