"""Distribution of what follows from one snapshot, by Monte Carlo through the very pass that derives it.

References
----------
.. [1] JCGM 101:2008. Propagation of distributions using a Monte Carlo method.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np

from .chain import chain_inputs, oxygen_chain
from .constants import Constants
from .domain import Floats
from .measurement import DEFAULT, Uncertainties, parts
from .readings import Snapshots
from .sensitivity import PER_PH


@dataclass(frozen=True)
class MonteCarlo:
    """Distribution of one derived quantity.

    Attributes
    ----------
    mean, sd : float
        Mean and standard deviation [canonical unit].
    low, high : float
        Limits of the 95 % interval [canonical unit].
    """

    mean: float
    sd: float
    low: float
    high: float


def monte_carlo(
    snapshots: Snapshots,
    row: int,
    constants: Constants,
    settings: Uncertainties = DEFAULT,
    n: int = 20_000,
    seed: int = 1,
) -> dict[str, MonteCarlo]:
    """Distribution of what follows from one snapshot, its raw inputs drawn from their uncertainties.

    Parameters
    ----------
    snapshots : Snapshots
        The rows.
    row : int
        Which of them [row number].
    constants : Constants
        Constants in force; taken as exact.
    settings : Uncertainties
        Those in force.
    n : int
        Number of draws [1].
    seed : int
        Seed of the draws: the same snapshot gives the same interval [1].

    Returns
    -------
    dict of str to MonteCarlo
        For each of ``quantities.WITH_SD`` and ``cvo2`` that can be derived [canonical unit].
    """
    raw = chain_inputs(snapshots, constants, np.array([row]))
    sds = _chain_sds(snapshots, raw, row, settings)
    random = np.random.default_rng(seed)
    drawn = {name: _drawn(name, value[0], sds.get(name, 0.0), n, random) for name, value in raw.items()}
    # never measured: the usual share is itself uncertain
    usual = np.maximum(constants.usual_inactive + settings.usual_inactive * random.standard_normal(n), 0.0)
    found = oxygen_chain(drawn, replace(constants, usual_inactive=usual))  # type: ignore[arg-type]
    return {name: _summary(values) for name, values in found.items() if np.isfinite(values).mean() > 0.5}


def _chain_sds(snapshots: Snapshots, raw: Mapping[str, Floats], row: int, settings: Uncertainties) -> dict[str, float]:
    """1 SD of every raw column of one snapshot [canonical unit]."""
    sds = {name: float(parts(snapshots, name, settings).total[row]) for name in raw if name in settings.quantities}
    if np.isnan(raw["so2"][0]) and np.isnan(raw["o2hb"][0]):  # calculated: the patient's curve is drawn as a pH
        sds["ph"] = float(np.hypot(sds["ph"], settings.curve / PER_PH))
    sds["barometric_pressure"] = settings.quantities["barometric_pressure"][0]
    for name in raw:
        if name.startswith("venous_"):
            sds[name] = float(settings.sd(name.removeprefix("venous_"), raw[name])[0])
    sds["venous_so2"] = settings.venous_saturation
    return sds


# Fractions end at 0 and 1
_FRACTIONS = ("so2", "o2hb", "cohb", "methb", "sulfhb", "spo2", "fio2")


def _drawn(name: str, value: float, sd: float, n: int, random: np.random.Generator) -> Floats:
    if np.isnan(value):
        return np.full(n, np.nan)
    values = value + (sd if np.isfinite(sd) else 0.0) * random.standard_normal(n)
    if name.removeprefix("venous_") in _FRACTIONS:
        return np.asarray(np.clip(values, 0.0, 1.0))
    return np.asarray(np.maximum(values, 0.0))


def _summary(values: Floats) -> MonteCarlo:
    low, high = np.nanquantile(values, [0.025, 0.975])
    return MonteCarlo(float(np.nanmean(values)), float(np.nanstd(values)), float(low), float(high))
