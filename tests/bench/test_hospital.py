"""Growth: a hospital loads at a steady rate, and a unit's page does not notice the other units."""

import os
import time
from io import StringIO
from pathlib import Path

import pytest
from django.core.management import call_command
from django.test import Client
from django.utils import timezone

from tests.bench.conftest import median_seconds
from worksheet.ward import demo
from worksheet.ward.models import Entry, Unit, User

UNITS = int(os.environ.get("WORKSHEET_HOSPITAL_UNITS", "5"))
PATIENTS = int(os.environ.get("WORKSHEET_HOSPITAL_PATIENTS", "40"))  # each stays 2 to 5 days


@pytest.mark.slow
@pytest.mark.django_db
def test_a_hospital_loads_at_a_steady_rate_and_a_page_does_not_notice(ratio_row, tmp_path: Path):
    """Full size is 25 units of 40 beds for a year: ``WORKSHEET_HOSPITAL_UNITS=25 WORKSHEET_HOSPITAL_PATIENTS=4000``."""
    demo.make(timezone.now(), "invented-password-1")
    client = Client()
    client.force_login(User.objects.get(username="nurse"), backend="django.contrib.auth.backends.ModelBackend")

    def page():
        assert client.get("/u/demo/?window=12").status_code == 200

    alone = median_seconds(page, repeats=11)
    a_row = []
    for number in range(UNITS):
        Unit.objects.create(name=f"Unit {number}", slug=f"unit-{number}")
        call_command("simulate", patients=PATIENTS, seed=number + 1, output=tmp_path / f"{number}", stdout=StringIO())
        before, start = Entry.objects.count(), time.perf_counter()
        call_command(
            "import_entries", str(tmp_path / f"{number}" / "entries.csv"), unit=f"unit-{number}", stdout=StringIO()
        )
        a_row.append((time.perf_counter() - start) / (Entry.objects.count() - before))
    stored = Entry.objects.count()
    what = f"import of a row, last of {UNITS} units ({stored:,} entries in all)"
    growth = ratio_row(what, a_row[-1], "first unit", a_row[0], "≤ 1.5", f"{1 / a_row[-1]:,.0f} rows/s")
    ratio = ratio_row(
        f"unit review beside {UNITS} other units", median_seconds(page, repeats=11), "alone", alone, "≤ 1.2"
    )
    assert growth <= 1.5
    assert ratio <= 1.2
