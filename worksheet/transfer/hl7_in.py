"""HL7 v2 ORU^R01 (2.3 to 2.8) to rows: each OBX is one row, with its patient, sample, time and status."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from datetime import datetime, timedelta, timezone
from zoneinfo import ZoneInfo

import hl7

from worksheet.oxygen.quantities import CATALOGUE
from worksheet.oxygen.readings import Site

from .cells import number as number_in
from .cells import refusal, shortened
from .codes import Coding, Meaning, meaning, unit_of
from .fhir_context import site_of
from .hl7_message import Header, Rejected, at, check, header, repetitions, segments, split_file, text
from .limits import MAX_ROWS
from .rows import Cell, Fate, Parsed, PatientRef, Refused, Row, Status
from .times import TimeRules, parse_hl7

_STATUS = {  # HL7 table 0085
    "": Status.FINAL, "F": Status.FINAL, "U": Status.FINAL, "B": Status.FINAL, "V": Status.FINAL, "C": Status.CORRECTED,
    "P": Status.PRELIMINARY, "R": Status.PRELIMINARY, "S": Status.PRELIMINARY, "I": Status.PRELIMINARY,
    "D": Status.ERROR, "W": Status.ERROR,
}  # fmt: skip
_NO_RESULT = {"X": "no result can be obtained", "N": "it was not asked for", "O": "order detail only"}
_GAS_PANEL = re.compile(r"\b(?:blood gas|gas panel|bga|abg|vbg|blodgass?|blutgas\w*|gaz du sang|gasometria)\b", re.I)
_ARTERIAL_PANEL = re.compile(r"\b(?:arterial|arteriell\w*|arteriel\w*|art[eé]rie\w*|abg)\b", re.I)
_LOINC_PANELS = {"24336-0": Site.ARTERIAL}
SAME_DRAW = timedelta(minutes=30)  # an OBX time this close to the draw is when the analyser ran, not another draw


@dataclass
class _Order:
    """One OBR with what belongs to it."""

    segment: hl7.Segment | None
    results: list[tuple[hl7.Segment, list[str]]] = field(default_factory=list)
    specimen: hl7.Segment | None = None


@dataclass(frozen=True)
class _Message:
    """What all results of a message share."""

    head: Header
    rules: TimeRules
    codes: Mapping[str, str]


def parse(data: bytes, rules: TimeRules, codes: Mapping[str, str]) -> Parsed:
    """The rows of all messages of a file."""
    parsed = Parsed("hl7v2", [])
    for number, raw in enumerate(split_file(data), 1):
        head = header(raw)
        name = f"message {head.control_id or number}"
        try:
            rows, notes = message_rows(raw, head, rules, codes)
        except Rejected as refusal_:
            row = Row(name, raw=raw[:2000].decode("latin-1"))
            row.settle(Fate.INVALID, refusal_.reason)
            rows, notes = [row], []
        parsed.rows += rows
        parsed.notes += [f"{name}: {note}" for note in notes]
        if len(parsed.rows) > MAX_ROWS:
            raise Refused(f"The file holds more than {MAX_ROWS:,} results; split it.")
    if rules.zone is not None and not any(header(raw).zone for raw in split_file(data)[:1]):
        parsed.notes.append(f"Times without a zone are read as {rules.zone.key}.")
    return parsed


def message_rows(raw: bytes, head: Header, rules: TimeRules, codes: Mapping[str, str]) -> tuple[list[Row], list[str]]:
    """The rows of one message, and notes; :class:`Rejected` if it cannot be taken at all."""
    check(head, raw)
    found, notes = segments(raw, head)
    message = _Message(head, _with_zone(rules, head), codes)
    patient: PatientRef | None = None
    orders: list[tuple[PatientRef | None, _Order]] = []
    for segment in found:
        name = str(segment[0])
        if name == "PID":
            patient = _patient(segment)
        elif name == "OBR":
            orders.append((patient, _Order(segment)))
        elif name == "OBX":
            if not orders:
                orders.append((patient, _Order(None)))
            orders[-1][1].results.append((segment, []))
        elif name == "SPM" and orders:
            orders[-1][1].specimen = orders[-1][1].specimen or segment
        elif name == "NTE" and orders and orders[-1][1].results:
            orders[-1][1].results[-1][1].append(text(segment, 3, 1))
    rows = [row for i, (who, order) in enumerate(orders, 1) for row in _order_rows(message, who, order, i)]
    if not rows:
        raise Rejected("AR", "the message holds no result (OBX)")
    return rows, notes


def _with_zone(rules: TimeRules, head: Header) -> TimeRules:
    """An offset in the message time holds for its other times, as the standard says."""
    if not head.zone:
        return rules
    minutes = int(head.zone[1:3]) * 60 + int(head.zone[3:5])
    if minutes >= 24 * 60:
        return rules
    return replace(rules, zone=_Offset(timedelta(minutes=minutes if head.zone[0] == "+" else -minutes)))


def _Offset(offset: timedelta) -> ZoneInfo:
    return timezone(offset)  # type: ignore[return-value]


def _patient(pid: hl7.Segment) -> PatientRef | None:
    """The patient by PID-3: the medical record number if it is marked, else the first identifier."""
    best: tuple[int, str, str] | None = None
    for n in range(1, repetitions(pid, 3) + 1):
        value, kind = at(pid, 3, n, 1), at(pid, 3, n, 5)
        rank = {"MR": 0, "PI": 1, "": 2}.get(kind, 3)
        if value and (best is None or rank < best[0]):
            best = (rank, value, at(pid, 3, n, 4))
    if best is None:
        value = text(pid, 2, 1)  # 2.3: external identifier
        best = (9, value, text(pid, 2, 4)) if value else None
    if best is None or len(best[1]) > 64:
        return None
    return PatientRef(best[1], best[2][:120], text(pid, 5, 1)[:120], text(pid, 7, 1)[:8])


def _order_rows(message: _Message, who: PatientRef | None, order: _Order, index: int) -> list[Row]:
    """The rows of one OBR."""
    site, on_sample, sample = _sample(order)
    group = f"{message.head.sender}:{message.head.control_id}:{index}"
    rows = []
    for n, (obx, notes) in enumerate(order.results, 1):
        place = f"message {message.head.control_id}, OBX {text(obx, 1, 1) or n}" + (
            f" of OBR {index}" if index > 1 else ""
        )
        row = Row(place, who, site=Site.NONE, sample=sample, group=group, note="; ".join(x for x in notes if x)[:1000])
        _fill(message, row, obx, order, on_sample)
        rows.append(row)
    _settle_sites(rows, site)
    return rows


def _settle_sites(rows: list[Row], site: Site) -> None:
    """The panel's or specimen's site holds for results whose code names none; a contradiction is a conflict."""
    for row in rows:
        if site and row.cells and row.site and row.site is not site and not (site > 1 and row.site is Site.VENOUS):
            row.settle(Fate.CONFLICT, f"the code says {_words(row.site)}, the specimen {_words(site)}")
    if site and any(not row.site for row in rows) and any(row.cells for row in rows):
        for row in rows:
            row.site = site if not row.site or row.site is Site.VENOUS else row.site


def _words(site: Site) -> str:
    return site.name.lower().replace("_", " ")


def _sample(order: _Order) -> tuple[Site, bool | None, str]:
    """Site, whether the results are of a blood sample, and the sample's number."""
    site, number = Site.NONE, ""
    if order.specimen is not None:
        spm = order.specimen
        number = text(spm, 2, 2, 1) or text(spm, 2, 1, 1)
        site = site_of([Coding(text(spm, 4, 1), text(spm, 4, 3), text(spm, 4, 2))], "")
    obr = order.segment
    if obr is None:
        return site, True if site else None, number[:64]
    source = text(obr, 15, 1, 1) or text(obr, 15, 1, 2)
    site = site or site_of([Coding(source, "", source)], "")
    name = f"{text(obr, 4, 1)} {text(obr, 4, 2)} {text(obr, 4, 5)}"
    gas = bool(_GAS_PANEL.search(name)) or text(obr, 4, 1) in _LOINC_PANELS
    if gas and not site:
        site = _LOINC_PANELS.get(text(obr, 4, 1), Site.ARTERIAL if _ARTERIAL_PANEL.search(name) else Site.NONE)
    return site, True if gas or site else None, number[:64]


def _fill(message: _Message, row: Row, obx: hl7.Segment, order: _Order, on_sample: bool | None) -> None:
    """Give a row its time, status and value."""
    kind, status = text(obx, 2, 1).upper(), text(obx, 11, 1).upper()
    row.raw = str(obx)[:500]
    name = shortened(text(obx, 3, 2) or text(obx, 3, 1))
    if kind in ("ED", "RP"):
        row.quiet = True
        row.settle(Fate.NOT_UNDERSTOOD, f"{name}: an attachment; it is kept with the message and not read")
        return
    if kind in ("TX", "FT"):
        row.quiet = True
        row.settle(Fate.NOT_UNDERSTOOD, f"{name}: the comment '{shortened(text(obx, 5, 1))}' is kept with the message")
        return
    if status in _NO_RESULT:
        row.quiet = True
        row.settle(Fate.INVALID, f"{name}: {_NO_RESULT[status]} ('{shortened(text(obx, 5, 1))}', status {status})")
        return
    if status not in _STATUS:
        row.settle(Fate.NOT_UNDERSTOOD, f"{name}: the status '{shortened(status)}' is not known")
        return
    row.status = _STATUS[status]
    if not status and order.segment is not None and text(order.segment, 25, 1).upper() in ("P", "C"):
        row.status = _STATUS[text(order.segment, 25, 1).upper()]
    row.time, problem = _time(message, obx, order)
    if problem:
        row.settle(Fate.INVALID, f"{name}: {problem}")
    elif row.patient is None:
        row.settle(Fate.UNMATCHED, "no patient identifier is given (PID-3)")
    else:
        _value(message, row, obx, on_sample)


def _time(message: _Message, obx: hl7.Segment, order: _Order) -> tuple[datetime | None, str]:
    """When the sample was drawn (SPM-17, OBR-7); the result's own time (OBX-14) if it is far from that or alone."""
    drawn = text(order.specimen, 17, 1) if order.specimen is not None else ""
    drawn = drawn or (text(order.segment, 7, 1) if order.segment is not None else "")
    own = text(obx, 14, 1)
    if not drawn:
        return parse_hl7(own, message.rules)
    first, problem = parse_hl7(drawn, message.rules)
    second, _ = parse_hl7(own, message.rules) if own else (None, "")
    if first is not None and second is not None and abs(second - first) > SAME_DRAW:
        return second, ""
    return first, problem


def _value(message: _Message, row: Row, obx: hl7.Segment, on_sample: bool | None) -> None:
    given = [Coding(text(obx, 3, i), text(obx, 3, i + 2), text(obx, 3, i + 1)) for i in (1, 4)]
    given = [c for c in given if c.code]
    local = next((message.codes[c.code] for c in given if c.code in message.codes), "")
    method = f"{text(obx, 17, 1)} {text(obx, 17, 2)}"
    found = Meaning(CATALOGUE[local]) if local else meaning(given, method=method, on_sample=on_sample)
    if found.quantity is None:
        row.quiet = found.quiet
        row.settle(Fate.CONFLICT if found.conflict else Fate.NOT_UNDERSTOOD, found.problem)
        return
    row.site, row.flow_method = found.site, found.flow_method
    cell, problem, fate = _cell(obx, found, row.status)
    if cell is not None:
        row.cells = {found.quantity.name: cell}
        row.cautions += (cell.caution,) if cell.caution else ()
    if problem:
        row.settle(fate, problem)


def _cell(obx: hl7.Segment, found: Meaning, status: Status) -> tuple[Cell | None, str, Fate]:
    """The value with its unit, or why there is none."""
    quantity = found.quantity
    if quantity is None:
        return None, found.problem, Fate.NOT_UNDERSTOOD
    if text(obx, 2, 1).upper() == "SN":
        written = f"{text(obx, 5, 1)}{text(obx, 5, 2)}"
        if text(obx, 5, 3):
            return None, f"{quantity.symbol}: '{shortened(text(obx, 5))}' is a range or ratio", Fate.NOT_UNDERSTOOD
    else:
        written = text(obx, 5, 1)
    value, comparator, rest = number_in(written)
    if value is None:
        return None, f"{quantity.symbol}: '{shortened(written)}' is not a number", Fate.INVALID
    codes = [text(obx, 6, 1), text(obx, 6, 4)] if text(obx, 6, 1) else [text(obx, 6, 4) or text(obx, 6, 2) or rest]
    unit, why = unit_of(quantity, codes)
    if unit is None:
        return None, f"{quantity.symbol} {shortened(written)}: {why}", Fate.NOT_UNDERSTOOD
    canonical = float(unit.to_canonical(value))
    problem, caution = refusal(quantity, canonical, unit)
    shown = text(obx, 6, 1) or unit.label
    if repetitions(obx, 5) > 1:
        return None, f"{quantity.symbol}: several values in one result", Fate.NOT_UNDERSTOOD
    cell = Cell(None if problem else canonical, written, shown, comparator, problem, caution, status)
    return cell, problem, Fate.INVALID
