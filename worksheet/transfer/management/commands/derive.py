"""Derive every row of a CSV file, without a database; see :mod:`worksheet.transfer.batch`."""

from __future__ import annotations

import sys
from typing import Any

from django.core.management.base import BaseCommand, CommandParser

from worksheet.transfer import batch


class Command(BaseCommand):
    help = "Derive every row of a CSV file, without a database."
    requires_system_checks: list[str] = []
    requires_migrations_checks = False

    def run_from_argv(self, argv: list[str]) -> None:
        sys.exit(batch.main(argv[2:]))

    def add_arguments(self, parser: CommandParser) -> None:
        batch.add_arguments(parser)

    def handle(self, *args: Any, **options: Any) -> None:
        code = batch.run(options["input"], options["output"], options["processes"], options["dask"])
        if code:
            sys.exit(code)
