"""``manage.py serve``: the production server on the configured database."""

from __future__ import annotations

from argparse import ArgumentParser
from typing import Any

from django.conf import settings
from django.core.management.base import BaseCommand, CommandError
from django.db import DatabaseError, connection, connections
from django.db.migrations.executor import MigrationExecutor
from gunicorn.app.base import BaseApplication

from worksheet.ward import static_files

LOOPBACK = {"127.0.0.1", "localhost", "[::1]"}


class _Server(BaseApplication):  # type: ignore[misc]
    """Gunicorn with sync workers: measured safest with SQLite, fast enough behind a reverse proxy."""

    def __init__(self, bind: str, workers: int) -> None:
        self._bind, self._workers = bind, workers
        super().__init__()

    def load_config(self) -> None:
        chosen = {
            "bind": self._bind,
            "workers": self._workers,
            "worker_class": "sync",
            "timeout": 60,
            "graceful_timeout": 20,
            "max_requests": 20_000,  # a worker is renewed now and then, so that nothing can pile up in it
            "max_requests_jitter": 2_000,
            "control_socket_disable": True,
            "loglevel": "warning",
        }
        for name, value in chosen.items():
            if name in self.cfg.settings:
                self.cfg.set(name, value)

    def load(self) -> Any:
        from worksheet.wsgi import application

        return application


class Command(BaseCommand):
    help = "Serve the worksheet. Example: python manage.py serve --bind 127.0.0.1:8000 --workers 3"

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("--bind", default="127.0.0.1:8000", help="address and port")
        parser.add_argument("--workers", type=int, default=3, help="worker processes")
        parser.add_argument("--plain-http", action="store_true", help="allow HTTP on an address that others reach")

    def handle(self, *args: Any, **options: Any) -> None:
        if not 1 <= options["workers"] <= 64:
            raise CommandError(f"{options['workers']} workers: between 1 and 64 are possible.")
        refuse_unsafe(options["bind"], options.get("plain_http", False))
        refuse_unprepared()
        static_files.collect()
        connections.close_all()  # a worker opens its own
        self.stdout.write(f"Serving on http://{options['bind']} with {options['workers']} workers; Ctrl+C stops.")
        self.stdout.flush()
        _Server(options["bind"], options["workers"]).run()


def refuse_unsafe(bind: str, plain_http: bool) -> None:
    """Refuse a configuration that would put patients' data at risk, with the reason."""
    host = bind.rpartition(":")[0]
    if settings.DEBUG:
        raise CommandError("WORKSHEET_DEBUG is on: error pages would show patients' data. Unset it.")
    if host in LOOPBACK and not settings.HTTPS:
        return
    if not settings.SECRET_KEY_GIVEN:
        raise CommandError(
            "WORKSHEET_SECRET_KEY is not set: every restart would end all sessions. Set 50 random characters."
        )
    if len(settings.SECRET_KEY) < 50 or len(set(settings.SECRET_KEY)) < 10:
        raise CommandError("WORKSHEET_SECRET_KEY is too easy to guess: set 50 random characters.")
    if host not in LOOPBACK and not settings.HTTPS and not plain_http:
        raise CommandError(
            f"{bind} can be reached by others and WORKSHEET_HTTPS is not set: passwords would travel in the clear. "
            "Put a reverse proxy with TLS in front, or say --plain-http if you must."
        )


def refuse_unprepared() -> None:
    """Refuse a database that is not there or not migrated."""
    try:
        executor = MigrationExecutor(connection)
        plan = executor.migration_plan(executor.loader.graph.leaf_nodes())
    except DatabaseError as error:
        raise CommandError(f"The database does not answer: {error}") from None
    if plan:
        raise CommandError(f"The database lacks {len(plan)} migrations. Run: python manage.py migrate")
