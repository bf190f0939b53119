"""An import killed at any moment leaves nothing behind, readers are not kept waiting, and the next try stores all."""

import os
import signal
import sqlite3
import subprocess
import sys
import time
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
ROWS = 20_000


def lines(count):
    yield "stay,time,site,ph,po2,hb\n"
    for i in range(count):
        moment = f"2025-{1 + i // 40000:02d}-{1 + i // 1440 % 28:02d}T{i // 60 % 24:02d}:{i % 60:02d}:00Z"
        yield f"S{i % 97},{moment},arterial,7.{300 + i % 99},{60 + i % 80},{7 + i % 5}\n"


class Place:
    """A database of its own and the commands on it."""

    def __init__(self, folder):
        self.folder = folder
        self.env = {**os.environ, "WORKSHEET_DATA": str(folder), "WORKSHEET_DATABASE": ""}
        self.manage("migrate", "-v0")
        self.manage("shell", "-c", "from worksheet.ward.models import Unit; Unit.objects.create(name='U', slug='u7')")
        self.file = folder / "many.csv"
        self.file.write_text("".join(lines(ROWS)))

    def command(self, *args):
        return [sys.executable, "manage.py", *args]

    def manage(self, *args):
        done = subprocess.run(self.command(*args), cwd=ROOT, env=self.env, capture_output=True, text=True)
        assert done.returncode == 0, done.stderr
        return done.stdout

    def start(self):
        quiet = {"stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL}
        return subprocess.Popen(
            self.command("import_entries", str(self.file), "--unit", "u7"), cwd=ROOT, env=self.env, **quiet
        )

    def counts(self):
        with sqlite3.connect(self.folder / "worksheet.sqlite3") as db:
            found = [
                db.execute(f"select count(*) from {t}").fetchone()[0]
                for t in ("ward_entry", "ward_stay", "ward_patient")
            ]
        db.close()
        return found


@pytest.mark.slow
def test_killed_while_reading_or_storing(tmp_path):
    place = Place(tmp_path)
    started = time.monotonic()
    place.manage("import_entries", str(place.file), "--unit", "u7", "--dry-run")
    whole = time.monotonic() - started
    assert place.counts() == [0, 0, 0]
    stored_before_kill = 0
    for share in (0.5, 0.8, 1.0, 1.1, 1.2):
        process = place.start()
        waited = time.monotonic()
        while time.monotonic() - waited < share * whole and process.poll() is None:
            time.sleep(0.01)
            if time.monotonic() - waited > 0.3:
                answered = time.monotonic()
                place.counts()  # a reader is never kept waiting
                assert time.monotonic() - answered < 2.0
        process.send_signal(signal.SIGKILL)
        process.wait()
        counts = place.counts()
        assert counts in ([0, 0, 0], [ROWS, 97, 97]), counts
        stored_before_kill += counts[0] > 0
    assert stored_before_kill < 5
    place.manage("import_entries", str(place.file), "--unit", "u7")
    assert place.counts() == [ROWS, 97, 97]
    assert f"{ROWS:,} same" in place.manage("import_entries", str(place.file), "--unit", "u7")
