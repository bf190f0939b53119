"""What the rules of findings look at, what they return, and where they are registered."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np

from . import curve
from .constants import Constants
from .domain import quiet
from .line import Line
from .pairs import measured_saturation
from .quantities import CATALOGUE
from .readings import Bools, Derived, Flag, Floats, Ints, Site, Snapshots

Numbers = Mapping[str, tuple[str, Floats]]


class Hit(NamedTuple):
    """Rows of a finding and the numbers for its words: name → (quantity, or "" for a plain number; values)."""

    where: Bools
    numbers: Numbers


@dataclass(frozen=True)
class Case:
    """The rows that rules look at: all of them samples, as columns."""

    snapshots: Snapshots
    derived: Derived
    constants: Constants
    rows: Ints
    line: Line
    now: float | None = None
    _columns: dict[str, Floats] = field(default_factory=dict)

    def own(self, name: str) -> Floats:
        """What was measured on the row itself."""
        return self._column(f"own {name}", lambda: self.snapshots.readings[name][self.rows])

    def known(self, name: str) -> Floats:
        """What was known at the row, carried values included."""
        return self._column(name, lambda: self.snapshots[name][self.rows])

    def result(self, name: str) -> Floats:
        """What was derived for the row."""
        return self._column(f"result {name}", lambda: self.derived[name][self.rows])

    def flagged(self, flag: Flag) -> Bools:
        """Whether the row's numbers rest on this."""
        return np.asarray((self.derived.flags[self.rows] & flag) != 0)

    @property
    def site(self) -> Ints:
        """Site codes."""
        return self.snapshots.readings.site[self.rows].astype(np.int64)

    @property
    def arterial(self) -> Bools:
        """Whether the row is an arterial sample."""
        return np.asarray(self.site == Site.ARTERIAL)

    def so2(self) -> Floats:
        """Functional saturation as measured on the row's own sample."""
        own, known = (self.own("so2"), self.own("o2hb")), (self.known(name) for name in ("cohb", "methb", "sulfhb"))
        return self._column("measured", lambda: measured_saturation(*own, *known))

    def by_curve(self) -> Floats:
        """The curve at the sample's own PO2."""
        return self.result("so2_from_po2")

    def calculated(self) -> Floats:
        """The analyser's calculated saturation, else the curve's."""
        given = self.own("so2_calculated")
        return np.where(np.isnan(given), self.by_curve(), given)

    def co_oximetry(self) -> Bools:
        """Whether COHb and MetHb are known (own or carried)."""
        return np.asarray(~np.isnan(self.known("cohb") + self.known("methb")))

    def curve_at(self, po2: Floats) -> Floats:
        """Saturation at another PO2 of the same sample; a missing pH or PCO2 counts as usual here, to judge units."""
        ph, pco2 = or_usual(self.own("ph"), 7.4), or_usual(self.own("pco2"), 40.0)
        return curve.saturation(po2, ph, np.clip(pco2, 20.0, 80.0), 37.0, 0.0, 0.0, self.constants)

    def _column(self, key: str, make: Callable[[], Floats]) -> Floats:
        if key not in self._columns:
            self._columns[key] = make()
        return self._columns[key]


RULES: dict[str, Callable[[Case], Hit]] = {}
"""Rules that look at one row and what goes with it, by code."""


def rule(code: str) -> Callable[[Callable[[Case], Hit]], Callable[[Case], Hit]]:
    """Register a function as the rule of a kind of finding.

    Parameters
    ----------
    code : str
        Code of the kind [word].

    Returns
    -------
    callable
        Decorator [function].
    """

    def register(function: Callable[[Case], Hit]) -> Callable[[Case], Hit]:
        RULES[code] = quiet(function)
        return RULES[code]

    return register


def or_usual(value: Floats, usual: float) -> Floats:
    """The value, a usual one where it is missing: to judge others by, never to derive from.

    Parameters
    ----------
    value : ndarray
        Values [any unit].
    usual : float
        What is usual [same unit].

    Returns
    -------
    ndarray
        The values without NaN [same unit].
    """
    return np.where(np.isnan(value), usual, value)


def default_sd(name: str, value: Floats) -> Floats:
    """Default standard uncertainty of a quantity.

    Parameters
    ----------
    name : str
        Quantity of the catalogue [name].
    value : ndarray
        Its values [canonical unit].

    Returns
    -------
    ndarray
        1 SD [canonical unit].
    """
    return CATALOGUE[name].default_sd(value)
