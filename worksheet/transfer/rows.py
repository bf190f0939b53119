"""What the pipeline passes on: cells, source rows, drafts of entries, and the preview that everybody looks at."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field
from datetime import UTC, datetime
from enum import IntEnum, StrEnum
from typing import Any

from worksheet.oxygen.readings import Device, Event, FlowMethod, Site


class Fate(StrEnum):
    """What becomes of one row of a file, or one observation of a message."""

    NEW = "new"
    SAME = "same"
    CORRECTS = "corrects"
    WITHDRAWN = "withdrawn"
    CONFLICT = "conflict"
    INVALID = "invalid"
    NOT_UNDERSTOOD = "not understood"
    UNMATCHED = "unmatched"


WAITING = frozenset({Fate.CONFLICT, Fate.INVALID, Fate.NOT_UNDERSTOOD, Fate.UNMATCHED})
"""Fates that store nothing and leave the row in the queue until a person has looked at it."""


class Status(IntEnum):
    """How final a result is, as its sender says; a higher one may replace a lower one."""

    ERROR = -1
    PRELIMINARY = 0
    FINAL = 1
    CORRECTED = 2


@dataclass(frozen=True, slots=True)
class Cell:
    """One value as it was received and as it is kept.

    Attributes
    ----------
    value : float or None
        In the quantity's canonical unit; None if the text gave no number.
    text, unit, comparator : str
        As received; ``comparator`` is ``<``, ``>``, ``<=``, ``>=`` or empty.
    problem : str
        Why the value is refused (a sentence without its row), empty if it is not.
    caution : str
        Why somebody should look again.
    """

    value: float | None
    text: str
    unit: str = ""
    comparator: str = ""
    problem: str = ""
    caution: str = ""
    status: Status = Status.FINAL

    def typed(self) -> dict[str, Any]:
        """What is kept beside the canonical value."""
        kept: dict[str, Any] = {"text": self.text, "unit": self.unit}
        if self.comparator:
            kept["comparator"] = self.comparator
        if self.status is not Status.FINAL:
            kept["status"] = self.status.name.lower()
        if self.problem:
            kept["refused"] = self.problem
        return kept


@dataclass(frozen=True, slots=True)
class PatientRef:
    """How a source names the patient: by identifier; name and birth date only guard against a mix-up."""

    identifier: str
    system: str = ""
    name: str = ""
    birth_date: str = ""


@dataclass(slots=True, eq=False)
class Row:
    """One row of a file or one observation of a message, and what becomes of it."""

    place: str
    patient: PatientRef | None = None
    time: datetime | None = None
    site: Site = Site.NONE
    sample: str = ""
    group: str = ""  # panel, report or message part it came in; keeps samples of one minute apart
    cells: dict[str, Cell] = field(default_factory=dict)
    status: Status = Status.FINAL
    device: Device = Device.UNKNOWN
    flow_method: FlowMethod = FlowMethod.UNKNOWN
    event: Event = Event.NONE
    event_amount: float | None = None
    note: str = ""
    raw: Any = None
    fate: Fate | None = None
    reason: str = ""
    cautions: tuple[str, ...] = ()
    quiet: bool = False  # nothing that a person could do about it: reported, not queued

    def settle(self, fate: Fate, reason: str = "") -> None:
        """Give the row its fate; the first one stands."""
        if self.fate is None:
            self.fate, self.reason = fate, reason


@dataclass(slots=True, eq=False)
class DraftEntry:
    """Rows of one stay, sample and time, on their way to one entry."""

    patient: PatientRef
    time: datetime
    site: Site
    sample: str
    cells: dict[str, Cell]
    rows: tuple[Row, ...]
    stay_id: int = 0
    key: str = ""
    fate: Fate | None = None
    reason: str = ""
    replaces: int | None = None  # stored entry that this one corrects
    after: DraftEntry | None = None  # draft of the same batch that this one corrects
    struck: bool = False
    changes: dict[str, Cell] = field(default_factory=dict)  # what a correction or withdrawal takes from the cells

    @property
    def first(self) -> Row:
        """The row that the draft began with."""
        return self.rows[0]

    def said(self, name: str) -> Any:
        """Device, flow method, event or its amount: from the first row that says it."""
        return next((value for row in self.rows if (value := getattr(row, name))), getattr(self.rows[0], name))

    def settle(self, fate: Fate, reason: str = "") -> None:
        """Give the draft, and those of its rows that have none yet, their fate."""
        self.fate, self.reason = fate, reason
        for row in self.rows:
            row.settle(fate, reason)


class Refused(Exception):
    """A file that cannot be read at all; the message is a sentence for the person who sent it."""


@dataclass
class Parsed:
    """What a parser hands on."""

    format: str
    rows: list[Row]
    columns: list[dict[str, Any]] = field(default_factory=list)  # how each column of a table was understood
    questions: list[str] = field(default_factory=list)  # what a person has to confirm before anything is stored
    notes: list[str] = field(default_factory=list)
    shifted_dates: bool = False


@dataclass
class Preview:
    """Every row with its fate, before anything is stored. The page, the command and the report show this object."""

    unit: str
    source: str
    parsed: Parsed
    drafts: list[DraftEntry]
    new_stays: list[str] = field(default_factory=list)
    findings: Counter[str] = field(default_factory=Counter)
    stored: bool = False
    entries: Counter[str] = field(default_factory=Counter)

    @property
    def rows(self) -> list[Row]:
        """The source rows in their order."""
        return self.parsed.rows

    def counts(self) -> dict[str, int]:
        """Rows by fate; the sum is the number of rows."""
        tally = Counter(row.fate.value if row.fate else "unsettled" for row in self.rows)
        return {name: tally[name] for name in (*[f.value for f in Fate], "unsettled") if tally[name]}

    def waiting(self) -> Iterator[Row]:
        """Rows that store nothing and need a person."""
        return (row for row in self.rows if row.fate in WAITING and not row.quiet)

    def not_understood(self) -> dict[str, int]:
        """What was not understood, with how often."""
        seen = Counter(row.reason for row in self.rows if row.fate is Fate.NOT_UNDERSTOOD)
        columns = [c["header"] for c in self.parsed.columns if c.get("reads_as") == "not read"]
        return {**{f"column '{name}'": 0 for name in columns}, **dict(seen.most_common())}

    def report(self, limit: int | None = None) -> dict[str, Any]:
        """The preview as plain data: what ``--report`` writes."""
        rows = self.rows if limit is None else self.rows[:limit]
        return {
            "unit": self.unit,
            "file": self.source,
            "format": self.parsed.format,
            "stored": self.stored,
            "rows": len(self.rows),
            "fates": self.counts(),
            "entries": dict(self.entries),
            "new_stays": self.new_stays,
            "columns": self.parsed.columns,
            "questions": self.parsed.questions,
            "notes": self.parsed.notes,
            "findings": dict(self.findings.most_common()),
            "not_understood": self.not_understood(),
            "details": [row_as_data(row) for row in rows],
        }


def row_as_data(row: Row) -> dict[str, Any]:
    """One row of the report."""
    data: dict[str, Any] = {
        "place": row.place,
        "fate": row.fate.value if row.fate else "unsettled",
        "reason": row.reason,
        "patient": row.patient.identifier if row.patient else "",
        "time": row.time.astimezone(UTC).isoformat() if row.time else "",
        "site": row.site.name.lower(),
        "values": {name: cell.typed() for name, cell in row.cells.items()},
    }
    if row.cautions:
        data["cautions"] = list(row.cautions)
    return data
