"""``manage.py hl7_listener``: takes ORU^R01 over MLLP and acknowledges only after commit."""

from __future__ import annotations

import asyncio
import signal
from argparse import ArgumentParser
from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError
from django.db import close_old_connections

from worksheet.transfer import people, routes
from worksheet.transfer.mllp import Listener
from worksheet.transfer.receive import receive
from worksheet.transfer.rows import Refused


class Command(BaseCommand):
    help = (
        "Listen for HL7 v2 results (ORU^R01, 2.3 to 2.8) over MLLP. Every message is kept raw, stored in one "
        "transaction and acknowledged only after that (AA; AE or AR with the reason). "
        "The unit map is a JSON file naming "
        "the unit of each sender: "
        '{"LAB|SITE": "icu-7", "*": {"unit": "icu-7", "zone": "Europe/Zurich", "unknown_stays": "queue"}}. '
        "MLLP is not encrypted: bind it to an address that only the interface engine reaches. "
        "Example: python manage.py hl7_listener --bind 127.0.0.1:2575 --unit-map units.json"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("--bind", required=True, help="HOST:PORT, such as 127.0.0.1:2575")
        parser.add_argument("--unit-map", required=True, type=Path, help="JSON file: sender to unit")

    def handle(self, *args: Any, **options: Any) -> None:
        host, _, port = options["bind"].rpartition(":")
        if not host or not port.isdecimal() or int(port) > 65535:
            raise CommandError(f"'{options['bind']}' is not HOST:PORT, such as 127.0.0.1:2575.")
        try:
            units = routes.read(options["unit_map"])
        except Refused as refusal:
            raise CommandError(str(refusal)) from None
        user = people.machine("interface")

        def handle(raw: bytes) -> bytes:
            close_old_connections()
            return receive(raw, units, user).encoded()

        try:
            asyncio.run(self._serve(Listener(host.strip("[]"), int(port), handle)))
        except OSError as error:
            raise CommandError(f"Cannot listen on {options['bind']}: {error.strerror}.") from None
        self.stdout.write("Stopped; every acknowledged message is stored.")

    async def _serve(self, listener: Listener) -> None:
        loop = asyncio.get_running_loop()
        for number in (signal.SIGTERM, signal.SIGINT):
            loop.add_signal_handler(number, listener.stop)

        def ready(host: str, port: int) -> None:
            self.stdout.write(f"Listening for ORU^R01 on {host}:{port}.")
            self.stdout.flush()

        await listener.serve(ready)
