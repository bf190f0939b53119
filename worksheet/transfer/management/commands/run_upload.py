"""``manage.py run_upload``: one step of a long upload, started by the page."""

from __future__ import annotations

import os
from argparse import ArgumentParser
from typing import Any

from django.core.management.base import BaseCommand, CommandError

from worksheet.transfer import work
from worksheet.transfer.models import Upload


class Command(BaseCommand):
    help = "Read or store one upload; the transfer page starts it. Example: python manage.py run_upload 17 read"

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("upload", type=int)
        parser.add_argument("step", choices=["read", "store"])

    def handle(self, *args: Any, **options: Any) -> None:
        upload = Upload.objects.select_related("unit", "user").filter(pk=options["upload"]).first()
        if upload is None:
            raise CommandError(f"There is no upload {options['upload']}.")
        os.nice(5)  # pages come first
        work.run(upload, options["step"])
        self.stdout.write(f"{upload.name}: {upload.get_state_display()}. {upload.message}".strip())
