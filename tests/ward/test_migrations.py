"""Migrations run on a database that is in use: what was stored stays, stays append-only, and the chain holds."""

from tests.serving import Site

OLD = """
from datetime import UTC, datetime
from django.db import connection
from worksheet.ward import audit
from worksheet.ward.models import AuditEvent
previous = ""
with connection.cursor() as cursor:
    for n in range(3):
        event = AuditEvent(at=datetime(2026, 3, 1, 6, n, tzinfo=UTC), actor="nurse", action="viewed",
                           subject=f"K-{n}", detail={}, previous_hash=previous)
        event.hash = previous = audit.digest(event)
        cursor.execute(
            "INSERT INTO ward_auditevent (at, actor, unit, subject, action, detail, previous_hash, hash) "
            "VALUES (%s, 'nurse', '', %s, 'viewed', '{}', %s, %s)",
            [f"2026-03-01 06:0{n}:00", event.subject, event.previous_hash, event.hash])
"""
TRY = """
from django.db import DatabaseError
from worksheet.ward import audit
from worksheet.ward.models import AuditEvent
audit.write("nurse", "viewed", subject="K-9")
try:
    AuditEvent.objects.filter(subject="K-0").update(actor="somebody")
    print("changed")
except DatabaseError as error:
    print(error)
"""


def test_a_filled_database_is_brought_up_to_date(tmp_path):
    site = Site(tmp_path / "site")
    assert site.run("migrate", "ward", "0003", "-v0").returncode == 0
    site.python(OLD)
    done = site.run("migrate", "-v0")
    assert done.returncode == 0, done.stderr
    assert "append-only" in site.python(TRY)
    held = site.run("verify_audit")
    assert held.returncode == 0, held.stderr
    assert "4 events" in held.stdout
    assert site.run("makemigrations", "--check", "--dry-run").returncode == 0
