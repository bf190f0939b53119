"""Backup and restore: SQLite by its own backup call, PostgreSQL by its own dump programs; every copy is checked."""

from __future__ import annotations

import contextlib
import os
import shutil
import sqlite3
import subprocess
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from django.db import DatabaseError, connection

_SUFFIXES = ("", "-wal", "-shm")


class CopyError(Exception):
    """A backup or restore that could not be done, in words for the person who asked."""


def backup(file: Path) -> int:
    """Write a consistent copy of the database in use; returns how many entries it holds."""
    if file.exists():
        raise CopyError(f"{file} exists; a backup never overwrites. Name another file.")
    if not file.parent.is_dir():
        raise CopyError(f"The folder {file.parent} does not exist.")
    part = file.with_name(file.name + ".part")
    try:
        entries = _copy_sqlite(part) if connection.vendor == "sqlite" else _dump_postgres(part)
        with part.open("rb") as written:
            os.fsync(written.fileno())
        part.rename(file)
    except (OSError, sqlite3.Error, DatabaseError) as error:
        raise CopyError(f"The backup could not be written: {error}") from error
    finally:
        part.unlink(missing_ok=True)
    return entries


def restore(file: Path, *, force: bool = False) -> int:
    """Bring a copy back in place of the database; returns how many entries it holds."""
    if not file.is_file():
        raise CopyError(f"{file} does not exist.")
    held = _entries_held()
    if held and not force:
        raise CopyError(f"The database holds {held} entries; --force replaces them with the backup.")
    try:
        return _restore_sqlite(file) if connection.vendor == "sqlite" else _restore_postgres(file)
    except (OSError, sqlite3.Error) as error:
        raise CopyError(f"The backup could not be restored: {error}") from error


def _entries_held() -> int:
    """Entries in the database in use, 0 where it was never made."""
    with contextlib.suppress(DatabaseError), connection.cursor() as cursor:
        cursor.execute("SELECT count(*) FROM ward_entry")
        return int(cursor.fetchone()[0])
    return 0


# SQLite


def _copy_sqlite(part: Path) -> int:
    connection.ensure_connection()
    with contextlib.closing(sqlite3.connect(part)) as copy:
        connection.connection.backup(copy)
        copy.execute("PRAGMA journal_mode=DELETE")
        return _checked(copy)


def _checked(copy: sqlite3.Connection) -> int:
    """Entries of a copy that is whole; anything else is an error."""
    try:
        verdict = copy.execute("PRAGMA integrity_check").fetchone()[0]
        broken = copy.execute("PRAGMA foreign_key_check").fetchone()
        entries = int(copy.execute("SELECT count(*) FROM ward_entry").fetchone()[0])
    except sqlite3.Error as error:
        raise CopyError(f"This is not a whole worksheet database: {error}") from error
    if verdict != "ok" or broken:
        raise CopyError(f"The copy is damaged: {verdict if verdict != 'ok' else f'broken link in {broken[0]}'}")
    return entries


def _restore_sqlite(file: Path) -> int:
    target = Path(str(connection.settings_dict["NAME"]))
    target.parent.mkdir(parents=True, exist_ok=True)
    part = target.with_name(target.name + ".restoring")
    shutil.copyfile(file, part)
    try:
        with contextlib.closing(sqlite3.connect(part)) as copy:
            entries = _checked(copy)
        connection.close()
        for suffix in _SUFFIXES[1:]:
            target.with_name(target.name + suffix).unlink(missing_ok=True)
        part.replace(target)
    finally:
        part.unlink(missing_ok=True)
    return entries


# PostgreSQL


def _dump_postgres(part: Path) -> int:
    held = _entries_held()
    _run(["pg_dump", "--format=custom", "--file", str(part)])
    _run(["pg_restore", "--list", str(part)])
    return held


def _restore_postgres(file: Path) -> int:
    _run(["pg_restore", "--list", str(file)])
    connection.close()
    name = ["--dbname", str(connection.settings_dict["NAME"])]
    _run(["pg_restore", "--clean", "--if-exists", "--single-transaction", "--no-owner", *name, str(file)])
    return _entries_held()


def _run(command: list[str]) -> None:
    program = shutil.which(command[0])
    if program is None:
        raise CopyError(f"{command[0]} is not installed; it comes with PostgreSQL's client programs.")
    done = subprocess.run([program, *command[1:]], env=dict(_postgres_environment()), capture_output=True, text=True)  # noqa: S603
    if done.returncode:
        raise CopyError(f"{command[0]}: {done.stderr.strip().splitlines()[-1] if done.stderr else 'failed'}")


def _postgres_environment() -> Iterator[tuple[str, str]]:
    """The environment with what names the database; the password does not show on the command line."""
    yield from os.environ.items()
    chosen: dict[str, Any] = connection.settings_dict
    for variable, key in (("PGHOST", "HOST"), ("PGPORT", "PORT"), ("PGUSER", "USER"), ("PGPASSWORD", "PASSWORD"),
                          ("PGDATABASE", "NAME")):  # fmt: skip
        if chosen.get(key):
            yield variable, str(chosen[key])
