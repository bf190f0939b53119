"""Ticks and ranges: round numbers for values, wall-clock times (or hours from admission) for time."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from typing import Protocol

from worksheet.ward.display import Display

from .description import Axis, Clock, Tick

_STEPS_H = (0.25, 0.5, 1, 2, 3, 4, 6, 12, 24, 48, 96, 168, 336)


class TimeScale(Protocol):
    """How moments [h since the epoch] are told on an axis."""

    @property
    def clock(self) -> Clock:
        """What the page needs to tell time when somebody zooms."""

    @property
    def title(self) -> str:
        """Axis title."""

    def ticks(self, low: float, high: float, most: int) -> tuple[Tick, ...]:
        """Round times in a span."""

    def text(self, moment: float) -> str:
        """One moment in full."""

    def brief(self, moment: float) -> str:
        """One moment, short, for a tick."""


@dataclass(frozen=True)
class WallClock:
    """Local time of the reader. The axis runs in true hours, so a night with a clock change keeps its length."""

    display: Display

    @property
    def clock(self) -> Clock:
        """The zone."""
        return Clock(self.display.zone.key)

    @property
    def title(self) -> str:
        """Names the zone."""
        return f"Time ({self.display.zone.key})"

    def ticks(self, low: float, high: float, most: int = 9) -> tuple[Tick, ...]:
        """Whole local hours; midnight carries the date."""
        step = _time_step(high - low, most)
        return tuple((moment, self._tick_text(moment, step)) for moment in self._round_times(low, high, step))

    def _round_times(self, low: float, high: float, step: float) -> Iterable[float]:
        start = self.display.local(low).replace(tzinfo=None, hour=0, minute=0, second=0, microsecond=0)
        if step > 24:  # whole days counted from a fixed day, so that ticks stay when the window moves
            start -= timedelta(days=start.toordinal() % round(step / 24))
        for n in range(int((high - low + 50) / step) + 400):
            wall = start + timedelta(hours=n * step)
            moment = wall.replace(tzinfo=self.display.zone).astimezone(UTC)
            if moment.timestamp() / 3600 > high:
                return
            exists = moment.astimezone(self.display.zone).replace(tzinfo=None) == wall
            if exists and moment.timestamp() / 3600 >= low:
                yield moment.timestamp() / 3600

    def _tick_text(self, moment: float, step: float) -> str:
        local = self.display.local(moment)
        if step >= 24:
            return f"{local:%d %b}"
        return f"{local:%d %b}" if (local.hour, local.minute) == (0, 0) else f"{local:%H:%M}"

    def text(self, moment: float) -> str:
        """Date, clock and zone."""
        return self.display.stamp(moment)

    def brief(self, moment: float) -> str:
        """Day and clock."""
        return f"{self.display.local(moment):%d %b %H:%M}"


@dataclass(frozen=True)
class Elapsed:
    """Hours from admission: says when without saying the date."""

    origin: float
    display: Display

    @property
    def clock(self) -> Clock:
        """No zone."""
        return Clock("", self.origin)

    @property
    def title(self) -> str:
        """Names the origin."""
        return "Time from admission (h)"

    def ticks(self, low: float, high: float, most: int = 9) -> tuple[Tick, ...]:
        """Whole hours."""
        step = _time_step(high - low, most)
        first = math.ceil((low - self.origin) / step - 1e-9)
        last = math.floor((high - self.origin) / step + 1e-9)
        decimals = 0 if step >= 1 else 2
        return tuple((self.origin + n * step, self.display.number(n * step, decimals)) for n in range(first, last + 1))

    def text(self, moment: float) -> str:
        """Hours with a sign and unit."""
        return f"{self.display.number(moment - self.origin, 1)} h"

    def brief(self, moment: float) -> str:
        """Hours with unit."""
        return self.text(moment)


def _time_step(span: float, most: int) -> float:
    return next((step for step in _STEPS_H if span / step <= most), 672.0)


def hours(moment: datetime) -> float:
    """Hours since the epoch."""
    return moment.timestamp() / 3600.0


def round_step(span: float, most: int) -> float:
    """The smallest of 1, 2, 5 × 10ⁿ that cuts a span into at most so many parts."""
    raw = max(span, 1e-12) / most
    power = 10.0 ** math.floor(math.log10(raw))
    return next(m * power for m in (1, 2, 5, 10) if m * power >= raw * (1 - 1e-9))


def value_axis(
    key: str,
    title: str,
    values: Iterable[float],
    display: Display,
    *,
    decimals: int = 0,
    floor: float | None = None,
    ceiling: float | None = None,
    least: float = 0.0,
    most: int = 5,
    domain: tuple[float, float] = (0.0, 1.0),
    empty: str = "",
    room: bool = True,
) -> Axis:
    """An axis around values, at round numbers; never narrower than ``least`` so that noise does not fill a panel."""
    finite = [v for v in values if math.isfinite(v)]
    low, high = (min(finite), max(finite)) if finite else (0.0, max(least, 1.0))
    if high - low < least:
        middle = (low + high) / 2
        low, high = middle - least / 2, middle + least / 2
    pad = 0.06 * (high - low) or 0.5
    low, high = low - pad, high + pad
    if floor is not None:
        low = max(low, floor)
    if ceiling is not None:
        high = min(high, ceiling)
    step = round_step(high - low, most)
    first, last = math.floor(low / step + 1e-9), math.ceil(high / step - 1e-9)
    places = max(0, -math.floor(math.log10(step) + 1e-9))
    ticks = tuple((round(n * step, 9), display.number(n * step, places)) for n in range(first, last + 1))
    low, high = round(first * step, 9), round(last * step, 9)
    if room and ceiling is not None and high >= ceiling:
        high += 0.05 * (high - low)  # room for a marker on the ceiling itself
    return Axis(key, title, low, high, ticks, decimals, domain, empty)


def time_axis(low: float, high: float, scale: TimeScale, most: int = 9) -> Axis:
    """An axis of time with a little room at both ends."""
    if high - low < 1.0:
        low, high = low - 0.5, high + 0.5
    pad = 0.02 * (high - low)
    low, high = low - pad, high + pad
    return Axis("time", scale.title, low, high, scale.ticks(low, high, most))
