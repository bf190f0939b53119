"""Which step failed: judged step by step for many comparisons at once, with words only at the end.

A step counts when its loss is **real** (the upper limit of its own one-sided 95 % interval lies below zero, Bonferroni-
corrected for the number of steps tested: only losses are looked for) and **material** (at least 5 % of the supply at
the start). Of those the largest loss is named, if it can be told from the next; a certain loss at one step does not
drown in the noise of another.

The residual (measured minus curve) needs care: where it lies inside its own noise it is no loss of function. Then the
two accounts of what the lung did, from PO2 through the curve and from the measured saturation less the shifts, are the
same thing measured twice, and are averaged by their variances. A residual beyond its noise stays with function.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from statistics import NormalDist

import numpy as np
from numpy.typing import NDArray

from .change import Z95
from .constants import Constants
from .domain import Floats, quiet
from .ledger import between, window, window_ends
from .ledger_table import STEPS, Ledger, Level, Note
from .measurement import DEFAULT, Uncertainties
from .readings import Bools, Derived, Flag, Ints, Snapshots
from .trend import NORMAL

MATERIAL = 0.05  # of the supply at the start; common practice
ALPHA = 0.05  # one-sided, before the correction for the number of steps
ORDERED = 1.6448536269514722  # one-sided 95 %: the larger of two losses
# One-sided limits by the number of steps tested; 0 tested counts as 1
_CRITICAL = np.array([-NormalDist().inv_cdf(ALPHA / max(tested, 1)) for tested in range(len(STEPS) + 1)])
NONE, UNDETERMINED = "none", "undetermined"
Words = NDArray[np.str_]


@dataclass(frozen=True)
class Judgement:
    """What each step did, relative to the supply at the start, and what is concluded.

    Attributes
    ----------
    part, sd : mapping of str to ndarray
        Contribution of each step as it is judged, and its standard uncertainty; NaN where not known [share of the
        supply at the start].
    real, material : mapping of str to ndarray of bool
        Whether a loss at the step is beyond noise, and whether it matters.
    step : ndarray of str
        ``lung``, ``haemoglobin``, ``function``, ``flow``, ``none``, ``undetermined``, or empty where there is nothing
        to compare.
    """

    part: Mapping[str, Floats]
    sd: Mapping[str, Floats]
    real: Mapping[str, Bools]
    material: Mapping[str, Bools]
    step: Words


@quiet
def relative_parts(ledger: Ledger) -> tuple[dict[str, Floats], dict[str, Floats]]:
    """Contribution of each step as it is judged, relative to the supply at the start.

    Parameters
    ----------
    ledger : Ledger
        Comparisons.

    Returns
    -------
    part, sd : dict of str to ndarray
        Contribution and standard uncertainty of each step of :data:`~.ledger_table.STEPS` [share of the supply at the
        start]; the residual reconciled with the lung where it is inside its noise. Flow is NaN where it is not known.
    """
    part = {name: ledger.step(name).copy() for name in STEPS}
    sd = {name: ledger.sd[name].copy() for name in STEPS}
    spread = ledger.sd["residual"]
    inside = (spread > 0.0) & (np.abs(ledger.residual) <= Z95 * spread)
    by_po2, by_saturation = ledger.sd["lung"] ** 2, ledger.sd["saturation"] ** 2
    lung = part["lung"] + ledger.residual * by_po2 / (by_po2 + by_saturation)
    part["lung"] = np.where(inside, lung, part["lung"])
    sd["lung"] = np.where(inside, np.sqrt(by_po2 * by_saturation / (by_po2 + by_saturation)), sd["lung"])
    part["function"] = np.where(inside, part["function"] - ledger.residual, part["function"])
    sd["function"] = np.where(inside, ledger.sd["shift"], sd["function"])
    unknown = ledger.level <= Level.CAO2
    part["flow"], sd["flow"] = (np.where(unknown, np.nan, table["flow"]) for table in (part, sd))
    start = ledger.start_supply
    return {n: v / start for n, v in part.items()}, {n: v / start for n, v in sd.items()}


@quiet
def conclude(part: Mapping[str, Floats], sd: Mapping[str, Floats], missing_could_be: Bools | bool = False) -> Judgement:
    """Name the step that failed in each comparison.

    Parameters
    ----------
    part, sd : mapping of str to ndarray
        Of :func:`relative_parts` [share of the supply at the start].
    missing_could_be : ndarray of bool
        Where something that was not measured could be the cause of what is seen.

    Returns
    -------
    Judgement
        With the step in words for each comparison.
    """
    parts, sds = (np.stack([table[name] for name in STEPS]) for table in (part, sd))
    known = ~np.isnan(parts) & ~np.isnan(sds)
    tested = np.sum(known & (sds > 0.0), axis=0)
    critical = _CRITICAL[tested]
    real = known & (parts + critical * sds < 0.0)
    material = known & (parts <= -MATERIAL)
    lost = np.where(real & material, parts, 0.0)
    order = np.argsort(lost, axis=0, kind="stable")
    step = np.array([*STEPS])[order[0]]
    step = np.where(_told_apart(lost, sds, order), step, UNDETERMINED)
    nothing = lost.min(axis=0) == 0.0
    step = np.where(nothing, np.where(missing_could_be, UNDETERMINED, NONE), step)
    step = np.where(np.any(known, axis=0), step, "")
    return Judgement(
        dict(part), dict(sd), dict(zip(STEPS, real, strict=True)), dict(zip(STEPS, material, strict=True)), step
    )


def _told_apart(lost: Floats, sds: Floats, order: Ints) -> Bools:
    """Whether the largest loss is larger than the next beyond noise."""
    worst, runner_up = (np.take_along_axis(lost, order[[i]], axis=0)[0] for i in (0, 1))
    sd = [np.nan_to_num(np.take_along_axis(sds, order[[i]], axis=0)[0]) for i in (0, 1)]
    return np.asarray((runner_up == 0.0) | (worst - runner_up < -ORDERED * np.hypot(*sd)))


def use_is_worse(snapshots: Snapshots, derived: Derived, ledger: Ledger, settings: Uncertainties = DEFAULT) -> Bools:
    """Whether extraction or lactate rose beyond noise: the tissues got less than they want.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    ledger : Ledger
        Comparisons.
    settings : Uncertainties
        Standard uncertainties in force.

    Returns
    -------
    ndarray of bool
        For each comparison; False where neither is known at both ends [bool].
    """
    there = np.flatnonzero(ledger.level > Level.NONE)
    worse = np.zeros(len(ledger), dtype=np.bool_)
    first, last = ledger.start_row[there], ledger.end_row[there]
    lactate = snapshots["lactate"][first], snapshots["lactate"][last]
    noise = np.hypot(settings.sd("lactate", lactate[0]), settings.sd("lactate", lactate[1]))
    rises = (lactate[1] - lactate[0] > Z95 * noise) & (lactate[1] >= NORMAL)
    # two saturations of 0.8 points each are about 0.012 of the ratio, at both ends 0.017
    extraction = derived["o2er"][last] - derived["o2er"][first]
    worse[there] = rises | (extraction > Z95 * 0.017)
    return worse


def limiting_steps(snapshots: Snapshots, derived: Derived, ledger: Ledger, settings: Uncertainties = DEFAULT) -> Words:
    """The step that failed in each comparison, in a word.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    ledger : Ledger
        Comparisons: consecutive, between two entries, or of a window.
    settings : Uncertainties
        Standard uncertainties in force.

    Returns
    -------
    ndarray of str
        ``lung``, ``haemoglobin``, ``function``, ``flow``, ``none``, ``undetermined``; empty without a
        comparison [word].
    """
    return judge(snapshots, derived, ledger, settings).step


def judge(snapshots: Snapshots, derived: Derived, ledger: Ledger, settings: Uncertainties = DEFAULT) -> Judgement:
    """Judge each comparison of a ledger; see :func:`limiting_steps`.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    ledger : Ledger
        Comparisons.
    settings : Uncertainties
        Standard uncertainties in force.

    Returns
    -------
    Judgement
        One row for each comparison [share of the supply at the start].
    """
    part, sd = relative_parts(ledger)
    return conclude(part, sd, np.isnan(part["flow"]) & use_is_worse(snapshots, derived, ledger, settings))


@dataclass(frozen=True)
class Review:
    """Each stay over a review window.

    Attributes
    ----------
    stay : ndarray of int64
        Stays in ascending order.
    ledger : Ledger
        The window's ledger, one row a stay: the sum of its consecutive ledgers.
    ends : Ledger
        First and last arterial row compared directly. Steps are judged from this: what came and went in between is in
        the sum, but says nothing of now against the start.
    flow_ends, function_ends : Ledger
        The same between the first and last rows that know flow, and dyshaemoglobins: where the ends of the window do
        not, the step is judged from these.
    judgement : Judgement
        What is concluded.
    """

    stay: Ints
    ledger: Ledger
    ends: Ledger
    flow_ends: Ledger
    function_ends: Ledger
    judgement: Judgement


def review(
    snapshots: Snapshots,
    derived: Derived,
    constants: Constants,
    settings: Uncertainties = DEFAULT,
    since: Floats | float = -np.inf,
    until: Floats | float = np.inf,
) -> Review:
    """Judge every stay over a window; each step from the newest rows that know it.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Standard uncertainties in force.
    since, until : float or ndarray, one for each stay in ascending order
        The window [h since the epoch].

    Returns
    -------
    Review
        One row for each stay.
    """
    with_flow = ~np.isnan(derived["do2i"]) | ~np.isnan(derived["do2"])
    with_dys = (derived.flags & Flag.DYSHAEMOGLOBINS_ASSUMED) == 0
    tables = []
    for rows in (None, with_flow, with_dys):
        stays, start, end = window_ends(snapshots, derived, since, until, rows)
        tables.append(between(snapshots, derived, start, end, constants, settings))
    whole, flow, function = tables
    summed = window(snapshots, derived, whole.start_row, whole.end_row, constants, settings)
    part, sd = relative_parts(whole)
    for name, other, stale in (
        ("flow", flow, np.isnan(part["flow"])),
        ("function", function, (whole.notes & Note.DYSHAEMOGLOBINS_NOT_REMEASURED) != 0),
    ):
        part_there, sd_there = relative_parts(other)
        better = stale & ~np.isnan(part_there[name])
        part[name] = np.where(better, part_there[name], part[name])
        sd[name] = np.where(better, sd_there[name], sd[name])
    missing = np.isnan(part["flow"]) & use_is_worse(snapshots, derived, whole, settings)
    return Review(stays, summed, whole, flow, function, conclude(part, sd, missing))
