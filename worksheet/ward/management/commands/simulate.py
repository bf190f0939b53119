"""``manage.py simulate``: invented courses with known causes, for tests and training."""

from __future__ import annotations

from argparse import ArgumentParser
from pathlib import Path
from typing import Any

from django.core.management.base import BaseCommand, CommandError

from worksheet.ward import simulated, simulated_chart

MOST = 20_000


class Command(BaseCommand):
    help = (
        "Write invented courses with known causes: entries.csv (what was charted, columns of the batch command) and "
        "truth.csv (what happened). Example: python manage.py simulate --patients 200 --seed 7 --output courses"
    )

    def add_arguments(self, parser: ArgumentParser) -> None:
        parser.add_argument("--patients", type=int, required=True, help=f"number of courses, 1 to {MOST}")
        parser.add_argument("--seed", type=int, default=1, help="the same seed makes the same files (default 1)")
        parser.add_argument("--output", type=Path, required=True, help="folder for the two files; made if missing")

    def handle(self, *args: Any, **options: Any) -> None:
        patients, seed, folder = options["patients"], options["seed"], options["output"]
        if not 1 <= patients <= MOST:
            raise CommandError(f"--patients must be 1 to {MOST}, not {patients}.")
        if seed < 0:
            raise CommandError(f"--seed must be 0 or more, not {seed}.")
        made = simulated.courses(patients, seed)
        charted = simulated_chart.chart(made, seed)
        try:
            entries, truth = simulated_chart.write(made, charted, folder)
        except OSError as error:
            raise CommandError(f"Could not write to {folder}: {error.strerror}.") from error
        self.stdout.write(
            f"Wrote {len(charted)} entries of {patients} invented courses to {entries}, causes to {truth}."
        )
