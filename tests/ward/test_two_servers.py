"""Several application machines share one PostgreSQL: any of them may stop and come back at any moment."""

import contextlib
import os
import time
import urllib.error
import uuid
from urllib.parse import urlsplit, urlunsplit

import pytest

from tests.serving import Person, Server, Site

ADMIN = os.environ.get("WORKSHEET_TEST_POSTGRES", "")


@pytest.fixture
def postgres():
    """A fresh database on the PostgreSQL that the environment names."""
    if not ADMIN:
        if os.environ.get("WORKSHEET_REQUIRE_ALL") == "1":
            pytest.fail("WORKSHEET_TEST_POSTGRES names no PostgreSQL")
        pytest.skip("WORKSHEET_TEST_POSTGRES names no PostgreSQL")
    import psycopg

    name = f"test_{uuid.uuid4().hex[:12]}"
    with psycopg.connect(ADMIN, autocommit=True) as admin:
        admin.execute(f'CREATE DATABASE "{name}"')
    yield urlunsplit(urlsplit(ADMIN)._replace(path=f"/{name}"))
    with psycopg.connect(ADMIN, autocommit=True) as admin:
        admin.execute(f'DROP DATABASE "{name}" WITH (FORCE)')


class Retrying:
    """A client that knows two addresses and asks the other one when one does not answer."""

    def __init__(self, servers):
        self.people = [Person(server.address) for server in servers]
        self.people[1].jar = self.people[0].jar  # one login, wherever it was made
        self.people[1].opener = self.people[0].opener
        self.turns = 0

    def do(self, action):
        for _ in range(200):
            person = self.people[self.turns % 2]
            try:
                return action(person)
            except urllib.error.HTTPError:
                raise
            except (OSError, urllib.error.URLError):
                self.turns += 1
                time.sleep(0.1)
        raise AssertionError("no server answered")


def test_two_servers_killed_in_turn_without_an_error_for_a_client_that_retries(postgres, tmp_path):
    site = Site(tmp_path / "site", postgres)
    site.prepare()
    before = site.count()
    servers = [Server(site, workers=1), Server(site, workers=1)]
    with contextlib.ExitStack() as running:
        for server in servers:
            running.enter_context(server)
        client = Retrying(servers)
        client.do(lambda person: person.log_in())
        number = 0
        for round_number in range(4):
            for _ in range(5):
                key = f"r-{number}"
                number += 1

                def type_it(person, key=key):
                    person.get("/preferences/")
                    person.slip("K-2080", key)

                client.do(type_it)
            assert "K-2080" in client.do(lambda person: person.get("/u/demo/"))
            servers[round_number % 2].kill()
            client.do(lambda person: person.get("/u/demo/"))
            servers[round_number % 2].start()
    assert site.count() == before + number  # none lost, none twice
    assert site.run("verify_audit").returncode == 0


def test_a_site_moves_from_sqlite_to_postgresql_and_its_trail_holds(postgres, tmp_path):
    old = Site(tmp_path / "old")
    old.prepare()
    moved = old.run("migrate_database", "--to", postgres)
    assert moved.returncode == 0, moved.stderr
    new = Site(tmp_path / "new", postgres)
    assert new.count() == old.count()
    assert new.run("verify_audit").returncode == 0
    ask = "from worksheet.ward.models import Entry\ne = Entry.objects.first()\nprint(e.recorded_at, e.po2, e.key)"
    assert new.python(ask) == old.python(ask)
    again = old.run("migrate_database", "--to", postgres)
    assert again.returncode == 1
    assert "not empty" in again.stderr
    with Server(new, workers=1) as server:
        person = Person(server.address)
        person.log_in()
        person.slip("K-2080", "after-the-move")
    assert new.count() == old.count() + 1


def test_backup_and_restore_on_postgresql(postgres, tmp_path):
    site = Site(tmp_path / "site", postgres)
    site.prepare()
    before = site.count()
    assert site.run("backup", str(tmp_path / "copy")).returncode == 0
    site.python(
        "from django.utils import timezone\nfrom worksheet.ward import record\nfrom worksheet.ward.models import *\n"
        "record.record(Stay.objects.first(), User.objects.first(), record.NewEntry(timezone.now(), values={'hb': 9.0}))"
    )
    assert site.count() == before + 1
    assert site.run("restore", str(tmp_path / "copy")).returncode == 1
    done = site.run("restore", str(tmp_path / "copy"), "--force")
    assert done.returncode == 0, done.stderr
    assert site.count() == before
    assert site.run("verify_audit").returncode == 0
