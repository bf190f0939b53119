"""The fate of each draft: compared with what is stored for the same stay, time, site and sample."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from datetime import datetime
from typing import Any

from worksheet.oxygen.quantities import CATALOGUE, MEASURED
from worksheet.ward.models import Entry, Stay, Unit

from .group import entry_key, same
from .rows import Cell, DraftEntry, Fate, Status
from .stays import StayFinder

CHUNK = 400  # stays or keys in one query
_STATUS = {"preliminary": Status.PRELIMINARY, "corrected": Status.CORRECTED}
Identity = tuple[int, datetime, int]


@dataclass
class Standing:
    """What stands for a sample now: a stored entry, or a draft that will be stored before."""

    values: dict[str, float]
    sample: str
    pk: int | None = None
    draft: DraftEntry | None = None
    typed: dict[str, Any] = field(default_factory=dict)

    def status(self, name: str) -> Status:
        """How final a standing value is."""
        if self.draft is not None and name in self.draft.cells:
            return self.draft.cells[name].status
        return _STATUS.get(self.typed.get(name, {}).get("status", ""), Status.FINAL)


@dataclass
class Matched:
    """Drafts with their fates and the stays they belong to."""

    drafts: list[DraftEntry]
    finder: StayFinder
    stays: dict[int, Stay]  # by id(draft)


def match(drafts: list[DraftEntry], unit: Unit, finder: StayFinder, *, overwrite: bool = False) -> Matched:
    """Give each draft its fate. ``overwrite``: the file's values replace differing stored ones, as corrections."""
    stays: dict[int, Stay] = {}
    for draft in drafts:
        draft.fate, draft.replaces, draft.after, draft.changes = None, None, None, {}
        for row in draft.rows:
            row.fate = None
        stay, problem = finder.find(draft.patient, draft.time)
        if stay is None:
            draft.settle(Fate.UNMATCHED, problem)
            continue
        stays[id(draft)] = stay
        draft.stay_id = stay.pk or 0
        draft.key = draft.key or entry_key(unit.slug, stay.reference, draft)
    open_drafts = [d for d in drafts if d.fate is None]
    standing, keys = _stored([d for d in open_drafts if d.stay_id])
    marks = [(draft.stay_id or -id(stays[id(draft)]), draft.time, int(draft.site)) for draft in open_drafts]
    shared = _repeated(marks)
    for draft, mark in zip(open_drafts, marks, strict=True):
        _settle(draft, standing.get(mark) or [], keys, overwrite)
        if draft.fate is Fate.NEW and mark in shared:
            standing[mark].append(_as_standing(draft))
    return Matched(drafts, finder, stays)


def _repeated(marks: list[Identity]) -> set[Identity]:
    """Samples that more than one draft is about: only those have to be compared with each other."""
    seen: set[Identity] = set()
    return {mark for mark in marks if mark in seen or seen.add(mark)}  # type: ignore[func-returns-value]


def _as_standing(draft: DraftEntry) -> Standing:
    values = {n: c.value for n, c in draft.cells.items() if c.value is not None}
    return Standing(values, draft.sample, draft=draft)


def _stored(drafts: Sequence[DraftEntry]) -> tuple[defaultdict[Identity, list[Standing]], set[str]]:
    """Current entries for the drafts' stay, time and site, and which of their keys were stored ever before."""
    wanted = {(d.stay_id, d.time, int(d.site)) for d in drafts}
    found: defaultdict[Identity, list[Standing]] = defaultdict(list)
    keys: set[str] = set()
    if not drafts:
        return found, keys
    first, last = min(d.time for d in drafts), max(d.time for d in drafts)
    for ids in _chunks(sorted({d.stay_id for d in drafts})):
        entries = Entry.objects.filter(stay_id__in=ids, time__gte=first, time__lte=last)
        keys.update(entries.values_list("key", flat=True).iterator(chunk_size=5000))
        columns = ("stay_id", "time", "site", "sample", "pk", *MEASURED)
        for stay, time, site, sample, pk, *values in entries.current().values_list(*columns).iterator(chunk_size=2000):
            if (stay, time, site) in wanted:
                present = {n: v for n, v in zip(MEASURED, values, strict=True) if v is not None}
                found[(stay, time, site)].append(Standing(present, sample, pk))
    return found, keys


def _chunks(items: list[int]) -> Iterator[list[int]]:
    return (items[i : i + CHUNK] for i in range(0, len(items), CHUNK))


def _settle(draft: DraftEntry, standing: list[Standing], keys: set[str], overwrite: bool) -> None:
    if draft.key in keys:
        draft.settle(Fate.SAME, "already stored")
        return
    current = next((s for s in standing if not s.sample or not draft.sample or s.sample == draft.sample), None)
    if draft.struck:
        _withdraw(draft, standing)
    elif current is None:
        draft.settle(Fate.NEW)
    else:
        _compare(draft, current, overwrite)


def _compare(draft: DraftEntry, current: Standing, overwrite: bool) -> None:
    """Against the entry that stands for this sample: nothing new, more values, a correction, or a conflict."""
    given = {n: c for n, c in draft.cells.items() if c.value is not None}
    changed = [n for n in given if n in current.values and not same(given[n].value or 0.0, current.values[n])]
    added = [n for n in given if n not in current.values]
    if changed and current.pk is not None and not current.typed:
        current.typed = Entry.objects.values_list("typed", flat=True).get(pk=current.pk)
    older = [n for n in changed if given[n].status < current.status(n)]
    open_names = [n for n in changed if n not in older]
    if overwrite or all(_supersedes(given[n], current.status(n)) for n in open_names):
        take = [*added, *(changed if overwrite else open_names)]
        settled = [n for n in given if n not in (*added, *changed) and given[n].status > current.status(n)]
        _correct(draft, current, [*take, *settled]) if take else draft.settle(
            Fate.SAME, "an older result; the later one is stored" if older else "already stored"
        )
        return
    texts = (
        f"{CATALOGUE[n].symbol} is {_shown(n, current.values[n])} in the worksheet, {_text(given[n])} here"
        for n in open_names
    )
    draft.settle(Fate.CONFLICT, "; ".join(texts))


def _supersedes(cell: Cell, stored: Status) -> bool:
    return cell.status > stored or cell.status is Status.CORRECTED


def _correct(draft: DraftEntry, current: Standing, names: Iterable[str]) -> None:
    taken = list(names)
    words = [
        f"{CATALOGUE[n].symbol} {_shown(n, current.values[n])} → {_text(draft.cells[n])}"
        if n in current.values and not same(draft.cells[n].value or 0.0, current.values[n])
        else f"{CATALOGUE[n].symbol} is final"
        if n in current.values
        else f"adds {CATALOGUE[n].symbol}"
        for n in taken
    ]
    _take(draft, current, taken)
    draft.settle(Fate.CORRECTS, ", ".join(words))
    current.values = {**current.values, **{n: c.value for n, c in draft.changes.items() if c.value is not None}}


def _withdraw(draft: DraftEntry, standing: list[Standing]) -> None:
    """A value entered in error: taken out of the entry that holds it; struck out if it was the only one."""
    for current in list(standing):
        held = [
            n
            for n, c in draft.cells.items()
            if n in current.values and (c.value is None or same(c.value, current.values[n]))
        ]
        if held:
            _take(draft, current, held)
            left = {n: v for n, v in current.values.items() if n not in held}
            names = ", ".join(CATALOGUE[n].symbol for n in held)
            draft.settle(Fate.WITHDRAWN, f"entered in error: {names} " + ("is taken out" if left else "is struck out"))
            current.values = left
            if not left:
                standing.remove(current)
            return
    draft.settle(Fate.WITHDRAWN, "entered in error; no such value is stored")


def _take(draft: DraftEntry, current: Standing, names: list[str]) -> None:
    """The draft replaces what stands now, with these of its cells."""
    draft.replaces, draft.after = current.pk, current.draft
    draft.changes = {n: draft.cells[n] for n in names}
    current.typed = {**current.typed, **{n: c.typed() for n, c in draft.changes.items()}}
    current.draft, current.pk = draft, None


def _shown(name: str, value: float) -> str:
    unit = CATALOGUE[name].unit
    return f"{float(unit.from_canonical(value)):.6g} {unit.label}".strip()


def _text(cell: Cell) -> str:
    return f"{cell.text} {cell.unit}".strip()
