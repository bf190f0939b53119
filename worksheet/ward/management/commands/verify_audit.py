"""``manage.py verify_audit``: walk the audit chain."""

from __future__ import annotations

from argparse import ArgumentParser
from typing import Any

from django.core.management.base import BaseCommand, CommandError

from worksheet.ward import audit, record
from worksheet.ward.models import AuditEvent


class Command(BaseCommand):
    help = (
        "Walk the audit chain and hold the entries to it; exit 1 and name the first broken place. "
        "Example: python manage.py verify_audit"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("--head", default="", help="hash of an event noted earlier: it must still be in the chain")

    def handle(self, *args: Any, **options: Any) -> None:
        broken = next(audit.broken_places(), None)
        if broken is not None:
            raise CommandError(f"The audit trail is broken at event {broken[0]}: {broken[1]}.")
        altered = next(record.altered(), None)
        if altered is not None:
            raise CommandError(
                f"The trail holds, but entry {altered[0]} {altered[1]}: it was changed past the program."
            )
        head = options["head"]
        if head and not AuditEvent.objects.filter(hash=head).exists():
            raise CommandError(f"The audit trail ends before the event with hash {head}: events were cut off.")
        last = AuditEvent.objects.order_by("-id").first()
        self.stdout.write(f"The audit trail holds: {AuditEvent.objects.count()} events.")
        if last:
            self.stdout.write(f"Head {last.hash} (note it apart: with --head a trail that was cut short is found).")
