"""A server that is killed in the middle of its work loses no entry that it acknowledged."""

import contextlib
import http.client
import sqlite3
import threading
import time
import urllib.error

import pytest

from tests.serving import Person, Server, Site


@pytest.fixture
def site(tmp_path):
    made = Site(tmp_path / "site")
    made.prepare()
    return made


def typing(server, number, acknowledged, stop):
    """Type slips one after the other; note each that was acknowledged, and send a lost one again with its key."""
    person = Person(server.address)
    gone = (urllib.error.URLError, http.client.HTTPException, OSError)  # also an answer that was cut: not acknowledged
    with contextlib.suppress(*gone, AssertionError):
        person.log_in()
        for n in range(10_000):
            if stop.is_set():
                return
            key = f"k-{number}-{n}"
            person.slip("K-2080", key)
            acknowledged.append(key)


def one_round(site, number, seconds):
    acknowledged, stop = [], threading.Event()
    server = Server(site)
    server.start()
    people = [threading.Thread(target=typing, args=(server, f"{number}-{p}", acknowledged, stop)) for p in range(3)]
    for person in people:
        person.start()
    deadline = time.monotonic() + 60
    while not acknowledged and time.monotonic() < deadline:
        time.sleep(0.05)
    time.sleep(seconds)
    server.kill()
    stop.set()
    for person in people:
        person.join(timeout=60)
    with contextlib.closing(sqlite3.connect(site.folder / "worksheet.sqlite3")) as database:
        assert database.execute("PRAGMA integrity_check").fetchone()[0] == "ok"
        stored = {row[0] for row in database.execute("SELECT key FROM ward_entry")}
        audited = database.execute("SELECT count(*) FROM ward_auditevent WHERE action = 'recorded'").fetchone()[0]
        typed = database.execute("SELECT count(*) FROM ward_entry WHERE source = 'form'").fetchone()[0]
    assert set(acknowledged) <= stored
    assert audited == typed  # an entry and its event are stored together or not at all
    return len(acknowledged)


def test_kill_9_during_a_stream_of_entries(site):
    total = sum(one_round(site, number, 0.5 + 0.37 * number) for number in range(3))
    assert total > 10
    assert site.run("verify_audit").returncode == 0


@pytest.mark.slow
def test_kill_9_fifty_times(site):
    total = sum(one_round(site, number, 0.2 + 0.05 * number) for number in range(50))
    assert total > 500
    assert site.run("verify_audit").returncode == 0


def test_a_stopped_server_finishes_and_says_nothing_of_patients(site):
    server = Server(site)
    server.start()
    person = Person(server.address)
    person.log_in()
    person.slip("K-2080", "one")
    with contextlib.suppress(urllib.error.HTTPError):
        person.get("/u/demo/stay/K-20XX/?x=Hb7.1")
    assert server.stop() == 0
    log = (site.folder / f"serve-{server.port}.log").read_text()
    assert "K-20" not in log
    assert "7.1" not in log


@pytest.mark.parametrize(
    ("environment", "arguments", "reason"),
    [
        ({"WORKSHEET_DEBUG": "1"}, (), "WORKSHEET_DEBUG"),
        ({"WORKSHEET_SECRET_KEY": ""}, ("--bind", "0.0.0.0:8001"), "WORKSHEET_SECRET_KEY"),
        ({"WORKSHEET_SECRET_KEY": "a" * 60}, ("--bind", "0.0.0.0:8001"), "easy to guess"),
        ({}, ("--bind", "0.0.0.0:8001"), "in the clear"),
        ({"WORKSHEET_DEBUG": "perhaps"}, (), "write 1 or 0"),
        ({}, ("--workers", "0"), "workers"),
    ],
)
def test_serve_refuses_what_is_unsafe_with_the_reason(tmp_path, environment, arguments, reason):
    site = Site(tmp_path / "site")
    site.environment.update(environment)
    done = site.run("serve", *arguments)
    assert done.returncode != 0
    assert reason in done.stderr


def test_serve_refuses_a_database_that_is_not_migrated(tmp_path):
    done = Site(tmp_path / "site").run("serve")
    assert done.returncode == 1
    assert "python manage.py migrate" in done.stderr
    assert "Traceback" not in done.stderr
