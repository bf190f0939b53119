"""What stands against a slip: the same notices while typing and while saving."""

from __future__ import annotations

from datetime import datetime, timedelta
from enum import IntEnum

from worksheet.oxygen import plausibility
from worksheet.oxygen.finding_kinds import Severity
from worksheet.oxygen.quantities import UnitOfMeasure
from worksheet.oxygen.readings import Device, FlowMethod, Site
from worksheet.ward.display import Display, age_words
from worksheet.ward.models import Entry, Stay, User

from .finding_places import FROM_WRONG, PLACES, SAID_ALREADY, TELLS
from .slip import Level, Notice, Slip, ValueField
from .slip_words import NOTE_LONGEST, SAMPLE_ONLY
from .trial import Trial, others, try_out

LONG_AGO = timedelta(hours=12)
STALE_CLOCK = timedelta(minutes=20)  # a form left open this long still shows the time at which it was opened
LEVELS = {
    Severity.IMPOSSIBLE: Level.IMPOSSIBLE,
    Severity.UNLIKELY: Level.UNLIKELY,
    Severity.NOTE: Level.NOTE,
}
CANNULA_TOP = 6.0  # L/min; the rule holds up to here (common practice)


def check(
    slip: Slip, user: User, stay: Stay, display: Display, now: datetime, replacing: Entry | None = None
) -> Trial | None:
    """Add every notice to the slip; the trial derivation where there is enough to derive."""
    _offer_estimate(slip)
    for each in slip.fields.values():
        check_limits(each, display)
    check_codes(slip)
    check_texts(slip)
    check_time(slip, stay, now)
    _site(slip)
    _twice(slip, user, stay, display, replacing)
    return _derived(slip, user, stay, display, replacing)


def _say(slip: Slip, level: Level, field: str, code: str, words: str, about: str = "") -> None:
    notice = Notice(level, field, code, words, about)
    (slip.fields[field].notices if field in slip.fields else slip.notices).append(notice)


# --- single values ---


def check_limits(field: ValueField, display: Display) -> None:
    """Limits of the catalogue, said in the unit that was typed."""
    if field.value is None:
        return
    about = f"{field.text.strip()} {field.unit.ucum}"
    if field.name in plausibility.SATURATIONS and field.value <= plausibility.LIKE_FRACTION:
        words = f"{field.quantity.symbol} {field.text.strip()} {field.unit.label} is no saturation of living blood."
        words += _other_units(field)
        field.notices.append(Notice(Level.IMPOSSIBLE, field.name, "saturation-like-fraction", words))
        return
    found = plausibility.check_value(field.quantity, field.value)
    if found is not None:
        level = LEVELS[found.severity]
        limits = field.quantity.impossible if level is Level.IMPOSSIBLE else field.quantity.unlikely
        words = _outside(field, "impossible" if level is Level.IMPOSSIBLE else "unlikely", limits, display)
        field.notices.append(Notice(level, field.name, found.code, words, about))
        return
    if field.comparator:
        words = (
            f"{field.quantity.symbol} is kept as {field.text.strip()}; calculations use the number without the sign."
        )
        field.notices.append(Notice(Level.NOTE, field.name, "comparator", words))


def _outside(field: ValueField, code: str, limits: tuple[float, float], display: Display) -> str:
    low, high = (_shown(bound, field.unit, display) for bound in limits)
    label = f" {field.unit.label}" if field.unit.label else ""
    usual = "possible" if code == "impossible" else "usual"
    words = f"{field.quantity.symbol} {field.text.strip()}{label} is {code} ({usual}: {low} to {high}{label})."
    return words + _other_units(field)


def _other_units(field: ValueField) -> str:
    """Units in which the number would be ordinary: a mix-up is named, never mended by itself."""
    assert field.value is not None  # noqa: S101 - for the type checker; the caller looked
    typed = float(field.unit.from_canonical(field.value))
    low, high = field.quantity.unlikely
    fits = [u.label for u in field.choices if u is not field.unit and low <= float(u.to_canonical(typed)) <= high]
    return f" As {' or '.join(fits)} it would be usual: is the unit right?" if fits else ""


def _shown(canonical: float, unit: UnitOfMeasure, display: Display) -> str:
    text = f"{float(unit.from_canonical(canonical)):.4g}"
    return text.replace(".", ",") if display.decimal_comma else text


# --- the slip's other inputs ---


def check_codes(slip: Slip) -> None:
    """Choices that are not of their list."""
    lists: tuple[tuple[str, str, type[IntEnum], str], ...] = (
        ("site", slip.site, Site, "sampling site"),
        ("device", slip.device, Device, "device"),
        ("flow_method", slip.flow_method, FlowMethod, "method"),
    )
    for field, text, kind, name in lists:
        if text and text not in {str(c.value) for c in kind}:
            _say(
                slip, Level.IMPOSSIBLE, field, "unknown_choice", f"'{text[:40]}' is no {name} of the list; choose one."
            )


def check_texts(slip: Slip, *, may_be_empty: bool = False) -> None:
    """Texts too long, and a slip with nothing on it."""
    if len(slip.sample) > 64:
        _say(
            slip,
            Level.IMPOSSIBLE,
            "sample",
            "too_long",
            f"The sample number has {len(slip.sample)} characters; at most 64.",
        )
    if len(slip.note) > NOTE_LONGEST:
        words = f"The note has {len(slip.note)} characters; at most {NOTE_LONGEST}."
        _say(slip, Level.IMPOSSIBLE, "note", "too_long", words)
    if slip.empty and not slip.note.strip() and not may_be_empty:
        _say(slip, Level.IMPOSSIBLE, "", "empty", "Nothing is typed yet: an entry needs at least one value or a note.")


def check_time(slip: Slip, stay: Stay, now: datetime) -> None:
    """A time that cannot be, and one outside the stay."""
    moment, about = slip.moment, f"{slip.date} {slip.clock} {slip.fold}"
    if moment.at is None:
        _say(slip, Level.IMPOSSIBLE, moment.field, "time", moment.problem)
        return
    zone = stay.unit.zone
    if stay.admitted_at and moment.at < stay.admitted_at - timedelta(minutes=1):
        words = f"The time is before the admission ({stay.admitted_at.astimezone(zone):%Y-%m-%d %H:%M})."
        _say(slip, Level.UNLIKELY, "clock", "before_admission", words, about)
    if stay.discharged_at and moment.at > stay.discharged_at:
        words = f"The time is after the end of the stay ({stay.discharged_at.astimezone(zone):%Y-%m-%d %H:%M})."
        _say(slip, Level.UNLIKELY, "clock", "after_discharge", words, about)
    if slip.opened == f"{slip.date} {slip.clock}" and now - moment.at > STALE_CLOCK:
        ago = age_words((now - moment.at).total_seconds() / 3600)
        words = f"The time is still {slip.clock}, when this form was opened {ago} ago. "
        _say(slip, Level.UNLIKELY, "clock", "clock_of_opening", words + "Is it the time of the sample?", about)
    if now - moment.at > LONG_AGO:
        words = f"The time is {age_words((now - moment.at).total_seconds() / 3600)} ago."
        _say(slip, Level.NOTE, "clock", "long_ago", words)


def _site(slip: Slip) -> None:
    blood = [f.quantity.symbol for n, f in slip.fields.items() if n in SAMPLE_ONLY and f.value is not None]
    gas = [
        f.quantity.symbol
        for n, f in slip.fields.items()
        if n in {"ph", "pco2", "po2", "so2", "o2hb"} and f.value is not None
    ]
    if gas and slip.site in {"", "0"}:
        words = f"Say where the sample with {', '.join(gas)} was drawn: arterial or venous is never assumed."
        _say(slip, Level.IMPOSSIBLE, "site", "no_site", words)
    elif slip.site not in {"", "0"} and not blood and not slip.empty:
        _say(
            slip,
            Level.UNLIKELY,
            "site",
            "site_without_sample",
            "A sampling site is chosen, but no value of a sample is typed.",
            slip.site,
        )


def _twice(slip: Slip, user: User, stay: Stay, display: Display, replacing: Entry | None) -> None:
    """The same sample typed by two people, or sent by the analyser and typed: asked, with what is there."""
    if slip.moment.at is None or not slip.code(Site, slip.site):
        return
    entries = others(user, stay, slip.key, replacing).filter(site=slip.code(Site, slip.site))
    near = entries.filter(
        time__gt=slip.moment.at - timedelta(minutes=2), time__lt=slip.moment.at + timedelta(minutes=2)
    )
    found = near.select_related("recorded_by").order_by("time").first()
    if found is None and slip.sample.strip():
        found = entries.filter(sample=slip.sample.strip()).select_related("recorded_by").first()
    if found is not None:
        gas = ", ".join(
            display.value(n, getattr(found, n), with_unit=True) for n in ("po2", "hb") if getattr(found, n) is not None
        )
        words = (
            f"A sample of this site from {found.time.astimezone(stay.unit.zone):%H:%M} is recorded already by "
            f"{found.recorded_by.get_username()}{f' ({gas})' if gas else ''}. Is this another sample?"
        )
        _say(slip, Level.UNLIKELY, "clock", "same_sample", words, str(found.pk))


# --- what is offered, and what follows ---


def _offer_estimate(slip: Slip) -> None:
    """FiO2 of a low-flow device is offered and marked as an estimate; it is never filled in by itself."""
    fio2, offered = slip.fields["fio2"], estimate(slip)
    if offered is None or fio2.text.strip():
        return
    if slip.use_estimate:
        fio2.value, fio2.estimated = offered[0], offered[1]
        words = f"FiO2 {100 * offered[0]:.0f} % is recorded as an estimate ({offered[1]})."
        fio2.notices.append(Notice(Level.NOTE, "fio2", "fio2_estimated", words))


def estimate(slip: Slip) -> tuple[float, str] | None:
    """FiO2 that the device suggests, and on what it rests: 20 % + 4 % per L/min by cannula (common practice)."""
    device, flow = slip.code(Device, slip.device), slip.fields["oxygen_flow"].value
    if device == Device.ROOM_AIR:
        return 0.21, "room air"
    if device == Device.NASAL_CANNULA and flow is not None and 0 < flow <= CANNULA_TOP:
        return round(0.20 + 0.04 * flow, 3), f"nasal cannula at {flow:g} L/min: 20 % + 4 % per L/min"
    return None


def _derived(slip: Slip, user: User, stay: Stay, display: Display, replacing: Entry | None) -> Trial | None:
    if slip.moment.at is None or not slip.values:
        return None
    trial = try_out(user, stay, slip.new_entry(), replacing)
    for found in trial.findings(display):
        if not found.code.endswith(SAID_ALREADY) and not _asked(slip, found.code):
            level = Level.NOTE if found.code in TELLS else LEVELS[found.severity]
            _say(
                slip, level, PLACES.get(found.code, ""), found.code, f"{found.sentence} {found.settle}", found.sentence
            )
    return trial


def _asked(slip: Slip, code: str) -> bool:
    """Whether the same slip of the key is asked about already: one mistake, one question."""
    same_sample = any(n.code == "same_sample" for n in slip.notices)
    doubted = [n for n in FROM_WRONG.get(code, ()) if any(m.level > Level.NOTE for m in slip.fields[n].notices)]
    return (code == "duplicate-sample" and same_sample) or bool(doubted)
