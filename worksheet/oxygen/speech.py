"""How the engine says numbers and times when nobody else does; pages hand in their own."""

from __future__ import annotations

import math
from datetime import UTC, datetime
from typing import Protocol

from .quantities import CATALOGUE


class Speech(Protocol):
    """What words need: values of quantities and times of day, as one reader sees them."""

    def value(self, name: str, canonical: float | None, signed: bool = False, with_unit: bool = False) -> str:
        """A value of a quantity, given in its canonical unit."""

    def number(self, value: float, decimals: int, signed: bool = False) -> str:
        """A plain number."""

    def clock(self, moment: float) -> str:
        """A time of day [h since the epoch]."""


class Plain:
    """Edge units of the catalogue, decimal point, UTC."""

    def value(self, name: str, canonical: float | None, signed: bool = False, with_unit: bool = False) -> str:
        """A value of a quantity in its edge unit."""
        if canonical is None or not math.isfinite(canonical):
            return "–"
        unit = CATALOGUE[name].unit
        shown = canonical / unit.factor if signed else float(unit.from_canonical(canonical))
        text = self.number(shown, CATALOGUE[name].decimals, signed)
        return f"{text} {unit.label}".rstrip() if with_unit else text

    def number(self, value: float, decimals: int, signed: bool = False) -> str:
        """A plain number with a true minus."""
        if not math.isfinite(value):
            return "–"
        text = f"{value:{'+' if signed else ''}.{decimals}f}"
        return (text.lstrip("+-") if float(text) == 0.0 else text).replace("-", "−")

    def clock(self, moment: float) -> str:
        """A time of day in UTC."""
        return f"{datetime.fromtimestamp(round(moment * 3600.0), UTC):%H:%M}"


PLAIN = Plain()


def age(hours: float) -> str:
    """An age in words.

    Parameters
    ----------
    hours : float
        The age [h].

    Returns
    -------
    str
        ``50 min`` or ``3.5 h``.
    """
    minutes = round(abs(hours) * 60)
    return f"{minutes} min" if minutes < 120 else f"{abs(hours):.1f}".rstrip("0").rstrip(".") + " h"


def joined(parts: list[str]) -> str:
    """A list in a sentence.

    Parameters
    ----------
    parts : list of str
        One or more.

    Returns
    -------
    str
        ``a``, ``a and b``, ``a, b and c``.
    """
    return parts[0] if len(parts) == 1 else f"{', '.join(parts[:-1])} and {parts[-1]}"
