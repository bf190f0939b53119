"""HL7 FHIR R4 (4.0.1) to rows: Bundles, NDJSON and single resources; each Observation or component is one row."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from datetime import datetime
from typing import Any, TypeVar

from worksheet.oxygen.quantities import CATALOGUE, MEASURED
from worksheet.oxygen.readings import Device, Event, FlowMethod, Site

from .cells import refusal, shortened
from .codes import OWN, Coding, Meaning, meaning, unit_of
from .fhir_context import Context, codings, patient_of, place_of, text_of
from .limits import MAX_ROWS
from .rows import Cell, Fate, Parsed, Refused, Row, Status
from .times import TimeRules, settle

_STATUS = {
    "final": Status.FINAL, "amended": Status.CORRECTED, "corrected": Status.CORRECTED,
    "preliminary": Status.PRELIMINARY, "registered": Status.PRELIMINARY, "entered-in-error": Status.ERROR,
}  # fmt: skip
_CARRIERS = frozenset(
    {"Patient", "Encounter", "Specimen", "DiagnosticReport", "Device", "Practitioner", "Organization"}
)
MAX_PERIOD_HOURS = 1.0  # a period longer than this is not one moment: its start is taken and said


@dataclass
class _Reader:
    """One file being read."""

    rules: TimeRules
    local: Mapping[str, str]
    context: Context = field(default_factory=Context)


def parse(data: bytes, rules: TimeRules, codes: Mapping[str, str]) -> Parsed:
    """The rows of a Bundle, of NDJSON, of a list or of one resource."""
    resources = list(_resources(_load(data)))
    if len(resources) > MAX_ROWS:
        raise Refused(f"The file has {len(resources):,} resources; at most {MAX_ROWS:,} are read at once.")
    reader = _Reader(rules, codes)
    for url, resource in resources:
        reader.context.add(url, resource)
    parsed = Parsed("fhir", [])
    others: dict[str, int] = {}
    for number, (_, resource) in enumerate(resources, 1):
        kind = resource.get("resourceType")
        if kind == "Observation":
            parsed.rows += _observation(reader, number, resource)
        elif not isinstance(kind, str) or kind not in _CARRIERS:
            others[str(kind)[:40]] = others.get(str(kind)[:40], 0) + 1
            row = Row(place_of(number, resource))
            row.settle(
                Fate.NOT_UNDERSTOOD, f"a resource of type {str(kind)[:40]} holds no measurement that is read here"
            )
            parsed.rows.append(row)
    if not parsed.rows:
        raise Refused("The file holds no Observation.")
    return parsed


def _load(data: bytes) -> list[Any]:
    """JSON documents in the bytes: one, or one on each line."""
    try:
        text = data.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise Refused(f"The file is not UTF-8 as FHIR requires (byte {error.start}).") from None
    try:
        return [json.loads(text)]
    except RecursionError:
        raise Refused("The JSON is nested too deeply; no such file is read.") from None
    except ValueError as error:
        lines = [line for line in text.split("\n") if line.strip()]
        if len(lines) < 2 or not lines[0].lstrip().startswith("{") or not lines[0].rstrip().endswith("}"):
            where = f" (line {error.lineno})" if isinstance(error, json.JSONDecodeError) else ""
            raise Refused(f"The file is not valid JSON{where}.") from None
    documents = []
    for number, line in enumerate(lines, 1):
        try:
            documents.append(json.loads(line))
        except (ValueError, RecursionError):
            raise Refused(f"Line {number} is not valid JSON.") from None
    return documents


def _resources(documents: list[Any]) -> Iterator[tuple[str, dict[str, Any]]]:
    """All resources with their full addresses; bundles and contained resources opened."""
    queue = [("", d) for d in documents]
    for url, item in queue:
        if isinstance(item, list):
            queue.extend(("", part) for part in item)
        elif not isinstance(item, dict):
            raise Refused("The JSON holds something that is not a FHIR resource.")
        elif item.get("resourceType") == "Bundle":
            entries = item.get("entry", [])
            entries = entries if isinstance(entries, list) else []
            queue.extend(
                (str(e.get("fullUrl", "")), e["resource"]) for e in entries if isinstance(e, dict) and "resource" in e
            )
        else:
            yield url, item
            inside = item.get("contained", [])
            yield from (("#" + str(c.get("id", "")), c) for c in inside if isinstance(c, dict) and "resourceType" in c)


def _observation(reader: _Reader, number: int, item: dict[str, Any]) -> list[Row]:
    """The rows of one Observation: its own value, and one for each component."""
    base = _base(reader, number, item)
    if isinstance(item.get("hasMember"), list) and not any(k.startswith(("value", "component")) for k in item):
        return []  # a panel: its members are rows of their own
    parts = item.get("component")
    parts = [p for p in parts if isinstance(p, dict)] if isinstance(parts, list) else []
    rows = []
    if not parts or any(k.startswith("value") for k in item):
        rows.append(_valued(reader, base, item, item))
    for index, part in enumerate(parts, 1):
        row = Row(f"{base.place}, component {index}", base.patient, base.time, base.site, base.sample, base.group,
                  status=base.status, fate=base.fate, reason=base.reason, note=base.note)  # fmt: skip
        rows.append(_valued(reader, row, part, item))
    return rows


def _base(reader: _Reader, number: int, item: dict[str, Any]) -> Row:
    """Who, when, where and how final: what all values of an Observation share."""
    context = reader.context
    row = Row(place_of(number, item), patient_of(context, item))
    row.sample, row.site = context.specimen(item)
    row.group = context.group(item) or row.sample
    row.note = "; ".join(text_of(n.get("text")) for n in _dicts(item.get("note")))[:1000]
    status = item.get("status")
    if status == "cancelled":
        row.settle(Fate.INVALID, "the sender cancelled this observation")
    elif not isinstance(status, str) or status not in _STATUS:
        row.settle(Fate.NOT_UNDERSTOOD, f"the status '{shortened(str(status))}' is not known")
    else:
        row.status = _STATUS[status]
    row.time, problem = _time(context, item, reader.rules, row)
    if problem:
        row.settle(Fate.INVALID, f"effective time: {problem}")
    if row.patient is None:
        row.settle(Fate.UNMATCHED, "no patient identifier is given")
    return row


def _time(context: Context, item: dict[str, Any], rules: TimeRules, row: Row) -> tuple[datetime | None, str]:
    """effectiveDateTime, effectiveInstant or the start of effectivePeriod; else when the specimen was collected."""
    text = item.get("effectiveDateTime") or item.get("effectiveInstant")
    period = item.get("effectivePeriod")
    if not text and isinstance(period, dict):
        text = period.get("start") or period.get("end")
        span = _hours(period)
        if span > MAX_PERIOD_HOURS:
            row.cautions += (f"given for a period of {span:.0f} h; its start is taken as the time",)
    text = text or context.collected(item)
    if not isinstance(text, str) or not text:
        return None, "it is missing"
    if len(text) < 16:
        return None, f"'{shortened(text)}' has no clock time"
    try:
        moment = datetime.fromisoformat(text)
    except ValueError:
        return None, f"'{shortened(text)}' cannot be read"
    return settle(moment, rules, text)


def _hours(period: dict[str, Any]) -> float:
    try:
        ends = [datetime.fromisoformat(str(period[k])) for k in ("start", "end")]
        return (ends[1] - ends[0]).total_seconds() / 3600.0
    except (KeyError, ValueError, TypeError):
        return 0.0


def _valued(reader: _Reader, row: Row, part: dict[str, Any], whole: dict[str, Any]) -> Row:
    """Give a row its value from an Observation or a component."""
    if row.fate is not None:
        row.raw = _excerpt(part)
        return row
    if _event(row, part):
        return row
    found = _meaning(reader, row, part, whole)
    if found.quantity is None:
        row.raw = _excerpt(part)
        row.quiet = found.quiet
        row.settle(Fate.CONFLICT if found.conflict else Fate.NOT_UNDERSTOOD, found.problem)
        return row
    row.site = row.site or found.site
    if found.site and row.site is not found.site and not (row.site in _VEINS and found.site is Site.VENOUS):
        row.raw = _excerpt(part)
        row.settle(Fate.CONFLICT, f"the code says {_words(found.site)}, the specimen {_words(row.site)}")
        return row
    row.flow_method = _own(whole.get("method"), "flow-method", FlowMethod) or found.flow_method
    row.device = _own(whole.get("method"), "device", Device) or Device.UNKNOWN
    cell, problem, fate = _cell(part, found, row.status)
    if cell is not None:
        row.cells = {found.quantity.name: cell}
        row.cautions += (cell.caution,) if cell.caution else ()
    if problem:
        row.raw = _excerpt(part)
        row.settle(fate, problem)
    return row


E_ = TypeVar("E_", Device, FlowMethod, Event)


def _own(concept: Any, kind: str, codes: type[E_]) -> E_ | None:
    """One of our own codes in a concept."""
    for coding in codings(concept):
        if coding.system == OWN + kind and coding.code.upper() in codes.__members__:
            return codes[coding.code.upper()]
    return None


def _event(row: Row, part: dict[str, Any]) -> bool:
    """Whether the Observation is an event of the worksheet (transfusion, bleed, …)."""
    event = _own(part.get("code"), "event", Event)
    if event is None:
        return False
    row.event = event
    value = part.get("valueQuantity")
    amount = value.get("value") if isinstance(value, dict) else None
    if isinstance(amount, (int, float)) and not isinstance(amount, bool) and 0 <= amount < 1e6:
        row.event_amount = float(amount)
    return True


_VEINS = frozenset({Site.MIXED_VENOUS, Site.CENTRAL_VENOUS, Site.VENOUS})


def _words(site: Site) -> str:
    return site.name.lower().replace("_", " ")


def _meaning(reader: _Reader, row: Row, part: dict[str, Any], whole: dict[str, Any]) -> Meaning:
    code = part.get("code")
    given = codings(code)
    text = text_of(code.get("text")) if isinstance(code, dict) else ""
    for coding in given:
        if coding.system == OWN + "quantity" and coding.code in MEASURED:
            return Meaning(CATALOGUE[coding.code])
        if coding.code in reader.local:
            return Meaning(CATALOGUE[reader.local[coding.code]])
    on_sample: bool | None = True if row.sample or row.site or whole.get("specimen") else None
    if on_sample is None and any(
        c.code == "vital-signs" for cat in _dicts(whole.get("category")) for c in codings(cat)
    ):
        on_sample = False
    method = " ".join([*(c.display for c in codings(whole.get("method"))), reader.context.device(whole)])
    return meaning(given, text, method=method, on_sample=on_sample)


def _cell(part: dict[str, Any], found: Meaning, status: Status) -> tuple[Cell | None, str, Fate]:
    """The value with its unit, or why there is none."""
    quantity = found.quantity
    if quantity is None:
        return None, found.problem, Fate.NOT_UNDERSTOOD
    value = part.get("valueQuantity")
    if not isinstance(value, dict):
        return None, f"{quantity.symbol}: {_no_number(part)}", Fate.NOT_UNDERSTOOD
    number = value.get("value")
    if isinstance(number, bool) or not isinstance(number, (int, float)) or abs(number) > 1e12 or number != number:
        return None, f"{quantity.symbol}: the value {shortened(str(number))!r} is not a number", Fate.INVALID
    unit, why = unit_of(quantity, _unit_texts(value))
    if unit is None:
        return None, f"{quantity.symbol} {number}: {why}", Fate.NOT_UNDERSTOOD
    canonical = float(unit.to_canonical(number))
    problem, caution = refusal(quantity, canonical, unit)
    comparator = value.get("comparator", "")
    if comparator not in ("", "<", ">", "<=", ">="):
        return (
            None,
            f"{quantity.symbol}: the comparator '{shortened(str(comparator))}' is not known",
            Fate.NOT_UNDERSTOOD,
        )
    shown = text_of(value.get("unit")) or unit.label
    cell = Cell(None if problem else canonical, str(number), shown, comparator, problem, caution, status)
    return cell, problem, Fate.INVALID


def _unit_texts(value: dict[str, Any]) -> list[str]:
    """UCUM code first; the printed unit counts only if there is no code (people print what they like)."""
    code = value.get("code")
    if isinstance(code, str) and code.strip():
        return [code]
    return [text_of(value.get("unit"))]


def _no_number(part: dict[str, Any]) -> str:
    reason = codings(part.get("dataAbsentReason"))
    if reason:
        return f"no value ({shortened(reason[0].display or reason[0].code)})"
    text = text_of(part.get("valueString"))
    return f"'{shortened(text)}' is not a number with a unit" if text else "no value with a unit is given"


def _excerpt(part: dict[str, Any]) -> str:
    """What the sender wrote, kept for whoever looks at the row."""
    try:
        return json.dumps({k: v for k, v in part.items() if k not in ("text", "contained")}, ensure_ascii=False)[:2000]
    except RecursionError:
        return ""


def _dicts(value: Any) -> list[dict[str, Any]]:
    return [v for v in value if isinstance(v, dict)] if isinstance(value, list) else []


__all__ = ["Coding", "parse"]
