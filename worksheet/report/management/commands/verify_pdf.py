"""``manage.py verify_pdf``: tells whether a printed timeline still says what was recorded."""

from __future__ import annotations

from argparse import ArgumentParser
from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError

from worksheet.report import archive


class Command(BaseCommand):
    help = (
        "Make the fingerprint of a printed timeline again from the database and compare; exit 1 if the data differ. "
        "Example: python manage.py verify_pdf K-2041.pdf"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("file", help="a PDF made by timeline_pdf or the page's button")

    def handle(self, *args: Any, **options: Any) -> None:
        try:
            found = archive.verify(Path(options["file"]).read_bytes())
        except OSError as error:
            raise CommandError(f"Cannot read {options['file']}: {error.strerror}.") from None
        except archive.CannotVerify as error:
            raise CommandError(str(error)) from None
        if not found.holds:
            raise CommandError(
                f"The data of {found.stay} as recorded by {found.printed_at:%Y-%m-%d %H:%M %Z} are not those this "
                "document was made from, or the unit's constants have changed since."
            )
        file = "this very file was made" if found.same_file else "the file itself was changed after it was made"
        newer = f"; {found.newer_entries} entries of its span were recorded since" if found.newer_entries else ""
        self.stdout.write(f"Holds: {found.stay}, printed {found.printed_at:%Y-%m-%d %H:%M %Z}; {file}{newer}.")
