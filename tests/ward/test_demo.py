"""The demo unit: invented, complete, and the same at every start."""

from datetime import UTC, datetime

import pytest

from worksheet.ward import demo
from worksheet.ward.models import AuditEvent, Entry, Membership, Stay, Unit, User

NOW = datetime(2026, 3, 1, 6, 30, tzinfo=UTC)
pytestmark = pytest.mark.django_db


def test_it_shows_at_least_eight_invented_patients_over_72_hours():
    unit = demo.make(NOW, "invented-password-1")
    assert unit.stays.count() >= 8
    times = Entry.objects.order_by("time").values_list("time", flat=True)
    assert (times.last() - times.first()).total_seconds() / 3600 > 70
    assert times.last() <= NOW
    assert "invented" in unit.name
    assert all("Invented" in stay.note for stay in Stay.objects.all())
    assert AuditEvent.objects.filter(action="imported").count() == 1


def test_starting_again_changes_nothing():
    demo.make(NOW, "invented-password-1")
    before = Entry.objects.count(), Unit.objects.count(), User.objects.count(), Membership.objects.count()
    demo.make(NOW, "invented-password-1")
    assert (Entry.objects.count(), Unit.objects.count(), User.objects.count(), Membership.objects.count()) == before


def test_each_role_has_a_login_that_works():
    demo.make(NOW, "invented-password-1")
    for name in ("reader", "nurse", "lead", "admin"):
        assert User.objects.get(username=name).check_password("invented-password-1")


def test_no_value_is_one_that_the_catalogue_calls_impossible():
    from worksheet.oxygen.quantities import measured

    demo.make(NOW, "invented-password-1")
    for quantity in measured():
        low, high = quantity.impossible
        values = Entry.objects.exclude(**{quantity.name: None}).values_list(quantity.name, flat=True)
        assert all(low <= value <= high for value in values), quantity.name
