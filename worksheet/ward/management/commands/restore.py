"""``manage.py restore FILE``: bring a backup back."""

from __future__ import annotations

from argparse import ArgumentParser
from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError

from worksheet.ward import copies


class Command(BaseCommand):
    help = (
        "Bring a backup back; stop the server first. Refuses to overwrite a database that holds entries without "
        "--force. Example: python manage.py restore /backups/worksheet-2026-03-01.copy"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("file", type=Path, help="file that `backup` wrote")
        parser.add_argument("--force", action="store_true", help="replace what is there")

    def handle(self, *args: Any, **options: Any) -> None:
        try:
            entries = copies.restore(options["file"], force=options["force"])
        except copies.CopyError as error:
            raise CommandError(str(error)) from None
        self.stdout.write(f"Restored: {entries} entries from {options['file']}.")
