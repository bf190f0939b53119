"""Numbers as words of the pages: only the digits that their uncertainty supports."""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import datetime

from worksheet.oxygen.readings import Site
from worksheet.oxygen.trend import LactateTrend
from worksheet.ward.display import MISSING, Display, age_words

SLOW = 48.0  # h; a half-time longer than that is said without a number
Z95 = 1.959964  # two-sided 95 % of the normal distribution
SITE_WORDS = {
    Site.NONE: "bedside",
    Site.ARTERIAL: "arterial",
    Site.MIXED_VENOUS: "mixed venous",
    Site.CENTRAL_VENOUS: "central venous",
    Site.VENOUS: "peripheral venous",
}


def plus_minus(
    display: Display, name: str, value: float, sd: float, *, signed: bool = False, unit: bool = False
) -> str:
    """A value with its 95 % half-width, both with the digits that the half-width supports."""
    if not math.isfinite(value):
        return MISSING
    shown = display.unit(name)
    number = value / shown.factor if signed else float(shown.from_canonical(value))
    half = Z95 * sd / shown.factor
    tail = f" {shown.label}".rstrip() if unit else ""
    if not math.isfinite(half) or half <= 0:
        return display.value(name, value, signed=signed).replace("±", "") + tail
    decimals = supported(half, display.decimals(name))
    # the value as everywhere else on the page; only its half width in two figures
    return f"{rounded(display, number, max(0, decimals), signed)} ± {rounded(display, half, decimals)}{tail}"


def supported(half: float, most: int) -> int:
    """Decimals that an uncertainty supports: two figures of it, never more than ``most``; negative rounds to tens."""
    return min(most, 1 - math.floor(math.log10(half))) if half > 0 else most


def rounded(display: Display, number: float, decimals: int, signed: bool = False) -> str:
    """A number with that many decimals, or rounded to tens and hundreds where they are negative."""
    return display.number(round(number, decimals), max(0, decimals), signed).replace("±", "")


def percent(display: Display, share: float, signed: bool = True) -> str:
    """A share as whole percent."""
    return f"{display.number(100 * share, 0, signed).replace('±', '')} %" if math.isfinite(share) else MISSING


def hours(display: Display, value: float) -> str:
    """Hours with one decimal below ten."""
    return display.number(value, 0 if value >= 10 else 1)


def lactate_course(trend: LactateTrend, display: Display) -> str:
    """The course of lactate in a few words; empty where there is none."""
    if trend.kind in ("falling", "rising"):
        if trend.time > SLOW:
            return f"{trend.kind} slowly"
        verb = "halving" if trend.kind == "falling" else "doubling"
        low = hours(display, trend.time_low)
        if trend.time_high > 2 * SLOW:
            return f"{verb} in {hours(display, trend.time)} h (at least {low})"
        return f"{verb} in {hours(display, trend.time)} h ({low}–{hours(display, trend.time_high)})"
    if trend.kind == "change":
        beyond = "beyond noise" if trend.beyond_noise else "within noise"
        return f"{percent(display, -trend.decrease)} in {age_words(trend.hours)}, {beyond}"
    if trend.kind == "normal":
        return "below 2" if trend.n > 1 else ""
    if trend.kind == "unclear":
        return "no clear course"
    return "" if trend.reason in ("no lactate", "a single lactate") else f"no course: {trend.reason}"


@dataclass(frozen=True)
class Telling:
    """How sentences of the engine say numbers and times here: no sign before zero, the day where it is another one."""

    display: Display
    until: datetime

    def value(self, name: str, canonical: float | None, signed: bool = False, with_unit: bool = False) -> str:
        """A value in the reader's unit."""
        return self.display.value(name, canonical, signed, with_unit).replace("±", "")

    def number(self, value: float, decimals: int, signed: bool = False) -> str:
        """A number with the reader's decimal sign."""
        return self.display.number(value, decimals, signed).replace("±", "")

    def clock(self, moment: float) -> str:
        """A time of day."""
        when = self.display.local(moment)
        same = when.date() == self.display.local(self.until).date()
        return f"{when:%H:%M}" if same else f"{when:%d %b %H:%M}"
