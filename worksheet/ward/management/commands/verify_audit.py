"""``manage.py verify_audit``: walk the audit chain."""

from __future__ import annotations

from typing import Any

from django.core.management.base import BaseCommand, CommandError

from worksheet.ward import audit
from worksheet.ward.models import AuditEvent


class Command(BaseCommand):
    help = "Walk the audit chain; exit 1 and name the first broken place. Example: python manage.py verify_audit"

    def handle(self, *args: Any, **options: Any) -> None:
        broken = next(audit.broken_places(), None)
        if broken is not None:
            raise CommandError(f"The audit trail is broken at event {broken[0]}: {broken[1]}.")
        self.stdout.write(f"The audit trail holds: {AuditEvent.objects.count()} events.")
