"""Backup and restore in a process of their own, while somebody writes."""

import contextlib
import os
import sqlite3
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]

WRITER = """
import sys, django
django.setup()
from django.utils import timezone
from worksheet.ward import demo, record
from worksheet.ward.models import Stay, User
stay, nurse = Stay.objects.get(reference="K-2041"), User.objects.get(username="nurse")
for n in range(int(sys.argv[1])):
    record.record(stay, nurse, record.NewEntry(timezone.now(), values={"hb": 8.0}, key=f"w-{n}"))
    print(n, flush=True)
"""


@pytest.fixture
def site(tmp_path):
    """A fresh SQLite site with the demo unit, and a way to run its commands."""
    environment = {
        **os.environ,
        "WORKSHEET_DATA": str(tmp_path / "data"),
        "DJANGO_SETTINGS_MODULE": "worksheet.settings",
    }
    environment.pop("WORKSHEET_DATABASE", None)

    def run(*arguments, check=True):
        done = subprocess.run(
            [sys.executable, "manage.py", *arguments], cwd=ROOT, env=environment, capture_output=True, text=True
        )
        assert not check or done.returncode == 0, done.stderr
        return done

    (tmp_path / "data").mkdir()
    run("demo", "--no-serve")
    run.database = tmp_path / "data" / "worksheet.sqlite3"
    run.environment = environment
    return run


def entries(run):
    with contextlib.closing(sqlite3.connect(run.database)) as database:
        return database.execute("SELECT count(*) FROM ward_entry").fetchone()[0]


def test_a_backup_taken_while_somebody_writes_is_whole_and_comes_back(site, tmp_path):
    before = entries(site)
    with subprocess.Popen(
        [sys.executable, "-c", WRITER, "60"], cwd=ROOT, env=site.environment, stdout=subprocess.PIPE, text=True
    ) as writer:
        assert writer.stdout.readline()  # the first entry is stored
        site("backup", str(tmp_path / "copy"))
        assert len(writer.stdout.readlines()) == 59
    assert writer.returncode == 0
    after = entries(site)
    assert after == before + 60
    refused = site("restore", str(tmp_path / "copy"), check=False)
    assert refused.returncode == 1
    assert "--force" in refused.stderr
    assert "Traceback" not in refused.stderr
    site("restore", str(tmp_path / "copy"), "--force")
    assert before < entries(site) <= after
    site("verify_audit")


def test_a_damaged_backup_is_refused_and_nothing_is_lost(site, tmp_path):
    site("backup", str(tmp_path / "copy"))
    before = entries(site)
    whole = (tmp_path / "copy").read_bytes()
    for broken in (b"not a database", whole[: len(whole) // 2], whole[:5000] + b"\xff" * 9000 + whole[14000:]):
        (tmp_path / "broken").write_bytes(broken)
        refused = site("restore", str(tmp_path / "broken"), "--force", check=False)
        assert refused.returncode == 1
        assert "Traceback" not in refused.stderr
        assert entries(site) == before


def test_a_backup_never_overwrites(site, tmp_path):
    (tmp_path / "copy").write_text("mine")
    assert site("backup", str(tmp_path / "copy"), check=False).returncode == 1
    assert (tmp_path / "copy").read_text() == "mine"
