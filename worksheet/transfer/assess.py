"""Findings about what is about to be stored: contradictions that no single value shows."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Sequence

import numpy as np

from worksheet.oxygen import align, derive, plausibility
from worksheet.oxygen.finding_kinds import KINDS, Severity
from worksheet.oxygen.quantities import MEASURED
from worksheet.oxygen.readings import Floats, Readings
from worksheet.ward.display import Display
from worksheet.ward.models import Unit

from .rows import DraftEntry, Fate

BLOCK = 20_000
IN_WORDS = 500  # entries whose findings are written out in the preview; all are counted
_OF_ONE_VALUE = ("-impossible", "-unlikely")  # said with the row already


def readings_of(drafts: Sequence[DraftEntry]) -> Readings:
    """The drafts as a table of the engine."""
    numbers: dict[tuple[str, str], int] = {}
    stay = [numbers.setdefault((d.patient.system, d.patient.identifier), len(numbers)) for d in drafts]
    present = set().union(*(d.cells for d in drafts))
    nan = float("nan")

    def column(name: str) -> Floats:
        cells = (d.cells.get(name) for d in drafts)
        return np.array([nan if c is None or c.value is None else c.value for c in cells], dtype=np.float64)

    def codes(name: str) -> list[int]:
        return [int(d.said(name)) for d in drafts]

    hours = [d.time.timestamp() / 3600.0 for d in drafts]
    values = {name: column(name) for name in MEASURED if name in present}
    sites = [int(d.site) for d in drafts]
    return Readings.build(stay, hours, sites, values, codes("device"), codes("flow_method"), codes("event"))


def assess(drafts: Sequence[DraftEntry], unit: Unit) -> Counter[str]:
    """Findings among new drafts, counted by code; those that ask are added to their rows in words."""
    constants, display = unit.constants_in_force(), Display.of(None, unit)
    total: Counter[str] = Counter()
    for chosen in _blocks([d for d in drafts if d.fate is Fate.NEW]):
        snapshots = align.align(readings_of(chosen), constants.carry)
        derived = derive.derive(snapshots, constants)
        # Times in the future were refused before; shifted dates are in the future on purpose: no present time is given.
        found = plausibility.findings(snapshots, derived, constants, across_stays=True)
        _say(chosen, found, display)
        total.update({code: len(rows) for code, rows in found.rows.items()})
    return total


def _blocks(drafts: list[DraftEntry]) -> Iterator[list[DraftEntry]]:
    """Whole stays, some ten thousand entries at a time: memory stays bounded whatever the file."""
    if len(drafts) <= BLOCK:
        if drafts:
            yield drafts
        return
    of_stay: dict[tuple[str, str], list[DraftEntry]] = {}
    for draft in drafts:
        of_stay.setdefault((draft.patient.system, draft.patient.identifier), []).append(draft)
    block: list[DraftEntry] = []
    for entries in of_stay.values():
        if block and len(block) + len(entries) > BLOCK:
            yield block
            block = []
        block += entries
    yield block


def _say(drafts: Sequence[DraftEntry], found: plausibility.Findings, display: Display) -> None:
    """Write the findings that ask beside the rows they are about."""
    asking = [
        rows for code, rows in found.rows.items()
        if KINDS[code].severity is not Severity.NOTE and not code.endswith(_OF_ONE_VALUE)
    ]  # fmt: skip
    if not asking:
        return
    for number in np.unique(np.concatenate(asking))[:IN_WORDS].tolist():
        row = drafts[number].first
        words = [
            f.sentence
            for f in found.of_row(number, lambda name, value: display.value(name, value, with_unit=True))
            if f.severity is not Severity.NOTE and not f.code.endswith(_OF_ONE_VALUE)
        ]
        row.cautions = tuple(dict.fromkeys((*row.cautions, *words)))
