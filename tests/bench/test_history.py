"""The unit review must not slow down with what the database remembers: 0 against 2,000,000 historical entries."""

from datetime import timedelta

import pytest
from django.db import connection
from django.test import Client
from django.utils import timezone

from tests.bench.conftest import median_seconds
from worksheet.ward import demo
from worksheet.ward.models import Entry, Patient, Stay, User

HISTORY = 2_000_000
_COLUMNS = (
    "stay_id, time, site, device, flow_method, event, sample, ph, pco2, po2, hb, typed, note, key, source, "
    "recorded_by_id, recorded_at, reason, struck"
)


def _add_history(rows: int) -> None:
    """Old entries of forty ended stays and of one that is still there, spread over the past years, in one statement."""
    user, present = User.objects.get(username="nurse"), Stay.objects.first()
    ended = []
    for number in range(40):
        patient = Patient.objects.create(system="bench", identifier=f"old-{number}")
        ended.append(
            Stay.objects.create(
                unit=present.unit, patient=patient, reference=f"old-{number}", discharged_at=timezone.now()
            )
        )
    first = ended[0].pk
    if connection.vendor == "postgresql":
        numbers = f"SELECT i FROM generate_series(1, {rows}) AS s(i)"
        moment = "now() - make_interval(mins => (200000 + i)::int)"
        false, empty = "false", "'{}'::jsonb"
    else:
        numbers = f"WITH RECURSIVE n(i) AS (SELECT 1 UNION ALL SELECT i + 1 FROM n WHERE i < {rows}) SELECT i FROM n"
        moment = "datetime('now', '-' || (200000 + i) || ' minutes')"
        false, empty = "0", "'{}'"
    whose = f"CASE WHEN i % 100 = 0 THEN {present.pk} ELSE {first} + i % 40 END"
    with connection.cursor() as cursor:
        cursor.execute(
            f"INSERT INTO ward_entry ({_COLUMNS}) SELECT {whose}, {moment}, 1, 7, 0, 0, '', 7.4, 40, 90, 10, {empty}, "
            f"'', 'bench-' || i, 'csv', {user.pk}, {moment}, '', {false} FROM ({numbers}) AS numbers"
        )
        cursor.execute("ANALYZE")


@pytest.mark.slow
@pytest.mark.django_db
def test_unit_review_with_two_million_old_entries(ratio_row):
    demo.make(timezone.now() - timedelta(minutes=1), "invented-password-1")
    client = Client()
    client.force_login(User.objects.get(username="nurse"), backend="django.contrib.auth.backends.ModelBackend")

    def page():
        assert client.get("/u/demo/?window=12").status_code == 200

    before = median_seconds(page, repeats=15)
    _add_history(HISTORY)
    assert Entry.objects.count() > HISTORY
    after = median_seconds(page, repeats=15)
    ratio = ratio_row(
        f"unit review, {HISTORY:,} historical entries ({connection.vendor})", after, "none", before, "≤ 1.2"
    )
    assert ratio <= 1.2
