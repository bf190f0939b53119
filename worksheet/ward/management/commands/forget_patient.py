"""``manage.py forget_patient IDENTIFIER``: delete a patient on lawful order."""

from __future__ import annotations

import getpass
from argparse import ArgumentParser
from typing import Any

from django.core.management.base import BaseCommand, CommandError

from worksheet.ward import forget
from worksheet.ward.models import Patient


class Command(BaseCommand):
    help = (
        "Delete everything of a patient; the audit chain stays verifiable. Shows what would go; deletes with --yes. "
        'Example: python manage.py forget_patient 4711 --reason "order 12/2026" --yes'
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("identifier", help="the patient's identifier")
        parser.add_argument("--system", default=None, help="who issued it, where several systems use the same one")
        parser.add_argument("--reason", required=True, help="why; stays in the trail, so it must not name the person")
        parser.add_argument("--yes", action="store_true", help="delete")

    def handle(self, *args: Any, **options: Any) -> None:
        found = Patient.objects.filter(identifier=options["identifier"])
        if options["system"] is not None:
            found = found.filter(system=options["system"])
        if len(found) != 1:
            raise CommandError(
                f"{len(found)} patients have this identifier." + (" Name the --system." if len(found) > 1 else "")
            )
        if not options["reason"].strip():
            raise CommandError("Write a --reason.")
        if not options["yes"]:
            held = forget.holdings(found[0])
            self.stdout.write(_words(held, "would go") + " Nothing was deleted; say --yes to delete.")
            return
        held = forget.forget(found[0], f"forget_patient by {getpass.getuser()}"[:150], options["reason"])
        self.stdout.write(_words(held, "are gone") + " Copies made earlier still hold the patient.")


def _words(held: forget.Holdings, verb: str) -> str:
    return f"{held.stays} stays and {held.entries} entries {verb}, and the content of {held.events} audit events."
