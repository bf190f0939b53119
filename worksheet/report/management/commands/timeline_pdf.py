"""``manage.py timeline_pdf``: the timeline of one stay."""

from __future__ import annotations

from argparse import ArgumentParser
from typing import Any

from django.core.management.base import BaseCommand, CommandError
from django.utils import timezone

from worksheet.report import asking
from worksheet.report.order import Order
from worksheet.report.printing import NotPrinted
from worksheet.report.timeline import timeline_pdf
from worksheet.ward.display import Display

_LONG = 300  # entries that take more than a second to set


class Command(BaseCommand):
    help = (
        "Print the timeline of one stay as a PDF. Example: "
        "python manage.py timeline_pdf K-2041 --output K-2041.pdf --since 2026-03-01T19:00"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("stay", help="reference of the stay, or UNIT/REFERENCE")
        parser.add_argument("--output", required=True, help="the PDF to write")
        parser.add_argument("--unit", default="", help="unit, where two units use one reference")
        parser.add_argument("--since", help="first moment, ISO 8601 (default: admission)")
        parser.add_argument("--until", help="last moment, ISO 8601 (default: now)")
        parser.add_argument("--deidentify", action="store_true", help="no names; hours from admission instead of dates")

    def handle(self, *args: Any, **options: Any) -> None:
        stay = asking.the_stay(options["stay"], options["unit"])
        since = asking.a_time(options["since"], stay.unit, "--since")
        until = asking.a_time(options["until"], stay.unit, "--until")
        if since and until and since >= until:
            raise CommandError("--since must lie before --until.")
        order = Order(stay, Display.of(None, stay.unit), timezone.now(), "command", since, until, options["deidentify"])
        if len(order.rows) > _LONG and self.stderr.isatty():
            self.stderr.write(f"Setting {len(order.rows)} entries takes some seconds …")
        try:
            pdf = timeline_pdf(order)
        except NotPrinted as error:
            raise CommandError(str(error)) from None
        asking.write_whole(options["output"], pdf)
        self.stdout.write(f"Wrote {options['output']}: {stay.reference}, {len(order.rows)} entries.")
