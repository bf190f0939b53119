"""What the fuzzers call: bytes in, rows with a fate out, or a refusal in one sentence; anything else is a fault."""

from datetime import UTC, datetime
from zoneinfo import ZoneInfo

from worksheet.transfer import fhir_in, hl7_in, tabular
from worksheet.transfer.group import drafts_of
from worksheet.transfer.hl7_message import Rejected, acknowledge, frames, header
from worksheet.transfer.rows import Refused
from worksheet.transfer.times import TimeRules

RULES = TimeRules(ZoneInfo("Europe/Zurich"), now=datetime(2026, 3, 1, tzinfo=UTC))


def said(refusal):
    """A refusal is a sentence."""
    assert len(str(refusal)) > 10
    assert str(refusal).rstrip().endswith((".", "?"))


def _settled(parsed, *, observations):
    """Each row has a fate, or all that an entry needs; and the rows can be grouped."""
    for row in parsed.rows:
        assert row.fate is not None or (
            row.patient is not None and row.time is not None and (row.cells or row.note or row.event)
        )
        assert row.fate is None or row.reason or row.fate in ("new", "same")
        assert all(cell.value is None or -1e6 < cell.value < 1e6 for cell in row.cells.values())
    drafts_of(parsed.rows, observations=observations)


def csv(data: bytes) -> None:
    """A CSV file."""
    try:
        _settled(tabular.parse_csv(data, tabular.TableOptions(RULES)), observations=False)
    except Refused as refusal:
        said(refusal)


def fhir(data: bytes) -> None:
    """A FHIR file."""
    try:
        _settled(fhir_in.parse(data, RULES, {}), observations=True)
    except Refused as refusal:
        said(refusal)


def hl7(data: bytes) -> None:
    """A file of HL7 v2 messages, and the same bytes as a stream."""
    for frame in frames(bytearray(data)):
        acknowledge(header(frame), "AA").decode("utf-8")
    head = header(data)
    try:
        hl7_in.message_rows(data, head, RULES, {})
    except Rejected as refusal:
        acknowledge(head, refusal.code, refusal.reason).decode("utf-8")
    try:
        _settled(hl7_in.parse(data, RULES, {}), observations=True)
    except Refused as refusal:
        said(refusal)


TARGETS = {"csv": csv, "fhir": fhir, "hl7": hl7}
