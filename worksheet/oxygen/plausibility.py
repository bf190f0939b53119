"""Findings about a set of values: impossible, unlikely, contradictory, with words and with what would settle them.

:func:`without_impossible` comes before ``align``: what cannot be is not carried and not used. :func:`findings` comes
after ``derive`` and looks at whole rows; :func:`check_value` looks at one typed value.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from . import finding_rules, saturation_rules  # noqa: F401 (they register themselves)
from .constants import DEFAULT, Constants
from .domain import quiet
from .finding_case import RULES, Case, Hit
from .finding_kinds import KINDS
from .finding_table import Finding, Findings, gathered, in_words, plain
from .line import Line
from .quantities import CATALOGUE, MEASURED, Quantity
from .readings import Bools, Derived, Floats, Readings, Snapshots

__all__ = ["Finding", "Findings", "check_value", "findings", "gathered", "plain", "without_impossible"]

SATURATIONS = ("so2", "so2_calculated", "o2hb", "spo2")
LIKE_FRACTION = 0.01  # a saturation of 1 % or less: typed as a fraction, or no living blood
Refused = Mapping[str, Floats]


def check_value(quantity: Quantity | str, value: float) -> Finding | None:
    """What is wrong with one value by itself.

    Parameters
    ----------
    quantity : Quantity or str
        Quantity of the catalogue.
    value : float
        Value [canonical unit].

    Returns
    -------
    Finding or None
        The finding that blocks or asks, None if the value is likely (or NaN).
    """
    known = CATALOGUE[quantity] if isinstance(quantity, str) else quantity
    outside, limits = _outside(known, value)
    if not outside:
        return None
    if known.name == "fio2" and outside == "impossible" and _fraction_or_percent(np.asarray(value)):
        return in_words(KINDS["fio2-fraction-or-percent"], {"fio2": ("fio2", value)}, plain)
    kind = KINDS[f"{known.name.replace('_', '-')}-{outside}"]
    low, high = ((known.name, limit) for limit in limits)
    found = in_words(kind, {"value": (known.name, value), "low": low, "high": high}, plain)
    hint = _unit_hint(known, value) if outside == "impossible" else ""
    return replace(found, sentence=found.sentence.replace("; it was not used", ""), settle=hint or found.settle)


def _outside(quantity: Quantity, value: float) -> tuple[str, tuple[float, float]]:
    for name, limits in (("impossible", quantity.impossible), ("unlikely", quantity.unlikely)):
        if value < limits[0] or value > limits[1]:
            return name, limits
    return "", (0.0, 0.0)


def _unit_hint(quantity: Quantity, value: float) -> str:
    """Which other unit of the quantity would make an impossible value likely, in words."""
    typed = float(quantity.unit.from_canonical(value))
    low, high = quantity.unlikely
    for unit in quantity.units[1:]:
        if low <= float(unit.to_canonical(typed)) <= high:
            return f"Was it meant in {unit.label}?"
    return ""


def _fraction_or_percent(fio2: Floats) -> Bools:
    """0.15-1.0 taken as percent, or 15-100 taken as fraction."""
    return np.asarray(((fio2 >= 0.0015) & (fio2 <= 0.01)) | ((fio2 >= 15.0) & (fio2 <= 100.0)))


@quiet
def without_impossible(readings: Readings) -> tuple[Readings, Refused]:
    """The readings less what cannot be, so that it is neither used nor carried, and what was taken out.

    Outside the catalogue's limits; and a saturation of 1 % or less, which looks like a fraction and is never rescaled.

    Parameters
    ----------
    readings : Readings
        As received [canonical units].

    Returns
    -------
    readings : Readings
        The same rows [canonical units].
    refused : mapping of str to ndarray
        The values taken out, by quantity, NaN elsewhere; quantities without one are left out [canonical unit].
    """
    refused: dict[str, Floats] = {}
    values = dict(readings.values)
    for name in MEASURED:
        column = readings[name]
        low, high = CATALOGUE[name].impossible
        out = (column < low) | (column > high)
        if name in SATURATIONS:
            out |= column <= LIKE_FRACTION + 1e-12
        if np.any(out):
            refused[name] = np.where(out, column, np.nan)
            values[name] = np.where(out, np.nan, column)
    return replace(readings, values=values), refused


def findings(
    snapshots: Snapshots,
    derived: Derived,
    constants: Constants = DEFAULT,
    now: float | None = None,
    admitted: Floats | None = None,
    refused: Refused | None = None,
    across_stays: bool = False,
    extra: Mapping[str, Hit] | None = None,
) -> Findings:
    """Everything that is implausible about a table.

    Parameters
    ----------
    snapshots : Snapshots
        From :func:`~worksheet.oxygen.align.align` [canonical units].
    derived : Derived
        From :func:`~worksheet.oxygen.derive.derive` [canonical units].
    constants : Constants
        Constants in force.
    now : float, optional
        Present time; without it no time lies in the future [h since the epoch].
    admitted : ndarray, optional
        Admission of each row's stay, NaN where not known [h since the epoch].
    refused : mapping, optional
        What :func:`without_impossible` took out [canonical units].
    across_stays : bool
        Whether to look for the values of another patient: for one batch that is looked at as a whole.
    extra : mapping of str to Hit, optional
        What the caller saw on the way in, by code [bool].

    Returns
    -------
    Findings
        Rows and numbers by code.
    """
    rows = np.arange(len(snapshots))
    case = Case(snapshots, derived, constants, rows, Line.of(snapshots.readings), now)
    hits = _limits(snapshots.readings, refused or {}) | {code: rule(case) for code, rule in RULES.items()}
    if admitted is not None:
        early = admitted - snapshots.readings.time
        hits["before-admission"] = Hit(early > 0.0, {"hours": ("", early)})
    if across_stays:
        hits["values-of-another-patient"] = Hit(_of_another_patient(snapshots.readings), {})
    return gathered(len(rows), hits | dict(extra or {}))


@quiet
def _limits(readings: Readings, refused: Refused) -> dict[str, Hit]:
    """Values outside what is possible (already taken out) and outside what is likely."""
    hits: dict[str, Hit] = {}
    size = len(readings)
    for name in MEASURED:
        quantity, code = CATALOGUE[name], name.replace("_", "-")
        low, high = quantity.unlikely
        column = readings[name]
        where = (column < low) | (column > high)
        if np.any(where):
            hits[f"{code}-unlikely"] = _limit_hit(name, where, column, (low, high))
    like_fraction = np.full(size, np.nan)
    for name, taken_out in refused.items():
        where = ~np.isnan(taken_out)
        if name in SATURATIONS:
            small = taken_out <= LIKE_FRACTION + 1e-12
            like_fraction, where = np.where(small, taken_out, like_fraction), where & ~small
        if name == "fio2":
            confused = _fraction_or_percent(taken_out)
            hits["fio2-fraction-or-percent"] = Hit(confused, {"fio2": ("fio2", taken_out)})
            where = where & ~confused
        code = f"{name.replace('_', '-')}-impossible"
        hits[code] = _limit_hit(name, where, taken_out, CATALOGUE[name].impossible)
    hits["saturation-like-fraction"] = Hit(~np.isnan(like_fraction), {"saturation": ("so2", like_fraction)})
    return hits


def _limit_hit(name: str, where: Bools, values: Floats, limits: tuple[float, float]) -> Hit:
    low, high = (np.full(len(values), limit) for limit in limits)
    return Hit(where, {"value": (name, values), "low": (name, low), "high": (name, high)})


def _of_another_patient(readings: Readings) -> Bools:
    """Samples with the pH, PCO2, PO2 and one more value of a sample of another stay within a day.

    Equal values of three are chance in a large batch; with a fourth and the time it is not.
    """
    fourth = ("hb", "so2", "o2hb", "lactate", "bicarbonate")
    gas = ~np.isnan(readings["ph"] + readings["pco2"] + readings["po2"])
    gas &= np.any([~np.isnan(readings[name]) for name in fourth], axis=0)
    rows = np.flatnonzero(gas)
    table = np.stack([np.nan_to_num(readings[name][rows], nan=-1.0) for name in ("ph", "pco2", "po2", *fourth)])
    order = np.lexsort((readings.time[rows], *table))
    table, rows = table[:, order], rows[order]
    pair = np.all(table[:, 1:] == table[:, :-1], axis=0) & (readings.stay[rows][1:] != readings.stay[rows][:-1])
    pair &= np.abs(np.diff(readings.time[rows])) <= 24.0
    result = np.zeros(len(readings), dtype=np.bool_)
    result[rows[1:][pair]] = True
    result[rows[:-1][pair]] = True
    return result
