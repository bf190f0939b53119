"""``manage.py unit_pdf``: the review of one unit on one page."""

from __future__ import annotations

from argparse import ArgumentParser
from typing import Any

from django.core.management.base import BaseCommand, CommandError
from django.utils import timezone

from worksheet.report import asking
from worksheet.report.printing import NotPrinted
from worksheet.report.unit import unit_pdf, window_since
from worksheet.review.window import last_handover
from worksheet.ward.display import Display


class Command(BaseCommand):
    help = (
        "Print the review of one unit on one page. Example: "
        "python manage.py unit_pdf demo --output unit.pdf --since 2026-03-01T19:00"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("unit", help="name or short name of the unit")
        parser.add_argument("--output", required=True, help="the PDF to write")
        parser.add_argument("--since", help="start of the review, ISO 8601 (default: the last handover)")

    def handle(self, *args: Any, **options: Any) -> None:
        unit, now = asking.the_unit(options["unit"]), timezone.now()
        since = asking.a_time(options["since"], unit, "--since") or last_handover(unit, now)
        if since >= now:
            raise CommandError("--since lies in the future.")
        try:
            pdf = unit_pdf(unit, window_since(unit, since, now), Display.of(None, unit), "command")
        except NotPrinted as error:
            raise CommandError(str(error)) from None
        asking.write_whole(options["output"], pdf)
        self.stdout.write(f"Wrote {options['output']}: {unit.name}.")
