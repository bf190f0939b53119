"""From stored entries to everything that follows from them: one query, one vectorised pass, nothing cached."""

from __future__ import annotations

import time
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

import numpy as np

from worksheet.oxygen import align, derive, judgement, ledger, plausibility, uncertainty
from worksheet.oxygen.constants import Constants
from worksheet.oxygen.measurement import DEFAULT, Uncertainties
from worksheet.oxygen.quantities import MEASURED
from worksheet.oxygen.readings import Derived, Floats, Ints, Readings, Snapshots

from .models import Entry, Stay, Unit
from .models.entries import EntryQuerySet

COLUMNS = ("id", "stay_id", "time", "site", "device", "flow_method", "event", *MEASURED)
_STAY_FACTS = ("height", "weight", "age")


@dataclass(frozen=True)
class Sheet:
    """The entries of some stays of one unit, derived. Row i of every table belongs to ``entry_ids[i]``."""

    unit: Unit
    stays: tuple[Stay, ...]
    entry_ids: Ints
    readings: Readings
    snapshots: Snapshots
    derived: Derived
    constants: Constants
    settings: Uncertainties = DEFAULT
    refused: plausibility.Refused = field(default_factory=dict)  # stored values that cannot be, kept out of the pass

    @cached_property
    def sds(self) -> Mapping[str, Floats]:
        """Standard uncertainty of the derived quantities that have one, row by row."""
        return uncertainty.standard_uncertainties(self.snapshots, self.derived, self.constants, self.settings)

    @cached_property
    def ledger(self) -> ledger.Ledger:
        """Change ledger of each arterial row against its stay's previous arterial row."""
        return ledger.consecutive(self.snapshots, self.derived, self.constants, self.settings)

    @cached_property
    def findings(self) -> plausibility.Findings:
        """Everything implausible about these entries."""
        return plausibility.findings(
            self.snapshots, self.derived, self.constants, time.time() / 3600, self._admitted(), self.refused
        )

    def review(self, since: float, until: float = np.inf) -> judgement.Review:
        """Each stay judged over a window [h since the epoch]."""
        return judgement.review(self.snapshots, self.derived, self.constants, self.settings, since, until)

    def _admitted(self) -> Floats:
        known = {s.pk: s.admitted_at.timestamp() / 3600 for s in self.stays if s.admitted_at}
        return np.array([known.get(int(pk), np.nan) for pk in self.readings.stay])

    def rows(self, stay: Stay) -> Ints:
        """Row numbers of a stay, in time order."""
        order = self.snapshots.order
        own: Ints = order[self.readings.stay[order] == stay.pk]
        return own

    @cached_property
    def row_of_entry(self) -> dict[int, int]:
        """Row number of each entry id."""
        return {int(pk): row for row, pk in enumerate(self.entry_ids)}


def readings_of(entries: EntryQuerySet, stays: Iterable[Stay] = ()) -> tuple[Readings, Ints]:
    """The entries as a table, and their ids. Height, weight and age of the stay fill rows that have none."""
    return readings_from(list(entries.order_by("stay_id", "time", "id").values_list(*COLUMNS)), stays)


def readings_from(rows: Sequence[tuple[Any, ...]], stays: Iterable[Stay] = ()) -> tuple[Readings, Ints]:
    """The same from rows of :data:`COLUMNS` that somebody read together with more, ordered by stay, time and id."""
    if not rows:
        return Readings.build([], [], [], {}), np.zeros(0, dtype=np.int64)
    ids, stay, times, site, device, method, event, *values = zip(*rows, strict=True)
    columns = {name: np.array(column, dtype=np.float64) for name, column in zip(MEASURED, values, strict=True)}
    stay_ids = np.array(stay, dtype=np.int64)
    facts = {s.pk: s for s in stays}
    for name in _STAY_FACTS:
        known = np.array([getattr(facts[pk], name, None) if pk in facts else None for pk in stay], dtype=np.float64)
        columns[name] = np.where(np.isnan(columns[name]), known, columns[name])
    readings = Readings.build(
        stay_ids, np.array([t.timestamp() for t in times]) / 3600.0, site, columns, device, method, event
    )
    return readings, np.array(ids, dtype=np.int64)


def open_sheet(unit: Unit, stays: Sequence[Stay], entries: EntryQuerySet | None = None) -> Sheet:
    """Derive the current entries of some stays of a unit (or the given entries of them)."""
    chosen = entries if entries is not None else Entry.objects.filter(stay__in=[s.pk for s in stays]).current()
    return derived_sheet(unit, stays, *readings_of(chosen, stays))


def derived_sheet(unit: Unit, stays: Sequence[Stay], readings: Readings, ids: Ints) -> Sheet:
    """Derive readings, stored or still being typed: the one way from raw values to a sheet."""
    constants = unit.constants_in_force()
    readings, refused = plausibility.without_impossible(readings)
    snapshots = align.align(readings, constants.carry)
    derived = derive.derive(snapshots, constants)
    return Sheet(
        unit, tuple(stays), ids, readings, snapshots, derived, constants, unit.uncertainties_in_force(), refused
    )
