"""``manage.py migrate_database``: move a site from SQLite to PostgreSQL (or back), everything as it was."""

from __future__ import annotations

from argparse import ArgumentParser
from typing import Any

import dj_database_url
from django.apps import apps
from django.core.management import call_command
from django.core.management.base import BaseCommand, CommandError
from django.core.management.color import no_style
from django.db import DatabaseError, connections, models, transaction

from worksheet.ward import audit
from worksheet.ward.models import AuditEvent

TARGET = "target"
CHUNK = 2000
_MADE_BY_MIGRATE = {"contenttypes", "auth", "sessions"}  # the new database has its own; nobody's login moves


class Command(BaseCommand):
    help = (
        "Copy the whole database to another, empty one; stop the server first. "
        "Example: python manage.py migrate_database --to postgresql://worksheet:…@db.example/worksheet"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("--to", required=True, help="address of the new database")

    def handle(self, *args: Any, **options: Any) -> None:
        try:
            connections.databases[TARGET] = {**connections.databases["default"], **dj_database_url.parse(options["to"])}
        except ValueError as error:
            raise CommandError(f"--to is not an address of a database: {error}") from None
        connections.databases[TARGET]["OPTIONS"] = dict(dj_database_url.parse(options["to"]).get("OPTIONS", {}))
        try:
            self._move()
        except DatabaseError as error:
            raise CommandError(f"Nothing was moved: {error}") from None

    def _move(self) -> None:
        call_command("migrate", database=TARGET, verbosity=0, interactive=False)
        moving = list(in_order())
        filled = next((m for m in moving if m._default_manager.using(TARGET).exists()), None)
        if filled is not None:
            raise CommandError(f"The new database is not empty: it holds {filled._meta.verbose_name_plural}.")
        with transaction.atomic(using=TARGET):
            counts = {model._meta.label: copy(model) for model in moving}
            reset = connections[TARGET].ops.sequence_reset_sql(no_style(), moving)
            with connections[TARGET].cursor() as cursor:
                for statement in reset:
                    cursor.execute(statement)
            broken = next(audit.broken_places(AuditEvent.objects.using(TARGET)), None)
            if broken:
                raise CommandError(f"The audit trail would not hold at event {broken[0]}: {broken[1]}.")
        self.stdout.write(
            f"Moved {sum(counts.values())} rows of {len(counts)} tables, {counts['ward.Entry']} entries among them; "
            "the audit trail holds. Set WORKSHEET_DATABASE to the new address and start the server."
        )


def in_order() -> list[type[models.Model]]:
    """Models of the program, each after those it points to."""
    left = [m for m in apps.get_models() if m._meta.app_label not in _MADE_BY_MIGRATE and m._meta.managed]
    left = [m for m in left if m._meta.model_name != "loginsession"]
    done: list[type[models.Model]] = []
    while left:
        ready = next((m for m in left if not (_points_to(m) & set(left)) - {m}), left[0])
        left.remove(ready)
        done.append(ready)
    return done


def _points_to(model: type[models.Model]) -> set[Any]:
    return {field.related_model for field in model._meta.concrete_fields if field.related_model}


def copy(model: type[models.Model]) -> int:
    """Copy all rows of a table with their numbers and moments; returns how many."""
    automatic = [
        f for f in model._meta.concrete_fields if getattr(f, "auto_now_add", False) or getattr(f, "auto_now", False)
    ]
    for field in automatic:
        field.auto_now_add = field.auto_now = False  # type: ignore[attr-defined]  # the moment of then, not of the move
    count, batch = 0, []
    for row in model._default_manager.using("default").order_by("pk").iterator(chunk_size=CHUNK):
        batch.append(row)
        if len(batch) == CHUNK:
            count += len(model._default_manager.using(TARGET).bulk_create(batch))
            batch = []
    return count + len(model._default_manager.using(TARGET).bulk_create(batch))
