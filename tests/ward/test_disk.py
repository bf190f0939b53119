"""A disk that is full, and a machine that stops at a random moment: nothing half-written, nothing acknowledged lost."""

import contextlib
import os
import resource
import shutil
import signal
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


@contextlib.contextmanager
def files_no_longer_than(size):
    """Whatever is started in the block cannot make a file longer than this: to SQLite, the disk is full."""
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (size, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))


def stored(site):
    """Keys of the entries typed, and how many events tell of them; the file must be whole."""
    with contextlib.closing(sqlite3.connect(site.folder / "worksheet.sqlite3")) as database:
        assert database.execute("PRAGMA integrity_check").fetchone()[0] == "ok"
        assert database.execute("PRAGMA foreign_key_check").fetchone() is None
        keys = {row[0] for row in database.execute("SELECT key FROM ward_entry WHERE source = 'form'")}
        told = database.execute("SELECT count(*) FROM ward_auditevent WHERE action = 'recorded'").fetchone()[0]
    return keys, told


def test_a_full_disk_is_told_in_a_sentence_and_nothing_is_half_written(site):
    with Server(site, workers=1):
        pass  # collects the static files, which are longer than the limit below
    room = (site.folder / "worksheet.sqlite3").stat().st_size
    server = Server(site, workers=1)
    with files_no_longer_than(room):
        server.start()
    acknowledged, refusal = set(), None
    with contextlib.ExitStack() as cleanup:
        cleanup.callback(lambda: server.process.poll() is None and server.stop())
        person = Person(server.address)
        person.log_in()
        for n in range(400):
            try:
                person.slip("K-2080", f"k-{n}")
            except urllib.error.HTTPError as error:
                refusal = (error.code, error.read().decode())
                break
            acknowledged.add(f"k-{n}")
    assert refusal is not None, "the disk never became full"
    assert refusal[0] == 503
    assert "disk is full" in refusal[1]
    assert "K-2080" not in refusal[1]
    keys, told = stored(site)
    assert keys == acknowledged
    assert told == len(keys)
    with Server(site, workers=1) as again:  # there is room again: the same form sent once more is stored
        person = Person(again.address)
        person.log_in()
        person.slip("K-2080", f"k-{len(acknowledged)}")
    keys, told = stored(site)
    assert len(keys) == told == len(acknowledged) + 1
    assert site.run("verify_audit").returncode == 0


def test_the_files_of_any_moment_come_back_with_everything_acknowledged(site, tmp_path):
    """Frozen at moments that it does not choose, the server leaves on the disk what a stop would leave."""
    acknowledged, stop = [], threading.Event()
    with Server(site) as server:

        def type_on(name):
            person = Person(server.address)
            person.log_in()
            n = 0
            while not stop.is_set():
                person.slip("K-2080", f"{name}-{n}")
                acknowledged.append(f"{name}-{n}")
                n += 1

        people = [threading.Thread(target=type_on, args=(name,)) for name in "ab"]
        for person in people:
            person.start()
        images = [image(site, server, tmp_path / f"image-{n}", acknowledged, 0.31 + 0.17 * n) for n in range(5)]
        stop.set()
        for person in people:
            person.join(timeout=60)
    assert len(acknowledged) > 10
    for folder, known in images:
        keys, told = stored(Site(folder))
        assert known <= keys
        assert told == len(keys)
    assert Site(images[-1][0]).run("verify_audit").returncode == 0


def image(site, server, folder, acknowledged, seconds):
    """The database files after some time, and what had been acknowledged by then."""
    time.sleep(seconds)
    os.killpg(server.process.pid, signal.SIGSTOP)
    try:
        folder.mkdir()
        known = set(acknowledged)
        for suffix in ("", "-wal"):
            file = site.folder / f"worksheet.sqlite3{suffix}"
            if file.exists():
                shutil.copyfile(file, folder / file.name)
    finally:
        os.killpg(server.process.pid, signal.SIGCONT)
    return folder, known
