"""``manage.py backup FILE``: a consistent copy of the database while it is in use."""

from __future__ import annotations

from argparse import ArgumentParser
from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError

from worksheet.ward import copies


class Command(BaseCommand):
    help = (
        "Write a consistent, checked copy of the database while it is in use. "
        "Example: python manage.py backup /backups/worksheet-2026-03-01.copy"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("file", type=Path, help="file to write; it must not exist")

    def handle(self, *args: Any, **options: Any) -> None:
        try:
            entries = copies.backup(options["file"])
        except copies.CopyError as error:
            raise CommandError(str(error)) from None
        self.stdout.write(f"Copied and checked: {entries} entries in {options['file']}.")
