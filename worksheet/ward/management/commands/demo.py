"""``manage.py demo``: a unit of invented patients, ready to look at."""

from __future__ import annotations

import json
import os
import secrets
from argparse import ArgumentParser
from pathlib import Path
from typing import Any

from django.conf import settings
from django.core.management import call_command
from django.core.management.base import BaseCommand, CommandError
from django.utils import timezone

from worksheet.ward import demo


class Command(BaseCommand):
    help = (
        "Prepare the database, make a demo unit of invented patients (unless it is there), print address and logins, "
        "and serve on this machine only. Example: python manage.py demo --port 8000"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("--port", type=int, default=8000, help="port on 127.0.0.1 (default 8000)")
        parser.add_argument("--no-serve", action="store_true", help="prepare everything, then stop")

    def handle(self, *args: Any, **options: Any) -> None:
        if not 1 <= options["port"] <= 65535:
            raise CommandError(f"{options['port']} is not a port: choose 1 to 65535.")
        Path(settings.DATA_DIR).mkdir(parents=True, exist_ok=True)
        call_command("migrate", verbosity=0, interactive=False)
        password, key = _kept_secrets(Path(settings.DATA_DIR) / "demo.json")
        unit = demo.make(timezone.now(), password)
        self.stdout.write(
            f"Demo unit with {unit.stays.count()} invented patients is ready.\n"
            f"  Address   http://127.0.0.1:{options['port']}/\n"
            f"  Logins    nurse (enters gases), reader, lead (unit lead), admin (administrator)\n"
            f"  Password  {password}   (the same for all four; kept in {settings.DATA_DIR / 'demo.json'})"
        )
        if options["no_serve"]:
            return
        os.environ["WORKSHEET_SECRET_KEY"] = settings.SECRET_KEY = key
        call_command("serve", bind=f"127.0.0.1:{options['port']}", workers=2)


def _kept_secrets(file: Path) -> tuple[str, str]:
    """The demo password and secret key of this data folder, made at the first start."""
    if not file.exists():
        made = {"password": f"invented-{secrets.token_hex(4)}-{secrets.token_hex(4)}", "key": secrets.token_urlsafe(50)}
        handle = os.open(file, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
        with os.fdopen(handle, "w") as out:
            json.dump(made, out)
    kept = json.loads(file.read_text())
    return kept["password"], kept["key"]
