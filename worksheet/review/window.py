"""The review window: the span that a review looks at, from the address of the page."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from datetime import datetime, timedelta
from urllib.parse import urlencode
from zoneinfo import ZoneInfo

from django.http import QueryDict
from django.utils import timezone

from worksheet.ward.display import Display
from worksheet.ward.models import ReviewMark, Stay, Unit, User

HOURS = (6, 12, 24, 48)
SETTLING = timedelta(hours=3)  # so long after a handover a review still looks back to the one before; working value


@dataclass(frozen=True)
class Window:
    """From ``since`` to ``until`` (now, where it is open). ``kind`` is what the address says."""

    kind: str
    since: datetime
    until: datetime
    words: str
    now: datetime
    problem: str = ""

    @property
    def since_hours(self) -> float:
        """Start [h since the epoch]."""
        return self.since.timestamp() / 3600

    @property
    def until_hours(self) -> float:
        """End [h since the epoch]."""
        return self.until.timestamp() / 3600

    @property
    def query(self) -> str:
        """The query string that brings this window back."""
        if self.kind == "free":
            return urlencode({"window": "free", "from": self.since.isoformat(), "to": self.until.isoformat()})
        return urlencode({"window": self.kind})


def last_handover(unit: Unit, now: datetime) -> datetime:
    """The latest shift start by the unit's own clock (a night with a clock change included).

    In the first hours of a shift it is the handover before, so that the morning round sees the night.
    """
    starts = list(_shift_starts(unit, now))
    past = [start for start in starts if start.timestamp() <= (now - SETTLING).timestamp()]
    return max(past, key=lambda start: start.timestamp()) if past else now - timedelta(hours=12)


def _shift_starts(unit: Unit, now: datetime) -> Iterator[datetime]:
    today = now.astimezone(unit.zone).date()
    for day in (today - timedelta(days=n) for n in range(3)):
        for text in unit.shift_starts:
            hour, _, minute = text.partition(":")
            yield datetime(day.year, day.month, day.day, int(hour), int(minute or 0), tzinfo=unit.zone)


def window_of(query: QueryDict, unit: Unit, user: User, stay: Stay | None = None) -> Window:
    """The window that the address asks for; since handover where it asks for none or for nonsense.

    Shifts start by the unit's clock; times are written and read in the zone that this person sees.
    """
    now, zone = timezone.now(), Display.of(user, unit).zone
    kind = query.get("window", "handover")
    if kind.isdigit() and int(kind) in HOURS:
        return Window(kind, now - timedelta(hours=int(kind)), now, f"last {kind} h", now)
    if kind == "free":
        return _free(query, unit, now, zone)
    if kind == "review" and stay is not None:
        at = _my_review(stay, user)
        if at:
            return Window("review", at, now, f"since my last review, {at.astimezone(zone):%d %b %H:%M}", now)
        return _handover(unit, now, zone, "You have not marked a review of this stay yet: shown since handover.")
    return _handover(unit, now, zone)


def _handover(unit: Unit, now: datetime, zone: ZoneInfo, problem: str = "") -> Window:
    start = last_handover(unit, now)
    return Window("handover", start, now, f"since {start.astimezone(zone):%H:%M} (handover)", now, problem)


def _my_review(stay: Stay, user: User) -> datetime | None:
    if hasattr(stay, "my_review_at"):  # read with the stay, see stays_here
        at: datetime | None = stay.my_review_at
        return at
    mark = ReviewMark.objects.filter(stay=stay, user=user).order_by("-at").first()
    return mark.at if mark else None


def _free(query: QueryDict, unit: Unit, now: datetime, zone: ZoneInfo) -> Window:
    try:
        since, until = (_moment(query.get(name, ""), zone) for name in ("from", "to"))
    except ValueError:
        return _handover(unit, now, zone, "A chosen window needs two times, like 2026-03-01T19:00.")
    if not since < until:
        return _handover(unit, now, zone, "A chosen window must end after it starts.")
    words = f"{since.astimezone(zone):%d %b %H:%M} to {until.astimezone(zone):%d %b %H:%M}"
    return Window("free", since, until, words, now)


def _moment(text: str, zone: ZoneInfo) -> datetime:
    moment = datetime.fromisoformat(text)
    return moment if moment.tzinfo else moment.replace(tzinfo=zone)
