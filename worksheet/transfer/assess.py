"""Findings about what is about to be stored: contradictions that no single value shows."""

from __future__ import annotations

from collections import Counter
from collections.abc import Sequence

import numpy as np

from worksheet.oxygen.quantities import MEASURED
from worksheet.oxygen.readings import Readings
from worksheet.ward.models import Unit

from .rows import DraftEntry, Fate


def readings_of(drafts: Sequence[DraftEntry]) -> Readings:
    """The drafts as a table of the engine."""
    numbers: dict[tuple[str, str], int] = {}
    stay = [numbers.setdefault((d.patient.system, d.patient.identifier), len(numbers)) for d in drafts]
    used = [n for n in MEASURED if any(n in d.cells for d in drafts)]
    nan = float("nan")

    def column(name: str) -> np.ndarray:
        cells = (d.cells.get(name) for d in drafts)
        return np.array([nan if c is None or c.value is None else c.value for c in cells], dtype=np.float64)

    return Readings.build(
        stay, [d.time.timestamp() / 3600.0 for d in drafts], [int(d.site) for d in drafts], {n: column(n) for n in used},
        [int(d.said("device")) for d in drafts], [int(d.said("flow_method")) for d in drafts], [int(d.said("event")) for d in drafts],
    )  # fmt: skip


def assess(drafts: Sequence[DraftEntry], unit: Unit) -> Counter[str]:
    """Findings among new drafts, counted by code."""
    chosen = [d for d in drafts if d.fate is Fate.NEW]
    if not chosen:
        return Counter()
    return Counter()
