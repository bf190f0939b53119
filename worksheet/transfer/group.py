"""Rows to drafts of entries: one stay, one sample, one time."""

from __future__ import annotations

import hashlib
import math
from collections import defaultdict
from collections.abc import Iterable
from datetime import datetime

from worksheet.oxygen.quantities import CATALOGUE
from worksheet.oxygen.readings import Site

from .rows import Cell, DraftEntry, Fate, PatientRef, Row, Status
from .tabular import ASSUMED_ARTERIAL

BLOOD = frozenset(
    {"ph", "pco2", "po2", "hb", "so2", "so2_calculated", "o2hb", "cohb", "methb", "sulfhb", "lactate", "bicarbonate"}
)
_GAS = frozenset({"ph", "pco2", "po2", "so2", "so2_calculated", "o2hb"})


def same(a: float, b: float) -> bool:
    """Whether two stored numbers are the same reading (rounding of a unit conversion apart)."""
    return math.isclose(a, b, rel_tol=1e-6, abs_tol=1e-9)


def drafts_of(rows: Iterable[Row], *, observations: bool) -> list[DraftEntry]:
    """Drafts from rows that have no fate yet. ``observations``: each row is one value of a sample (FHIR, HL7)."""
    ready = [
        r
        for r in rows
        if r.fate is None and r.patient is not None and r.time is not None and (r.cells or r.event or r.note)
    ]
    if observations:
        _give_sites(ready)
    last: dict[tuple[object, ...], DraftEntry] = {}
    drafts: list[DraftEntry] = []
    withdrawn: list[Row] = []
    for row in ready:
        if row.fate is not None:
            continue
        if row.status is Status.ERROR:
            withdrawn.append(row)
            continue
        patient, time = _who_and_when(row)
        mark = (patient.system, patient.identifier, time, row.site, row.sample)
        draft = last.get(mark)
        if (draft is None or not _joined(draft, row)) and row.fate is None:
            draft = last[mark] = DraftEntry(patient, time, row.site, row.sample, row.cells, (row,))
            drafts.append(draft)
    drafts += [_withdrawal(row) for row in withdrawn]
    return drafts


def _who_and_when(row: Row) -> tuple[PatientRef, datetime]:
    if row.patient is None or row.time is None:
        raise ValueError("a row without patient or time has its fate already")
    return row.patient, row.time


def _joined(draft: DraftEntry, row: Row) -> bool:
    """Add a row to a draft. False if it has to start the next one (a correction), or has got its fate here."""
    twice = [n for n in row.cells if n in draft.cells]
    changed = [n for n in twice if not _equal(draft.cells[n], row.cells[n])]
    if not changed:
        if len(twice) == len(row.cells) and not row.note:
            row.settle(Fate.SAME, "the same values stand in this file already")
            return False
        draft.cells = {**draft.cells, **row.cells}
        draft.rows += (row,)
        return True
    higher = [row.cells[n].status > draft.cells[n].status for n in changed]
    if all(higher):
        return False
    if not any(row.cells[n].status >= draft.cells[n].status for n in changed):
        row.settle(Fate.SAME, "an older result of this sample; a later one stands in this file")
        return False
    texts = ", ".join(f"{CATALOGUE[n].symbol} {draft.cells[n].text} and {row.cells[n].text}" for n in changed)
    row.settle(Fate.CONFLICT, f"two values for one sample: {texts} ({draft.first.place})")
    return False


def _equal(a: Cell, b: Cell) -> bool:
    if a.value is None or b.value is None:
        return a.value is b.value and a.text == b.text
    return same(a.value, b.value) and a.comparator == b.comparator


def _withdrawal(row: Row) -> DraftEntry:
    return DraftEntry(*_who_and_when(row), row.site, row.sample, row.cells, (row,), struck=True)


def _give_sites(rows: list[Row]) -> None:
    """Values whose code names no site belong to the sample of their report or specimen, if that is one."""
    buckets: dict[tuple[object, ...], list[Row]] = defaultdict(list)
    for row in rows:
        buckets[(row.patient, row.group or row.sample, row.time)].append(row)
    for bucket in buckets.values():
        samples = {r.sample for r in bucket if r.sample}
        if len(samples) == 1:  # FiO2 or temperature in the report of a sample carry no sample number of their own
            for row in bucket:
                row.sample = row.sample or next(iter(samples))
        sites = {r.site for r in bucket if r.site}
        unsaid = [r for r in bucket if not r.site]
        if len(sites) == 1:
            together = next(iter(sites))
            for row in unsaid:
                if row.group or row.sample or not BLOOD.isdisjoint(row.cells):
                    row.site = together
        elif len(sites) > 1:
            for row in unsaid:
                if not BLOOD.isdisjoint(row.cells):
                    row.settle(
                        Fate.CONFLICT, "the report holds samples of several sites and does not say which this is"
                    )
        elif any(not _GAS.isdisjoint(r.cells) for r in unsaid):
            for row in unsaid:
                if row.group or row.sample or not BLOOD.isdisjoint(row.cells):
                    row.site = Site.ARTERIAL
                    row.cautions = (*row.cautions, ASSUMED_ARTERIAL)


def entry_key(unit_slug: str, reference: str, draft: DraftEntry) -> str:
    """A key that the same content for the same stay always gets, so that sending it again stores nothing twice."""
    values = ";".join(f"{n}={c.value!r}{c.comparator}" for n, c in sorted(draft.cells.items()))
    text = f"{unit_slug}|{reference}|{draft.time.isoformat()}|{int(draft.site)}|{draft.sample}|{draft.struck}|{values}"
    return f"in-{hashlib.sha256(text.encode()).hexdigest()[:48]}"
