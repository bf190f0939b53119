"""``manage.py export_entries``: a unit or one stay as CSV or FHIR."""

from __future__ import annotations

import os
import sys
from argparse import ArgumentParser
from collections.abc import Iterable
from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError

from worksheet.transfer import csv_out, fhir_out, leaving, people
from worksheet.transfer.rows import Refused
from worksheet.ward import audit


class Command(BaseCommand):
    help = (
        "Export the current entries of a unit, raw and derived (CSV, safe to open in a spreadsheet) or raw (FHIR R4). "
        "--deidentify leaves out names, identifiers, comments and dates and counts hours from admission. "
        "Example: python manage.py export_entries --unit icu-7 --format csv --output unit.csv --deidentify"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("--unit", required=True, help="name or short name of the unit")
        parser.add_argument("--stay", default="", help="only this stay (default: all)")
        parser.add_argument("--format", required=True, choices=["csv", "fhir"])
        parser.add_argument("--output", required=True, help="file to write; - is standard output")
        parser.add_argument("--deidentify", action="store_true", help="no names, identifiers, comments or dates")

    def handle(self, *args: Any, **options: Any) -> None:
        try:
            unit = people.unit_named(options["unit"])
        except Refused as refusal:
            raise CommandError(str(refusal)) from None
        chosen = leaving.gather(unit, options["stay"], deidentify=options["deidentify"])
        if chosen is None:
            what = f"no stay '{options['stay']}'" if options["stay"] else "no stay yet"
            raise CommandError(f"The unit {unit.name} has {what}.")
        blocks = csv_out.lines(chosen) if options["format"] == "csv" else fhir_out.lines(chosen)
        _write(options["output"], blocks)
        audit.write(
            "export",
            "exported",
            unit=unit.name,
            subject=options["stay"] or "all stays",
            format=options["format"],
            entries=len(chosen.entries),
            deidentified=options["deidentify"],
        )
        if options["output"] != "-":
            count, stays = len(chosen.entries), len(chosen.stays)
            self.stdout.write(f"Wrote {count:,} entries of {stays:,} stays to {options['output']}.")


def _write(target: str, blocks: Iterable[str]) -> None:
    """Write whole or not at all: a half-written file never stands under the asked name."""
    if target == "-":
        for block in blocks:
            sys.stdout.write(block)
        return
    final = Path(target)
    part = final.with_name(f".{final.name}.{os.getpid()}.part")
    try:
        with part.open("w", encoding="utf-8", newline="") as out:
            out.writelines(blocks)
        part.replace(final)
    except OSError as error:
        raise CommandError(f"{target} cannot be written: {error.strerror}.") from None
    finally:
        part.unlink(missing_ok=True)
