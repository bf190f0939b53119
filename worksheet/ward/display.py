"""How numbers and times are shown to one person in one unit: units, decimals, decimal comma, time zone.

Every page, chart, file for people and PDF formats through a :class:`Display`, so that a choice holds everywhere.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import UTC, datetime
from typing import Any
from zoneinfo import ZoneInfo

from worksheet.oxygen.quantities import CATALOGUE, Quantity, UnitOfMeasure

from .models import Unit, User

MISSING = "–"
MINUS = "−"
# Quantities that are shown in the unit chosen for another one: a page never mixes mmHg and kPa of gas pressures.
_OWN = frozenset({"po2", "mean_arterial_pressure", "cao2"})
FOLLOWERS: Mapping[str, str] = {
    q.name: "po2" if q.unit.ucum == "mm[Hg]" else "cao2"
    for q in CATALOGUE.values()
    if q.name not in _OWN and (q.unit.ucum == "mm[Hg]" or (q.derived and q.unit.ucum == "mL/dL"))
}


@dataclass(frozen=True)
class Display:
    """What one reader chose, over what the unit chose, over the catalogue's edge units."""

    zone: ZoneInfo
    units: Mapping[str, str] = field(default_factory=dict)  # quantity name -> UCUM code
    decimal_comma: bool = False
    theme: str = "system"

    @classmethod
    def of(cls, user: User | None, unit: Unit) -> Display:
        """The reader's choices over the unit's."""
        chosen = _mapping(user.preferences) if user is not None else {}
        comma = chosen.get("decimal_comma")
        return cls(
            zone=_zone(chosen.get("time_zone")) or unit.zone,
            units={**_mapping(unit.units), **_mapping(chosen.get("units"))},
            decimal_comma=comma if isinstance(comma, bool) else unit.decimal_comma,
            theme=str(chosen.get("theme", "system")),
        )

    def unit(self, name: str) -> UnitOfMeasure:
        """The unit in which a quantity is shown."""
        quantity = CATALOGUE[name]
        wanted = self.units.get(name, self.units.get(FOLLOWERS.get(name, "")))
        return next((u for u in quantity.units if u.ucum == wanted), quantity.unit)

    def decimals(self, name: str) -> int:
        """Decimals shown: as many as the catalogue says in the edge unit, adjusted to the size of the shown unit."""
        quantity = CATALOGUE[name]
        ratio = self.unit(name).factor / quantity.unit.factor
        return max(0, quantity.decimals + round(math.log10(ratio)) if ratio > 0 else quantity.decimals)

    def number(self, value: float, decimals: int, signed: bool = False) -> str:
        """A plain number with the reader's decimal sign and a true minus."""
        if value is None or not math.isfinite(value):
            return MISSING
        text = f"{value:{'+' if signed else ''}.{decimals}f}"
        if float(text) == 0:
            text = ("±" if signed else "") + text.lstrip("+-")
        text = text.replace("-", MINUS)
        return text.replace(".", ",") if self.decimal_comma else text

    def value(self, name: str, canonical: float | None, signed: bool = False, with_unit: bool = False) -> str:
        """A value of a quantity, given in its canonical unit, as the reader sees it."""
        if canonical is None or not math.isfinite(canonical):
            return MISSING
        unit = self.unit(name)
        # A difference has no offset (it matters for temperature only).
        shown = canonical / unit.factor if signed else float(unit.from_canonical(canonical))
        text = self.number(shown, self.decimals(name), signed)
        return f"{text} {unit.label}".rstrip() if with_unit else text

    def shown(self, name: str, canonical: float) -> float:
        """A value in the shown unit, as a number (for charts and form fields)."""
        return float(self.unit(name).from_canonical(canonical))

    def heading(self, name: str) -> str:
        """Symbol with unit, for a table heading or an axis title."""
        label = self.unit(name).label
        symbol = CATALOGUE[name].symbol
        return f"{symbol} ({label})" if label else symbol

    def quantity(self, name: str) -> Quantity:
        """The catalogue's entry."""
        return CATALOGUE[name]

    def local(self, moment: datetime | float) -> datetime:
        """A moment (or hours since the epoch) in the reader's time zone."""
        if not isinstance(moment, datetime):
            moment = datetime.fromtimestamp(round(moment * 3600.0, 3), UTC)
        return moment.astimezone(self.zone)

    def clock(self, moment: datetime | float) -> str:
        """24 h clock; the zone abbreviation is added by :meth:`stamp`."""
        return f"{self.local(moment):%H:%M}"

    def stamp(self, moment: datetime | float) -> str:
        """Date, 24 h clock and zone."""
        return f"{self.local(moment):%Y-%m-%d %H:%M %Z}"


def _mapping(stored: Any) -> Mapping[str, Any]:
    """What is stored as JSON, if it has the shape it should have: a page never breaks on a choice."""
    return stored if isinstance(stored, dict) else {}


def _zone(name: Any) -> ZoneInfo | None:
    try:
        return ZoneInfo(name) if isinstance(name, str) and name else None
    except (KeyError, ValueError, OSError):  # a zone that this machine's tables no longer know
        return None


def age_words(hours: float) -> str:
    """An age in words that fit a table: ``25 min``, ``3 h 10``, ``2 d 4 h``."""
    if not math.isfinite(hours):
        return MISSING
    minutes = max(0, round(abs(hours) * 60))
    if minutes < 60:
        return f"{minutes} min"
    whole, rest = divmod(minutes, 60)
    if whole < 48:
        return f"{whole} h {rest:02d}" if rest else f"{whole} h"
    days, left = divmod(whole, 24)
    return f"{days} d {left} h" if left else f"{days} d"
