"""``manage.py import_entries``: a file into a unit, through the same pipeline as the page."""

from __future__ import annotations

import json
import sys
from argparse import ArgumentParser
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

from django.core.management.base import BaseCommand, CommandError

from worksheet.transfer import limits, people, pipeline
from worksheet.transfer.mappings import saved_for
from worksheet.transfer.rows import WAITING, Fate, Preview, Refused
from worksheet.transfer.times import TimeRules
from worksheet.ward.models import Unit

SHOWN = 20


class Command(BaseCommand):
    help = (
        "Import a CSV, XLSX, FHIR R4 or HL7 v2 file into a unit: every row gets its fate, everything is stored in one "
        "transaction, and importing the same file twice changes nothing. "
        "Example: python manage.py import_entries gases.csv --unit icu-7 --dry-run --report report.json"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("file", type=Path)
        parser.add_argument("--unit", required=True, help="name or short name of the unit")
        parser.add_argument("--format", choices=["csv", "xlsx", "fhir", "hl7v2"], help="default: by the content")
        parser.add_argument("--dry-run", action="store_true", help="show every row's fate and store nothing")
        parser.add_argument("--report", type=Path, help="write every row's fate to this JSON file")
        parser.add_argument(
            "--unknown-stays",
            choices=["create", "queue"],
            default="create",
            help="identifiers that the unit does not know: make patient and stay (default), "
            "or let the rows wait in the queue",
        )
        parser.add_argument("--zone", help="time zone of times written without one, such as Europe/Zurich")
        parser.add_argument(
            "--date-order", choices=["dmy", "mdy", "ymd"], default="", help="order of day and month in dates"
        )
        parser.add_argument(
            "--doubled-hour",
            choices=["earlier", "later"],
            default="",
            help="which pass of the doubled hour is meant when the clocks go back",
        )
        parser.add_argument(
            "--shifted-dates", action="store_true", help="dates were shifted for de-identification: allow the future"
        )
        parser.add_argument(
            "--keep-rest", action="store_true", help="store a row without its refused values instead of leaving it out"
        )
        parser.add_argument(
            "--replace-differing",
            action="store_true",
            help="values that differ from stored ones replace them as corrections (otherwise: conflict)",
        )
        parser.add_argument("--confirm", action="store_true", help="accept the reading of the columns as it is shown")

    def handle(self, *args: Any, **options: Any) -> None:
        try:
            unit = people.unit_named(options["unit"])
            data = limits.read_file(options["file"])
            seen = self._run(unit, options["file"].name, data, options)
            self._write_report(seen, options["report"])
        except (Refused, pipeline.Interrupted) as refusal:
            raise CommandError(str(refusal)) from None
        self._tell(seen)

    def _run(self, unit: Unit, name: str, data: bytes, options: dict[str, Any]) -> Preview:
        kind = options["format"] or limits.format_of(name, data)
        if options["format"]:
            limits.check_format(kind, data)
        try:
            zone = ZoneInfo(options["zone"]) if options["zone"] else None
        except (KeyError, ValueError, OSError):
            raise Refused(f"'{options['zone']}' is not a time zone; write it like Europe/Zurich.") from None
        if zone is None and kind == "hl7v2":
            zone = unit.zone  # the standard: times without a zone are the sender's local times
        rules = TimeRules(zone, options["date_order"], options["doubled_hour"], shifted=options["shifted_dates"])
        chosen = pipeline.Options(
            rules,
            options["unknown_stays"] == "create",
            options["replace_differing"],
            options["keep_rest"],
            options["confirm"],
            saved_for(unit, kind, data),
            progress=self._progress(),
        )
        parsed = pipeline.parse(kind, data, chosen)
        seen, found = pipeline.preview(unit, name, parsed, chosen)
        if options["dry_run"]:
            return seen
        if parsed.questions and not chosen.confirmed:
            lines = [f"  {c['header']}: {c['reads_as']} {c['unit']} {c['confirm']}".rstrip() for c in parsed.columns]
            raise Refused(
                "\n".join(
                    [
                        "Nothing was stored. To be confirmed first:",
                        *(f"- {q}" for q in parsed.questions),
                        "The columns would be read as:",
                        *lines,
                        "Correct the header, or repeat with --confirm (and --zone, --date-order where asked).",
                    ]
                )
            )
        return pipeline.store(unit, people.machine("import"), seen, found, replace(chosen, confirmed=True))

    def _progress(self) -> Callable[[int, int], None] | None:
        if not sys.stderr.isatty():
            return None
        return lambda done, total: print(f"\r{done:,} of {total:,} rows read", end="", file=sys.stderr)

    def _write_report(self, seen: Preview, target: Path | None) -> None:
        if target is None:
            return
        try:
            target.write_text(json.dumps(seen.report(), ensure_ascii=False, indent=1), encoding="utf-8")
        except OSError as error:
            raise CommandError(f"The report {target} cannot be written: {error.strerror}.") from None

    def _tell(self, seen: Preview) -> None:
        for note in seen.parsed.notes:
            self.stdout.write(note)
        waiting = [row for row in seen.rows if row.fate in WAITING]
        for row in waiting[:SHOWN]:
            self.stderr.write(f"{row.place}: {row.fate}: {row.reason}")
        if len(waiting) > SHOWN:
            self.stderr.write(f"… and {len(waiting) - SHOWN} more; --report lists all.")
        fates = ", ".join(f"{count:,} {fate}" for fate, count in seen.counts().items())
        stored = ", ".join(f"{count:,} {what}" for what, count in seen.entries.items()) or "nothing to store"
        done = f"stored: {stored}" if seen.stored else "dry run, nothing stored"
        self.stdout.write(f"{seen.source}: {len(seen.rows):,} rows ({fates}); {done}.")
        if seen.rows and all(row.fate is Fate.INVALID for row in seen.rows):
            raise CommandError("No row is valid; nothing was stored.")
