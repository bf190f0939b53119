"""The review window: the span that a review looks at, from the address of the page."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime, timedelta
from urllib.parse import urlencode

from django.http import QueryDict
from django.utils import timezone

from worksheet.ward.models import ReviewMark, Stay, Unit, User

HOURS = (6, 12, 24, 48)


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
    """The latest shift start at or before now, by the unit's own clock (a night with a clock change included)."""
    local = now.astimezone(unit.zone)
    starts = []
    for day in (local.date(), local.date() - timedelta(days=1)):
        for text in unit.shift_starts:
            hour, _, minute = text.partition(":")
            starts.append(datetime(day.year, day.month, day.day, int(hour), int(minute or 0), tzinfo=unit.zone))
    past = [start for start in starts if start.timestamp() <= now.timestamp()]
    return max(past, key=lambda start: start.timestamp()) if past else now - timedelta(hours=12)


def window_of(query: QueryDict, unit: Unit, user: User, stay: Stay | None = None) -> Window:
    """The window that the address asks for; since handover where it asks for none or for nonsense."""
    now = timezone.now()
    kind = query.get("window", "handover")
    if kind.isdigit() and int(kind) in HOURS:
        return Window(kind, now - timedelta(hours=int(kind)), now, f"last {kind} h", now)
    if kind == "free":
        return _free(query, unit, now)
    if kind == "review" and stay is not None:
        mark = ReviewMark.objects.filter(stay=stay, user=user).order_by("-at").first()
        if mark:
            return Window("review", mark.at, now, f"since my review at {mark.at.astimezone(unit.zone):%H:%M}", now)
    start = last_handover(unit, now)
    return Window("handover", start, now, f"since {start.astimezone(unit.zone):%H:%M} (handover)", now)


def _free(query: QueryDict, unit: Unit, now: datetime) -> Window:
    start = last_handover(unit, now)
    try:
        since, until = (_moment(query.get(name, ""), unit) for name in ("from", "to"))
    except ValueError:
        return Window("handover", start, now, f"since {start:%H:%M} (handover)", now,
                      "The free window needs two times, like 2026-03-01T19:00.")  # fmt: skip
    if not since < until:
        return Window("handover", start, now, f"since {start:%H:%M} (handover)", now,
                      "The free window must end after it starts.")  # fmt: skip
    words = f"{since.astimezone(unit.zone):%d %b %H:%M} to {until.astimezone(unit.zone):%d %b %H:%M}"
    return Window("free", since, until, words, now)


def _moment(text: str, unit: Unit) -> datetime:
    moment = datetime.fromisoformat(text)
    return moment if moment.tzinfo else moment.replace(tzinfo=unit.zone)
