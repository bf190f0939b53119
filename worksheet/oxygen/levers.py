"""What each step, alone, would have to be to reach a target, and what a usual small move of each would return.

It computes and orders nothing: local protocols and the people at the bedside decide.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq

from .constants import Constants
from .curve import saturation
from .factors import RowFactors, row_factors
from .readings import Derived, Snapshots
from .speech import PLAIN, Speech

TARGET_EXTRACTION = 0.30  # upper end of the usual range at rest, common practice
HB_LIMIT = 16.0  # g/dL, upper normal; common practice
INDEX_LIMIT = 8.0  # L/min/m², about what an adult heart gives at most in sepsis; common practice
G_PER_UNIT, UNIT_WEIGHT = 1.0, 70.0  # one red-cell unit raises Hb by about 1 g/dL in a 70 kg adult, common practice
_LOWEST_PO2, HIGHEST_PO2 = 1.0, 700.0  # mmHg
COHB_RAISED = 0.10  # more than smoking explains; common practice

_TOO_MUCH_OXYGEN = (
    "More inspired oxygen than needed does harm; a PaO2 above normal adds little content.",
    "Chu 2018 (IOTA), Lancet 391:1693",
)
OXYGEN_AGAINST_CO = (
    "Carbon monoxide: oxygen breathed drives it out, faster at a higher PaO2; on 100 % its half-life is about 75 min "
    "(SD 25), on air about 5 h. The rule against more oxygen than needed does not hold while COHb is raised.",
    "Weaver 2000, Chest 117:801; on air Peterson & Stewart 1970, Arch Environ Health 21:165 (from memory)",
)
CAUTIONS: tuple[tuple[str, str], ...] = (
    (
        "Restrictive transfusion: for most stable adults in hospital a threshold of 7 g/dL, 7.5 in cardiac surgery, "
        "8 in orthopaedic surgery or known heart disease.",
        "Carson 2023, AABB guideline, JAMA 330:1892",
    ),
    _TOO_MUCH_OXYGEN,
    ("Bleeding, flow and demand (fever, shivering, pain, work of breathing) come first.", "common practice"),
    ("Local protocols and licensed practice decide; this is arithmetic, not an order.", "common practice"),
)


@dataclass(frozen=True)
class Lever:
    """One step alone.

    Attributes
    ----------
    step : str
        ``haemoglobin``, ``lung``, ``function`` or ``flow``.
    quantity : str
        What is moved: ``hb``, ``po2``, ``inactive``, ``cardiac_index`` or ``cardiac_output``.
    now, needed : float
        Its value now, and for the target; NaN where not known, or where even the limit is not enough [canonical unit].
    reachable : bool
        Whether the step alone can reach the target inside its limit.
    at_limit : float
        Supply with the step at its limit [unit of the target].
    words : str
        What would be needed, or that it cannot.
    small_step : str
        A usual small move.
    gain : float
        What it would return [unit of the target].
    """

    step: str
    quantity: str
    now: float
    needed: float
    reachable: bool
    at_limit: float
    words: str
    small_step: str
    gain: float


@dataclass(frozen=True)
class Levers:
    """All levers of one snapshot.

    Attributes
    ----------
    name : str
        What is counted: ``do2i``, ``do2`` or ``cao2``.
    now, target : float
        Supply now and wanted [unit of ``name``].
    why : str
        Where the target comes from.
    levers : tuple of Lever
        One for each step that is known.
    cautions : tuple of (str, str)
        Caution and its source.
    """

    name: str
    now: float
    target: float
    why: str
    levers: tuple[Lever, ...]
    cautions: tuple[tuple[str, str], ...] = CAUTIONS

    @property
    def reached(self) -> bool:
        """Whether supply is at the target already."""
        return self.now >= self.target


@dataclass(frozen=True)
class _Point:
    """The snapshot as the equations see it."""

    name: str
    flow: float
    hb: float
    active: float
    saturation: float
    po2: float
    weight: float
    row: int
    rows: RowFactors
    constants: Constants

    def supply(self, **moved: float) -> float:
        one = {"flow": self.flow, "hb": self.hb, "active": self.active, "saturation": self.saturation, "po2": self.po2}
        one |= moved
        bound = self.constants.hufner * one["hb"] * one["active"] * one["saturation"]
        return 10.0 * one["flow"] * (bound + self.constants.o2_solubility * one["po2"])

    def saturation_at(self, po2: float) -> float:
        """Saturation at another PO2: the curve plus what this sample's measured value differs from it."""
        i, rows = self.row, self.rows
        at = [
            float(saturation(p, rows.ph[i], rows.pco2[i], 37.0, rows.cohb[i], rows.methb[i], self.constants))
            for p in (po2, self.po2)
        ]
        # the difference fades as the curve fills up
        rest = (self.saturation - at[1]) * (1.0 - at[0]) / max(1.0 - at[1], 1e-9)
        return float(np.clip(at[0] + rest, 0.0, 1.0))


def levers(
    snapshots: Snapshots,
    derived: Derived,
    row: int,
    constants: Constants,
    target: float | None = None,
    start_row: int | None = None,
    speech: Speech = PLAIN,
) -> Levers | None:
    """What each step alone would have to be, and what a small move of each would return.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    row : int
        The snapshot [row number].
    constants : Constants
        Constants in force.
    target : float, optional
        Wanted supply [unit of DO2I, DO2 or CaO2, the fullest known]; by default that at ``start_row``, else the one
        that brings O2ER to 30 % at this VO2.
    start_row : int, optional
        Start of the window [row number].
    speech : Speech
        How numbers are said.

    Returns
    -------
    Levers or None
        None where supply is not known, or no target can be had.
    """
    name = next((n for n in ("do2i", "do2", "cao2") if np.isfinite(derived[n][row])), None)
    if name is None:
        return None
    wanted, why = _target(derived, name, row, target, start_row)
    if not np.isfinite(wanted):
        return None
    point = _point(snapshots, derived, row, name, constants)
    makers = (_haemoglobin, _lung, _function, *(() if name == "cao2" else (_flow,)))
    made = tuple(make(point, wanted, speech) for make in makers)
    cautions = cautions_for(float(snapshots["cohb"][row]))
    return Levers(name, point.supply(), wanted, why, tuple(one for one in made if one is not None), cautions)


def cautions_for(cohb: float) -> tuple[tuple[str, str], ...]:
    """What to bear in mind: with much COHb the caution on inspired oxygen gives way to its use.

    Parameters
    ----------
    cohb : float
        Carboxyhaemoglobin, share of total, NaN where not known [0-1].

    Returns
    -------
    tuple of (str, str)
        Caution and its source [words].
    """
    if not cohb >= COHB_RAISED:
        return CAUTIONS
    return tuple(OXYGEN_AGAINST_CO if one is _TOO_MUCH_OXYGEN else one for one in CAUTIONS)


def _target(derived: Derived, name: str, row: int, target: float | None, start_row: int | None) -> tuple[float, str]:
    if target is not None:
        return target, "chosen"
    if start_row is not None and start_row >= 0 and np.isfinite(derived[name][start_row]):
        return float(derived[name][start_row]), "as at the start of the window"
    return extraction_target(derived, row, name), "extraction of 30 % at this consumption"


def extraction_target(derived: Derived, row: int, name: str, extraction: float = TARGET_EXTRACTION) -> float:
    """Supply that brings extraction down to a given ratio, consumption unchanged.

    Parameters
    ----------
    derived : Derived
        What follows from the rows.
    row : int
        Which row [row number].
    name : str
        ``do2i`` or ``do2``; for ``cao2`` the content difference stands in for consumption.
    extraction : float
        Wanted ratio [0-1].

    Returns
    -------
    float
        Supply [unit of ``name``], NaN where consumption is not known.
    """
    used = {"do2i": "vo2i", "do2": "vo2", "cao2": "avdo2"}[name]
    return float(derived[used][row]) / extraction


def _point(snapshots: Snapshots, derived: Derived, row: int, name: str, constants: Constants) -> _Point:
    rows = row_factors(snapshots, derived)
    flow = {"do2i": rows.index[row], "do2": rows.output[row], "cao2": 0.1}[name]
    po2 = float(np.nan_to_num(rows.po2[row]))
    weight = float(snapshots["weight"][row])
    return _Point(
        name, float(flow), float(rows.hb[row]), float(rows.active[row]), float(rows.saturation[row]), po2,
        weight if np.isfinite(weight) else UNIT_WEIGHT, row, rows, constants,
    )  # fmt: skip


def _haemoglobin(point: _Point, target: float, speech: Speech) -> Lever:
    free = point.supply(hb=0.0)
    per_gram = point.supply(hb=1.0) - free
    needed, limit = _ratio(target - free, per_gram), point.supply(hb=HB_LIMIT)
    gain = per_gram * G_PER_UNIT * UNIT_WEIGHT / point.weight
    units = (needed - point.hb) * point.weight / UNIT_WEIGHT / G_PER_UNIT
    ok = needed <= HB_LIMIT
    about = f", about {units:.0f} red-cell unit{'s' if round(units) != 1 else ''}" if 0.5 <= units < np.inf else ""
    words = f"haemoglobin {speech.value('hb', needed, with_unit=True)}{about}" if needed > point.hb else "enough"
    if not ok:
        words = _cannot(point, f"a haemoglobin of {speech.value('hb', HB_LIMIT, with_unit=True)}", limit, speech)
    return Lever("haemoglobin", "hb", point.hb, needed if ok else np.nan, ok, limit, words, "one red-cell unit", gain)


def _lung(point: _Point, target: float, speech: Speech) -> Lever | None:
    if point.po2 <= 0.0 or np.isnan(point.rows.ph[point.row] + point.rows.pco2[point.row]):
        return None

    def supply(po2: float) -> float:
        return point.supply(saturation=point.saturation_at(po2), po2=po2)

    if not np.isfinite(point.saturation_at(point.po2)):
        return None
    full = point.supply(saturation=1.0, po2=max(point.po2, 100.0))
    # past full saturation only dissolved oxygen is left, and that is no lever: the limit is saturation
    ok = target <= max(full, point.supply())
    needed = np.nan
    if ok:
        low, high = supply(_LOWEST_PO2), supply(HIGHEST_PO2)
        inside = min(max(target, low), high)
        needed = float(brentq(lambda po2: supply(po2) - inside, _LOWEST_PO2, HIGHEST_PO2))
        at = point.saturation_at(needed)
        words = f"PaO2 {speech.value('po2', needed, with_unit=True)} (saturation {100.0 * at:.0f} %)"
        words = "enough" if target <= point.supply() else words
    else:
        words = _cannot(point, "100 % saturation", full, speech)
    gain = supply(point.po2 + 10.0) - supply(point.po2)
    step = f"PaO2 {speech.value('po2', 10.0, signed=True, with_unit=True)}"
    return Lever("lung", "po2", point.po2, needed, ok, full, words, step, gain)


def _function(point: _Point, target: float, speech: Speech) -> Lever:
    free = point.supply(active=0.0)
    per_share = point.supply(active=1.0) - free
    needed, limit = 1.0 - _ratio(target - free, per_share), point.supply(active=1.0)
    known, now = bool(point.rows.dys_known[point.row]), 1.0 - point.active
    ok = needed >= 0.0
    gain = per_share * min(0.05, now)
    words = "enough" if needed >= now else f"COHb and MetHb together at most {100.0 * max(needed, 0.0):.0f} %"
    if not ok:
        words = _cannot(point, "no COHb or MetHb at all", limit, speech)
    words += "" if known else " (not measured: usual share assumed)"
    step = "COHb and MetHb 5 points less" if now >= 0.05 else "COHb and MetHb cleared"
    return Lever("function", "inactive", now, needed if ok else np.nan, ok, limit, words, step, gain)


def _flow(point: _Point, target: float, speech: Speech) -> Lever:
    quantity = "cardiac_index" if point.name == "do2i" else "cardiac_output"
    per_litre = point.supply(flow=1.0)
    needed = _ratio(target, per_litre)
    highest = INDEX_LIMIT if point.name == "do2i" else 2.0 * INDEX_LIMIT
    ok, limit, step = needed <= highest, per_litre * highest, 0.1 * point.flow
    words = "enough" if needed <= point.flow else speech.value(quantity, needed, with_unit=True)
    words = words if ok else _cannot(point, speech.value(quantity, highest, with_unit=True), limit, speech)
    small = f"flow {speech.value(quantity, step, signed=True, with_unit=True)} (10 %)"
    return Lever("flow", quantity, point.flow, needed if ok else np.nan, ok, limit, words, small, per_litre * step)


def _ratio(wanted: float, gives: float) -> float:
    """How much is needed where each unit gives so much; endless where it gives nothing."""
    return wanted / gives if gives > 0.0 else np.inf


def _cannot(point: _Point, limit: str, gives: float, speech: Speech) -> str:
    return f"cannot: even {limit} gives {speech.value(point.name, gives, with_unit=True)}"
