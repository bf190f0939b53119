"""From texts to a slip and back: an empty form, one that was sent, and a stored entry opened again."""

from __future__ import annotations

import uuid
from collections.abc import Mapping
from datetime import datetime
from zoneinfo import ZoneInfo

from worksheet.oxygen.quantities import CATALOGUE, UnitOfMeasure
from worksheet.ward.display import Display
from worksheet.ward.models import Entry

from . import moments, numbers, texts
from .slip import Level, Notice, Slip, ValueField
from .slip_words import names


def typing_unit(name: str, display: Display, entry_units: Mapping[str, str]) -> UnitOfMeasure:
    """The unit a field starts with: the one this person typed it in last, else the one it is shown in."""
    quantity = CATALOGUE[name]
    wanted = entry_units.get(name)
    return next((u for u in quantity.units if u.ucum == wanted), display.unit(name))


def blank(display: Display, entry_units: Mapping[str, str], begun_by: str, zone: ZoneInfo, now: datetime) -> Slip:
    """An empty slip: the time is now on the unit's clock, nothing else is filled in."""
    local = now.astimezone(zone)
    fields = {n: ValueField(CATALOGUE[n], typing_unit(n, display, entry_units)) for n in names()}
    twice = local.replace(fold=0).utcoffset() != local.replace(fold=1).utcoffset()
    fold = str(local.fold) if twice else ""
    return Slip(fields, f"{local:%Y-%m-%d}", f"{local:%H:%M}", fold=fold, key=uuid.uuid4().hex, begun_by=begun_by)


def from_post(posted: Mapping[str, str], confirmed: list[str], display: Display, zone: ZoneInfo, now: datetime) -> Slip:
    """Read a form that was sent (or a draft): parse every text, keep every text."""
    posted = texts.posted(posted)
    fields = {name: read_value(name, posted, display) for name in names()}
    slip = Slip(
        fields,
        date=posted.get("date", ""),
        clock=posted.get("clock", ""),
        fold=posted.get("fold", ""),
        site=posted.get("site", ""),
        sample=posted.get("sample", ""),
        reason=posted.get("reason", ""),
        begun_by=posted.get("begun_by", ""),
        opened=posted.get("opened", ""),
        device=posted.get("device", "0"),
        flow_method=posted.get("flow_method", "0"),
        note=posted.get("note", ""),
        key=posted.get("key", "")[:80] or uuid.uuid4().hex,
        use_estimate=bool(posted.get("use_estimate")),
        confirmed=frozenset(texts.plain(token) for token in confirmed),
    )
    slip.moment = moments.read(slip.date, slip.clock, slip.fold, zone, now)
    return slip


def from_entry(entry: Entry, display: Display, begun_by: str, zone: ZoneInfo) -> Slip:
    """A slip filled with a stored entry, in the texts and units in which it was typed."""
    local = entry.time.astimezone(zone)
    twice = local.replace(fold=0).utcoffset() != local.replace(fold=1).utcoffset()
    return Slip(
        {name: _stored_field(name, entry, display) for name in names()},
        f"{local:%Y-%m-%d}",
        f"{local:%H:%M}" if not local.second else f"{local:%H:%M:%S}",
        fold=str(local.fold) if twice else "",
        site=str(entry.site),
        device=str(entry.device),
        flow_method=str(entry.flow_method),
        sample=entry.sample,
        note=entry.note,
        key=uuid.uuid4().hex,
        begun_by=begun_by,
        use_estimate=any(isinstance(kept, dict) and kept.get("estimated") for kept in entry.typed.values()),
    )


def take_over(mine: Slip, before: Slip, theirs: Slip) -> None:
    """Where I changed nothing, a colleague's correction comes into my form; what I typed stays."""
    for part in ("site", "device", "flow_method", "sample", "note"):
        if getattr(mine, part) == getattr(before, part):
            setattr(mine, part, getattr(theirs, part))
    if (mine.date, mine.clock) == (before.date, before.clock):
        mine.date, mine.clock, mine.fold = theirs.date, theirs.clock, theirs.fold
    for name, field_ in mine.fields.items():
        old, new = before.fields[name].value, theirs.fields[name].value
        if old != new and not field_.notices and _alike(field_.value, old):
            mine.fields[name] = theirs.fields[name]


def _alike(one: float | None, other: float | None) -> bool:
    return one == other or (one is not None and other is not None and abs(one - other) < 1e-9)


def read_value(name: str, posted: Mapping[str, str], display: Display) -> ValueField:
    """One quantity as typed: its text and the unit chosen beside it."""
    quantity = CATALOGUE[name]
    chosen = posted.get(f"{name}_unit", "")
    unit = next((u for u in quantity.units if u.ucum == chosen), display.unit(name) if not chosen else quantity.unit)
    result = ValueField(quantity, unit, posted.get(name, ""))
    number = numbers.read(result.text, quantity, unit, display.decimal_comma)
    if number.problem:
        result.notices.append(Notice(Level.IMPOSSIBLE, name, "not_a_number", f"{quantity.symbol}: {number.problem}"))
    elif number.value is not None:
        result.value, result.comparator = float(unit.to_canonical(number.value)), number.comparator
        _read_as_fraction(result, number.value)
    return result


def _read_as_fraction(field_: ValueField, typed: float) -> None:
    """FiO2 is written as a fraction or in percent; what cannot be the one is read as the other, and said."""
    if field_.name != "fio2":
        return
    percent = field_.unit.ucum == "%"
    if (percent and 0 < typed <= 1) or (not percent and typed > 1):
        field_.value = typed if percent else typed / 100
        kind = "a fraction" if percent else "percent"
        words = f"FiO2 {field_.text.strip()} is read as {kind}: {100 * field_.value:g} %."
        field_.notices.append(Notice(Level.NOTE, "fio2", "fio2_reading", words))


def _stored_field(name: str, entry: Entry, display: Display) -> ValueField:
    quantity, value = CATALOGUE[name], getattr(entry, name)
    kept = entry.typed.get(name, {}) if isinstance(entry.typed, dict) else {}
    unit = quantity.unit_named(kept.get("unit", "")) if kept.get("unit") else None
    result = ValueField(quantity, unit or display.unit(name))
    if value is None or kept.get("estimated"):  # an estimate is offered again, never shown as if it was measured
        return result
    text = kept.get("text", "") if unit else ""
    number = numbers.parse(text)
    same = number.value is not None and abs(float(result.unit.to_canonical(number.value)) - value) < 1e-9
    result.text = text if same else _plain(value, result.unit, kept.get("comparator", ""))
    result.value = value
    return result


def _plain(value: float, unit: UnitOfMeasure, comparator: str) -> str:
    return f"{comparator}{float(f'{float(unit.from_canonical(value)):.6g}'):g}"
