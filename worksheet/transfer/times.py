"""Times as people and machines write them, to UTC: no zone is ever assumed, a doubled hour is asked about."""

from __future__ import annotations

import re
from dataclasses import dataclass, field
from datetime import UTC, date, datetime, timedelta
from typing import Literal
from zoneinfo import ZoneInfo

from .cells import shortened

Order = Literal["", "dmy", "mdy", "ymd"]
Fold = Literal["", "earlier", "later"]
FUTURE_SLACK = timedelta(minutes=10)  # clocks of devices run ahead a little
SHIFTED_YEARS = 50  # further ahead than any clock error: dates shifted for de-identification
_EARLIEST = datetime(1990, 1, 1, tzinfo=UTC)
_DATE = re.compile(r"(\d{1,4})\s*[./-]\s*(\d{1,2})\s*[./-]\s*(\d{1,4})", re.ASCII)
_CLOCK = re.compile(
    r"(\d{1,2})\s*[:.h]\s*(\d{2})(?:\s*[:.]\s*(\d{2})(?:[.,]\d{1,6})?)?\s*(am|pm)?\s*(?:Uhr)?", re.ASCII | re.IGNORECASE
)
_ISO = re.compile(r"\d{4}-\d{2}-\d{2}[T ]\d{2}:\d{2}", re.ASCII)
_SERIAL = re.compile(r"\d{5}(?:[.,]\d+)?", re.ASCII)
_HL7 = re.compile(r"(\d{4})(\d{2})(\d{2})(?:(\d{2})(\d{2})(?:(\d{2})(?:\.\d{1,4})?)?)?([+-]\d{4})?", re.ASCII)
_EXCEL_EPOCH = datetime(1899, 12, 30)


@dataclass(frozen=True)
class TimeRules:
    """How the times of one source are read.

    Attributes
    ----------
    zone : ZoneInfo or None
        Zone of times written without one; None refuses them.
    order : str
        Day-month order of dates with dots or slashes; empty accepts only what is unambiguous.
    fold : str
        Which of the two passes of a doubled hour (end of summer time) is meant; empty refuses it.
    now : datetime
        Later times are in the future.
    shifted : bool
        Dates were shifted for de-identification: the future is allowed.
    """

    zone: ZoneInfo | None = None
    order: Order = ""
    fold: Fold = ""
    now: datetime = field(default_factory=lambda: datetime.now(UTC))
    shifted: bool = False


def parse(text: str, rules: TimeRules) -> tuple[datetime | None, str]:
    """The moment in UTC, or why there is none (a sentence without its row)."""
    stripped = text.strip()
    if not stripped:
        return None, "the time is missing"
    try:
        moment = datetime.fromisoformat(stripped)
        if len(stripped) < 11:
            return None, f"the time '{shortened(stripped)}' has no clock time"
    except ValueError:
        found, problem = _written(stripped, rules.order)
        if found is None:
            return None, problem
        moment = found
    return settle(moment, rules, stripped)


def parse_hl7(text: str, rules: TimeRules) -> tuple[datetime | None, str]:
    """A time of HL7 v2 (``YYYYMMDDHHMM[SS[.S…]][±ZZZZ]``) in UTC, or why there is none."""
    match = _HL7.fullmatch(text.strip())
    if match is None or match.group(4) is None:
        return (
            None,
            f"the time '{shortened(text)}' is not a date with a clock time" if text.strip() else "the time is missing",
        )
    year, month, day, hour, minute = (int(match.group(n)) for n in range(1, 6))
    offset = match.group(7)
    try:
        moment = datetime(year, month, day, hour, minute, int(match.group(6) or 0))
        if offset:
            moment = datetime.strptime(f"{moment:%Y%m%d%H%M%S}{offset}", "%Y%m%d%H%M%S%z")
    except ValueError:
        return None, f"the time '{shortened(text)}' does not exist"
    return settle(moment, rules, text.strip())


def settle(moment: datetime, rules: TimeRules, text: str) -> tuple[datetime | None, str]:
    """Give a moment its zone and refuse what cannot be."""
    if moment.tzinfo is None:
        zoned, problem = _in_zone(moment, rules, text)
        if zoned is None:
            return None, problem
        moment = zoned
    try:
        utc = moment.astimezone(UTC)
    except (OverflowError, ValueError):
        return None, f"the time '{shortened(text)}' does not exist"
    if utc > rules.now + FUTURE_SLACK and not rules.shifted:
        return None, f"the time {shortened(text)} is in the future"
    if utc < _EARLIEST:
        return None, f"the time {shortened(text)} is before 1990"
    return utc, ""


def _in_zone(moment: datetime, rules: TimeRules, text: str) -> tuple[datetime | None, str]:
    if rules.zone is None:
        return None, f"the time '{shortened(text)}' has no time zone"
    try:
        earlier = moment.replace(tzinfo=rules.zone, fold=0)
        later = moment.replace(tzinfo=rules.zone, fold=1)
        first, second = earlier.utcoffset(), later.utcoffset()
        exists = earlier.astimezone(UTC).astimezone(rules.zone).replace(tzinfo=None) == moment
    except (OverflowError, ValueError):
        return None, f"the time '{shortened(text)}' does not exist"
    if first == second:
        return earlier, ""
    if not exists:
        return None, f"the time {shortened(text)} does not exist in {rules.zone.key}: the clocks went forward"
    if not rules.fold:
        return (
            None,
            f"the time {shortened(text)} comes twice in {rules.zone.key}: the clocks went back; say which is meant",
        )
    return (earlier if rules.fold == "earlier" else later), ""


def _written(text: str, order: Order) -> tuple[datetime | None, str]:
    """A date as people write it, without zone."""
    if _SERIAL.fullmatch(text):
        return _EXCEL_EPOCH + timedelta(seconds=round(float(text.replace(",", ".")) * 86400)), ""
    if _ISO.match(text):
        return None, f"the time '{shortened(text)}' does not exist"
    match = _DATE.match(text)
    if match is None:
        return None, f"the time '{shortened(text)}' is not a date that can be read"
    rest = text[match.end() :].strip(" ,T")
    clock = _CLOCK.fullmatch(rest)
    if clock is None:
        return (
            None,
            f"the time '{shortened(text)}' has no clock time"
            if not rest
            else f"the time '{shortened(text)}' cannot be read",
        )
    day, problem = _day(match.group(1), match.group(2), match.group(3), order, text)
    if day is None:
        return None, problem
    hour, minute, second = int(clock.group(1)), int(clock.group(2)), int(clock.group(3) or 0)
    half = (clock.group(4) or "").lower()
    if half:
        hour = hour % 12 + (12 if half == "pm" else 0) if 1 <= hour <= 12 else 99
    try:
        return datetime(day.year, day.month, day.day, hour, minute, second), ""
    except ValueError:
        return None, f"the time '{shortened(text)}' does not exist"


def _day(a: str, b: str, c: str, order: Order, text: str) -> tuple[date | None, str]:
    if len(a) == 4:
        parts = (a, b, c)
    elif len(c) == 4 or (order and len(c) == 2):
        year = c if len(c) == 4 else f"20{c}"
        if order == "mdy" or (not order and int(b) > 12):
            parts = (year, a, b)
        elif order in ("dmy", "ymd") or int(a) > 12 or int(a) == int(b):
            parts = (year, b, a)
        else:
            return (
                None,
                f"the date '{shortened(text)}' can be read in two ways; say whether the day or the month comes first",
            )
    else:
        return None, f"the date '{shortened(text)}' has no year of four digits"
    try:
        return date(int(parts[0]), int(parts[1]), int(parts[2])), ""
    except ValueError:
        return None, f"the date '{shortened(text)}' does not exist"


def order_of(texts: list[str]) -> tuple[Order, bool]:
    """Day-month order that a column of dates shows, and whether it is certain."""
    firsts, seconds, dotted = [], [], False
    for text in texts:
        match = _DATE.match(text.strip())
        if match and len(match.group(1)) <= 2:
            firsts.append(int(match.group(1)))
            seconds.append(int(match.group(2)))
            dotted = dotted or "." in match.group(0)
    if not firsts:
        return "", True
    if max(firsts) > 12 >= max(seconds):
        return "dmy", True
    if max(seconds) > 12 >= max(firsts):
        return "mdy", True
    return ("dmy" if dotted else ""), False


def looks_shifted(texts: list[str], now: datetime) -> bool:
    """Whether every date of a file lies so far ahead that it was shifted to protect people (not one slip of a key)."""
    years = [int(t[:4]) for t in texts if t[:4].isdecimal()]
    return len(years) >= 10 and len(years) == len(texts) and min(years) > now.year + SHIFTED_YEARS
