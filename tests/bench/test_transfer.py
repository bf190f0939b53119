"""In and out: rows a second with findings and audit, against bare inserts of the same rows; FHIR against json.loads."""

import json
import sqlite3
import time
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from tests.bench.conftest import median_seconds
from worksheet.transfer import fhir_in, pipeline
from worksheet.transfer.times import TimeRules
from worksheet.ward.models import AuditEvent, Entry, Unit, User

ROWS, STAYS = 100_000, 500


def csv_of(rows: int) -> bytes:
    """Irregular gases of many stays: six in ten rows arterial, the rest bedside readings; three cells in ten empty."""
    random = np.random.default_rng(3)
    start = datetime(2025, 1, 1, tzinfo=UTC)
    columns = {
        "ph": random.normal(7.36, 0.07, rows).round(2),
        "pco2": random.normal(42, 7, rows).round(0),
        "po2": random.normal(92, 22, rows).clip(35, 300).round(0),
        "hb": random.normal(9.6, 1.4, rows).clip(5, 16).round(1),
        "so2": random.normal(95.5, 2, rows).clip(70, 100).round(1),
        "lactate": random.gamma(2, 0.9, rows).clip(0.3, 19).round(1),
        "fio2": random.choice([21, 30, 40, 50, 60], rows),
        "cardiac_output": random.normal(5.4, 1, rows).clip(2, 12).round(1),
        "temperature": random.normal(37.1, 0.6, rows).round(1),
        "heart_rate": random.normal(92, 15, rows).clip(40, 180).round(0),
    }
    texts = [np.where(random.random(rows) < 0.3, "", np.char.mod("%g", column)) for column in columns.values()]
    sites = np.where(random.random(rows) < 0.6, "arterial", "")
    lines = ["stay,time,site," + ",".join(columns)]
    for i, cells in enumerate(zip(*texts, strict=True)):
        moment = start + timedelta(minutes=37 * (i // STAYS))
        lines.append(f"S{i % STAYS},{moment.isoformat()},{sites[i]},{','.join(cells)}")
    return "\n".join(lines).encode()


def bare_seconds(rows: list[tuple], columns: list[str], schema: list[str]) -> float:
    """A bare executemany of the same rows into the same table in memory (as the test database) [s]."""
    db = sqlite3.connect(":memory:")
    for statement in schema:
        db.execute(statement)
    db.commit()
    marks = ", ".join("?" * len(columns))
    started = time.process_time()
    with db:
        db.executemany(f"INSERT INTO ward_entry ({', '.join(columns)}) VALUES ({marks})", rows)
    seconds = time.process_time() - started
    db.close()
    return seconds


@pytest.mark.django_db(transaction=True)
def test_csv_of_100000_rows(ratio_row):
    from django.db import connection

    if connection.vendor != "sqlite":
        pytest.skip("measured on SQLite")
    unit, user = Unit.objects.create(name="Bench", slug="bench"), User.objects.create(username="bench")
    data = csv_of(ROWS)
    options = pipeline.Options(TimeRules(ZoneInfo("UTC")), create=True)
    started, worked = time.perf_counter(), time.process_time()
    seen = pipeline.run(unit, user, "bench.csv", "csv", data, options)
    seconds, worked = time.perf_counter() - started, time.process_time() - worked
    stored = Entry.objects.count()
    assert stored == seen.entries["new"] > 0.95 * ROWS
    assert sum(seen.counts().values()) == ROWS
    assert seen.findings
    assert AuditEvent.objects.filter(action="imported").count() == 1
    with connection.cursor() as cursor:
        cursor.execute("SELECT * FROM ward_entry")
        columns = [c[0] for c in cursor.description]
        rows = cursor.fetchall()
        cursor.execute(
            "SELECT sql FROM sqlite_master WHERE tbl_name = 'ward_entry' AND type IN ('table', 'index')"
            " AND sql IS NOT NULL"
        )
        schema = [row[0] for row in cursor.fetchall()]
    bare = min(bare_seconds(rows, columns, schema) for _ in range(3))
    rate = stored / seconds
    ratio = ratio_row(
        "CSV in, 100,000 rows, findings and audit (CPU)",
        worked,
        "bare executemany of the same rows",
        bare,
        "≤ 8",
        f"{rate:,.0f} rows/s",
    )
    assert rate >= 4000
    assert ratio <= 8


def fhir_of(observations: int) -> bytes:
    def one(i):
        return {
            "fullUrl": f"urn:uuid:{i}",
            "resource": {
                "resourceType": "Observation",
                "id": f"o{i}",
                "status": "final",
                "category": [
                    {
                        "coding": [
                            {
                                "system": "http://terminology.hl7.org/CodeSystem/observation-category",
                                "code": "laboratory",
                            }
                        ]
                    }
                ],
                "code": {
                    "coding": [
                        {
                            "system": "http://loinc.org",
                            "code": "2703-7",
                            "display": "Oxygen [Partial pressure] in Arterial blood",
                        }
                    ]
                },
                "subject": {"identifier": {"system": "urn:example:unit", "value": f"K-{i % 50}"}},
                "effectiveDateTime": f"2025-02-{1 + i // 1440 % 28:02d}T{i // 60 % 24:02d}:{i % 60:02d}:00+01:00",
                "valueQuantity": {
                    "value": 60 + i % 60,
                    "unit": "mmHg",
                    "system": "http://unitsofmeasure.org",
                    "code": "mm[Hg]",
                },
                "specimen": {"identifier": {"value": f"BG-{i}"}},
            },
        }

    return json.dumps(
        {"resourceType": "Bundle", "type": "collection", "entry": [one(i) for i in range(observations)]}
    ).encode()


def test_fhir_bundle_parse(ratio_row):
    data = fhir_of(5000)
    rules = TimeRules()
    parsed = fhir_in.parse(data, rules, {})
    assert all(row.fate is None and row.cells for row in parsed.rows)
    seconds = median_seconds(lambda: fhir_in.parse(data, rules, {}))
    plain = median_seconds(lambda: json.loads(data))
    ratio = ratio_row(
        "FHIR Bundle to rows, 5,000 Observations", seconds, "json.loads", plain, "≤ 10", f"{5000 / seconds:,.0f}/s"
    )
    assert ratio <= 10
