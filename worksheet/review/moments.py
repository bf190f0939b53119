"""A date and a clock time as people type them: never in the future, never in an hour that does not exist."""

from __future__ import annotations

import re
from dataclasses import dataclass
from datetime import UTC, date, datetime, time, timedelta
from zoneinfo import ZoneInfo

AHEAD = timedelta(minutes=10)  # bedside clocks run ahead a little (common practice)
_DATE = re.compile(r"(\d{4})[-./](\d{1,2})[-./](\d{1,2})", re.ASCII)
_CLOCK = re.compile(r"(\d{1,2})(?:[:.hH]?(\d{2}))(?:[:.](\d{2}))?(?:\s*([abAB]))?", re.ASCII)
EARLIEST = date(1990, 1, 1)


@dataclass(frozen=True)
class Moment:
    """What the two texts say: a moment in UTC, or the field that is wrong and why.

    ``choices`` holds the two passes of an hour that comes twice (offset words, ISO offset) when one must be chosen.
    """

    at: datetime | None = None
    field: str = ""
    problem: str = ""
    choices: tuple[tuple[str, str], ...] = ()
    ambiguous: bool = False


def parse_date(text: str) -> date | None:
    """A date written year first, or None."""
    match = _DATE.fullmatch(text.strip())
    try:
        return date(*(int(part) for part in match.groups())) if match else None
    except ValueError:
        return None


def parse_clock(text: str) -> time | None:
    """A 24 h clock time: 06:35, 6:35, 6.35 or 0635; None if it is none.

    In the hour that comes twice ``02:30 A`` is the first and ``02:30 B`` the second (common practice where summer
    time ends).
    """
    match = _CLOCK.fullmatch(text.strip())
    try:
        return time(int(match.group(1)), int(match.group(2)), int(match.group(3) or 0)) if match else None
    except ValueError:
        return None


def read(date_text: str, clock_text: str, fold: str, zone: ZoneInfo, now: datetime) -> Moment:
    """The moment in UTC; ``fold`` is "0" or "1" where an hour comes twice."""
    day, clock = parse_date(date_text), parse_clock(clock_text)
    if day is None:
        return Moment(field="date", problem=_said(date_text, "date", "write it like 2026-03-29"))
    if clock is None:
        return Moment(field="clock", problem=_said(clock_text, "time of the 24 h clock", "write it like 06:35"))
    if day < EARLIEST:
        return Moment(field="date", problem=f"{day} is before 1990.")
    letter = clock_text.strip()[-1:].upper()
    return _in_zone(datetime.combine(day, clock), {"A": "0", "B": "1"}.get(letter, fold), zone, now)


def letter(moment: datetime) -> str:
    """`` A`` or `` B`` for a local time in an hour that comes twice, else nothing."""
    twice = moment.replace(fold=0).utcoffset() != moment.replace(fold=1).utcoffset()
    return (" B" if moment.fold else " A") if twice else ""


def _said(text: str, what: str, how: str) -> str:
    return f"'{text.strip()[:40]}' is not a {what}; {how}." if text.strip() else f"The {what} is missing; {how}."


def _in_zone(wall: datetime, fold: str, zone: ZoneInfo, now: datetime) -> Moment:
    first, second = wall.replace(tzinfo=zone, fold=0), wall.replace(tzinfo=zone, fold=1)
    doubled = first.utcoffset() != second.utcoffset()
    if doubled and first.astimezone(UTC).astimezone(zone).replace(tzinfo=None) != wall:
        words = f"{wall:%H:%M} does not exist on {wall:%Y-%m-%d} in {zone.key}: the clocks went forward over it."
        return Moment(field="clock", problem=words)
    if not doubled:
        return _not_future(first, zone, now, ())
    choices = (
        ("0", f"the first {wall:%H:%M} ({_offset(first)})"),
        ("1", f"the second {wall:%H:%M} ({_offset(second)})"),
    )
    if fold not in {"0", "1"}:
        words = (
            f"{wall:%H:%M} comes twice on {wall:%Y-%m-%d} in {zone.key}: the clocks went back. Say which one is meant "
            f"({wall:%H:%M} A is the first, {wall:%H:%M} B the second)."
        )
        return Moment(field="fold", problem=words, choices=choices, ambiguous=True)
    return _not_future(second if fold == "1" else first, zone, now, choices)


def _not_future(moment: datetime, zone: ZoneInfo, now: datetime, choices: tuple[tuple[str, str], ...]) -> Moment:
    at, doubled = moment.astimezone(UTC), bool(choices)
    if at <= now + AHEAD:
        return Moment(at, choices=choices, ambiguous=doubled)
    words = f"{moment:%Y-%m-%d %H:%M} is in the future (it is {now.astimezone(zone):%Y-%m-%d %H:%M} in the unit)."
    if moment - timedelta(days=1) <= now:
        words += f" If it was yesterday, write the date {moment - timedelta(days=1):%Y-%m-%d}."
    return Moment(field="clock", problem=words, choices=choices, ambiguous=doubled)


def _offset(moment: datetime) -> str:
    name = moment.tzname() or ""
    digits = f"{moment:%z}"  # +0530
    offset = f"UTC{digits[:3]}:{digits[3:5]}"
    return f"{name}, {offset}" if name and not name.startswith(("+", "-")) else offset
