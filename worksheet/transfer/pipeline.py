"""One pipeline for page, command and listener: parse, group, find each row's fate; then store in one transaction."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field
from typing import Any

from django.db import IntegrityError, transaction

from worksheet.ward import audit
from worksheet.ward.models import Entry, Unit, User

from . import commit, fhir_in, hl7_in, stays, tabular, waiting
from .assess import assess
from .group import drafts_of
from .match import Matched, match
from .rows import Fate, Parsed, Preview, Refused
from .tabular import TableOptions
from .times import TimeRules


@dataclass(frozen=True)
class Options:
    """What a person, a command line or a unit map decides about one file."""

    rules: TimeRules = field(default_factory=TimeRules)
    create: bool = False  # make patients and stays for identifiers that the unit does not know
    overwrite: bool = False  # differing values of the file replace stored ones, as corrections
    keep_rest: bool = False
    confirmed: bool = False
    saved: dict[str, Any] | None = None
    system: str = ""
    codes: dict[str, str] = field(default_factory=dict)  # local code -> quantity
    progress: tabular.Progress | None = None


class Interrupted(Exception):
    """Somebody else stored for the same samples at the same moment; nothing was stored."""


def parse(kind: str, data: bytes, options: Options) -> Parsed:
    """The rows of a file of one format."""
    if kind in ("csv", "xlsx"):
        table = TableOptions(
            options.rules,
            options.saved,
            options.confirmed,
            options.keep_rest,
            options.system,
            progress=options.progress,
        )
        return tabular.parse_csv(data, table) if kind == "csv" else tabular.parse_xlsx(data, table)
    if kind == "fhir":
        return fhir_in.parse(data, options.rules, options.codes)
    if kind == "hl7v2":
        return hl7_in.parse(data, options.rules, options.codes)
    raise Refused(f"'{kind}' is not a format that can be read; use csv, xlsx, fhir or hl7v2.")


def preview(
    unit: Unit, name: str, parsed: Parsed, options: Options, *, with_findings: bool = True
) -> tuple[Preview, Matched]:
    """Every row's fate, without storing anything."""
    drafts = drafts_of(parsed.rows, observations=parsed.format in ("fhir", "hl7v2"))
    found = match(drafts, unit, stays.StayFinder(unit, options.create), overwrite=options.overwrite)
    seen = Preview(unit.name, name, parsed, drafts, [s.reference for s in found.finder.made.values()])
    if with_findings:
        seen.findings = assess(drafts, unit)
    return seen, found


def store(unit: Unit, user: User, seen: Preview, found: Matched, options: Options, *, queue: bool = True) -> Preview:
    """Store a preview in one transaction; the fates are settled once more inside it."""
    if seen.parsed.questions and not options.confirmed:
        raise Refused("Not stored: " + " ".join(seen.parsed.questions))
    try:
        with transaction.atomic():
            Unit.objects.select_for_update().get(pk=unit.pk)
            found = match(found.drafts, unit, stays.StayFinder(unit, options.create), overwrite=options.overwrite)
            _store(unit, user, seen, found, queue)
    except IntegrityError:
        raise Interrupted(
            "Somebody stored for the same samples at the same moment. Nothing was stored; send it again."
        ) from None
    seen.stored = True
    return seen


def _store(unit: Unit, user: User, seen: Preview, found: Matched, queue: bool) -> None:
    kind = seen.parsed.format
    needed = {id(found.stays[id(d)]) for d in found.drafts if d.fate is Fate.NEW}
    found.finder.made = {ref: stay for ref, stay in found.finder.made.items() if id(stay) in needed}
    made = stays.store_new(found.finder)
    new = commit.insert((d for d in found.drafts if d.fate is Fate.NEW), found.stays, user, kind)
    changing = [d for d in found.drafts if d.replaces or d.after]
    changes = list(commit.correct(changing, user, kind))
    queued = waiting.put(seen.waiting(), unit, seen.source) if queue else 0
    seen.entries = Counter({"new": new, "corrected": len(changes), "stays made": made, "queued": queued})
    seen.entries = Counter({k: v for k, v in seen.entries.items() if v})
    if seen.entries:
        audit.write(user.username, "imported", unit=unit.name, subject=seen.source[:120], format=kind,
                    rows=seen.counts(),
                    entries=dict(seen.entries), last_entry=_last_entry(), changes=changes)  # fmt: skip


def _last_entry() -> int:
    last = Entry.objects.order_by("-id").values_list("id", flat=True).first()
    return last or 0


def run(
    unit: Unit, user: User, name: str, kind: str, data: bytes, options: Options, *, dry_run: bool = False
) -> Preview:
    """Parse, preview and (unless it is a dry run) store."""
    seen, found = preview(unit, name, parse(kind, data, options), options)
    return seen if dry_run else store(unit, user, seen, found, options)
