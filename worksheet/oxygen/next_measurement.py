"""What to measure next: the one fresh measurement that would narrow supply (or extraction) most, and by how much."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .constants import Constants
from .factors import Route, RowFactors, row_factors
from .measurement import DEFAULT, Uncertainties, parts
from .readings import Derived, FlowMethod, Snapshots
from .speech import PLAIN, Speech, age
from .uncertainty import Budget, budget

WORTH_SAYING = 0.10  # share of the variance; less is not worth a needle
REPEAT = "a repeat, averaged with the first"  # the mean of two has 0.71 of the scatter of one
LABELS = {
    "flow": "cardiac output", "hb": "haemoglobin", "co_oximetry": "co-oximetry", "po2": "arterial gas",
    "venous": "venous saturation",
}  # fmt: skip


@dataclass(frozen=True)
class Candidate:
    """A measurement that could be made.

    Attributes
    ----------
    name, label : str
        ``flow``, ``hb``, ``co_oximetry``, ``po2`` or ``venous``, and its words.
    removed : float
        Share of the variance that it would remove [0-1].
    sd_after : float
        Standard uncertainty left [unit of the target].
    reason : str
        Why it is poor now: missing, carried, assumed, calculated, or only repeatable.
    """

    name: str
    label: str
    removed: float
    sd_after: float
    reason: str


@dataclass(frozen=True)
class NextMeasurement:
    """What to measure next for one target.

    Attributes
    ----------
    target : str
        ``do2i``, ``do2``, ``cao2`` or ``o2er``.
    sd : float
        Its standard uncertainty now [canonical unit].
    candidates : tuple of Candidate
        Most telling first.
    words : str
        One sentence; empty where nothing would help much.
    """

    target: str
    sd: float
    candidates: tuple[Candidate, ...]
    words: str

    @property
    def best(self) -> Candidate | None:
        """The most telling one, None where none removes 10 % of the variance."""
        first = self.candidates[0] if self.candidates else None
        return first if first is not None and first.removed >= WORTH_SAYING else None


def next_measurement(
    snapshots: Snapshots,
    derived: Derived,
    row: int,
    constants: Constants,
    settings: Uncertainties = DEFAULT,
    target: str | None = None,
    speech: Speech = PLAIN,
    known: Budget | None = None,
    factors: RowFactors | None = None,
) -> NextMeasurement | None:
    """The one fresh measurement that would remove most of the variance of supply, or of extraction.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    row : int
        Which row [row number].
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Standard uncertainties in force.
    target : str, optional
        ``do2i``, ``do2``, ``cao2`` or ``o2er``; by default the fullest supply that is known.
    speech : Speech
        How numbers are said.
    known : Budget, optional
        Of :func:`~.uncertainty.budget`, so that many rows share one.
    factors : RowFactors, optional
        Of :func:`~.factors.row_factors`, likewise.

    Returns
    -------
    NextMeasurement or None
        None where the target is not known at this row.
    """
    target = target or next((n for n in ("do2i", "do2", "cao2") if np.isfinite(derived[n][row])), "cao2")
    if not derived[target][row] > 0.0:
        return None
    found = known or budget(snapshots, derived, constants, settings)
    variance = {name: float(np.nan_to_num(part[row])) for name, part in found.variance(target).items()}
    whole = sum(variance.values())
    rows = factors or row_factors(snapshots, derived)
    candidates = _candidates(snapshots, rows, row, found, target, variance, settings)
    ranked = sorted(
        (
            Candidate(name, LABELS[name], removed / whole, float(np.sqrt(max(whole - removed, 0.0))), reason)
            for name, removed, reason in candidates
            if whole > 0.0
        ),
        key=lambda one: -one.removed,
    )
    result = NextMeasurement(target, float(np.sqrt(whole)), tuple(ranked), "")
    words = _words(result, derived, row, speech, settings)
    return NextMeasurement(target, result.sd, result.candidates, words)


def _candidates(
    snapshots: Snapshots, rows: RowFactors, row: int, found: Budget, target: str, variance: dict[str, float],
    settings: Uncertainties,
) -> list[tuple[str, float, str]]:  # fmt: skip
    """Name, variance removed and reason of each measurement that the target rests on."""
    result = []
    for name, quantity in (("flow", "cardiac_output"), ("flow", "cardiac_index"), ("hb", "hb"), ("po2", "po2")):
        if variance.get(name, 0.0) > 0.0 and np.isfinite(snapshots[quantity][row]):
            removed, reason = _fresh(snapshots, row, quantity, variance[name], settings)
            result.append((name, removed, reason))
    result.append(_co_oximetry(rows, row, found, target, variance, settings))
    if "so2_venous" in variance:
        result.append(("venous", 0.5 * variance["so2_venous"], REPEAT))
    return [one for i, one in enumerate(result) if one[0] not in {other[0] for other in result[:i]}]


def _fresh(
    snapshots: Snapshots, row: int, quantity: str, variance: float, settings: Uncertainties
) -> tuple[float, str]:
    """Variance that a fresh value by the same method removes; a value that is fresh already can only be averaged."""
    one = parts(snapshots, quantity, settings)
    random, systematic, growth = (float(part[row]) ** 2 for part in one)
    hours = float(snapshots.age[quantity][row])
    now = random + systematic + growth
    if growth > 0.0:
        return variance * growth / now, f"carried, {age(hours)} old" if hours > 0.0 else f"read {age(hours)} later"
    return variance * 0.5 * random / now, REPEAT


def _co_oximetry(
    rows: RowFactors, row: int, found: Budget, target: str, variance: dict[str, float], settings: Uncertainties
) -> tuple[str, float, str]:  # fmt: skip
    """What measured saturation and dyshaemoglobins would remove."""
    calculated = int(rows.route[row]) in (Route.CURVE, Route.FINGER)
    assumed = not bool(rows.dys_known[row])
    removed, reasons = 0.0, []
    if assumed:
        fresh = 2.0 * settings.quantities["cohb"][0] ** 2 / settings.usual_inactive**2
        removed += variance.get("dyshaemoglobins", 0.0) * max(1.0 - fresh, 0.0)
        reasons.append("dyshaemoglobins assumed")
    if calculated:
        by_curve = sum(variance.get(name, 0.0) for name in ("curve", "ph", "pco2"))
        weight = _saturation_weight(found, target, row)
        fresh = (weight * settings.quantities["so2"][0]) ** 2
        removed += max(by_curve + variance.get("po2", 0.0) + variance.get("so2", 0.0) - fresh, 0.0)
        reasons.append("saturation not measured in the sample")
    if not reasons:
        share = settings.random.get("so2", 1.0) ** 2
        return "co_oximetry", 0.5 * share * variance.get("so2", 0.0), REPEAT
    return "co_oximetry", removed, " and ".join(reasons)


def _saturation_weight(found: Budget, target: str, row: int) -> float:
    """Derivative of the target by saturation, from that by haemoglobin's inactive share."""
    return abs(float(np.nan_to_num(found.partials[target]["dyshaemoglobins"][row])))


def _words(found: NextMeasurement, derived: Derived, row: int, speech: Speech, settings: Uncertainties) -> str:
    best, value = found.best, float(derived[found.target][row])
    said = ""
    if best is not None:
        halves = [196.0 * sd / abs(value) for sd in (found.sd, best.sd_after)]
        before, after = (speech.number(half, 0 if halves[0] - halves[1] >= 1.0 else 1) for half in halves)
        said = (
            f"Most telling next: {best.label} ({best.reason}); it would narrow the 95 % interval from ± {before} "
            f"to ± {after} % of its value."
        )
    if found.target == "cao2":
        said = f"{said} {_without_flow(found, value, speech, settings)}".strip()
    return said


def _without_flow(found: NextMeasurement, value: float, speech: Speech, settings: Uncertainties) -> str:
    """What a flow measurement would add where there is none."""
    precision, accuracy = settings.flow.get(int(FlowMethod.THERMODILUTION), settings.flow_other)
    content = found.sd / abs(value)
    half = 196.0 * float(np.sqrt(precision**2 + accuracy**2 + content**2))
    return (
        "Flow is not known: measured by thermodilution it would give delivery to within "
        f"± {speech.number(half, 0)} %, and tell whether flow fell or made up for the rest."
    )
