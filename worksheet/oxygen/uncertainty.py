"""How sure each derived number is: first-order propagation for all rows at once, Monte Carlo for one.

First order by the GUM [1]_: the final quantity is differentiated once with respect to each raw input, so an input
shared by two contents (haemoglobin, dyshaemoglobins) enters once and a difference cancels it. Where first order is not
enough (:func:`first_order_doubtful`) use :func:`monte_carlo` [2]_. Constants of the site are taken as exact.

References
----------
.. [1] JCGM 100:2008. Guide to the expression of uncertainty in measurement.
.. [2] JCGM 101:2008. Propagation of distributions using a Monte Carlo method.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import ArrayLike

from .constants import Constants
from .curve import saturation
from .derive import chain_inputs, oxygen_chain
from .domain import Floats, floats, quiet
from .factors import Route, RowFactors, bound_per_gram, row_factors
from .measurement import DEFAULT, Uncertainties, fio2_sd, input_sds, parts
from .quantities import WITH_SD
from .readings import Bools, Derived, Flag, Snapshots

__all__ = [
    "DEFAULT", "Budget", "MonteCarlo", "Uncertainties", "budget", "first_order_doubtful", "input_sds", "interval", "monte_carlo",
    "standard_uncertainties",
]  # fmt: skip

Z95 = 1.959963984540054
_PER_PH, _PER_LN_PCO2 = 0.88, 0.048  # displacement of the curve: Siggaard-Andersen 1993


@dataclass(frozen=True)
class Budget:
    """Partial derivatives of each derived quantity by each raw input, and the inputs' standard uncertainties.

    Attributes
    ----------
    partials : mapping of str to mapping of str to ndarray
        Derived quantity, raw input: partial derivative [unit of the one per unit of the other].
    sds : mapping of str to ndarray
        Raw input: 1 SD [canonical unit]. ``so2`` is the saturation in use, ``dyshaemoglobins`` the inactive share,
        ``curve`` the displacement of the patient's curve, ``flow`` the output or index in use.
    """

    partials: Mapping[str, Mapping[str, Floats]]
    sds: Mapping[str, Floats]

    def variance(self, name: str) -> dict[str, Floats]:
        """Contribution of each raw input to the variance of a derived quantity [unit squared]."""
        return {key: (partial * self.sds[key]) ** 2 for key, partial in self.partials[name].items()}

    def sd(self, name: str) -> Floats:
        """Standard uncertainty of a derived quantity [its canonical unit]."""
        return np.asarray(np.sqrt(sum(np.nan_to_num(part) for part in self.variance(name).values())))


def standard_uncertainties(
    snapshots: Snapshots, derived: Derived, constants: Constants, settings: Uncertainties = DEFAULT
) -> dict[str, Floats]:
    """Standard uncertainty of derived quantities at every row, first order.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    constants : Constants
        Constants in force; taken as exact.
    settings : Uncertainties
        Those in force.

    Returns
    -------
    dict of str to ndarray
        1 SD for each of ``quantities.WITH_SD`` and for cvo2, avdo2, vo2, vo2i, pao2_alveolar and aa_gradient
        [canonical unit]; NaN where the quantity is NaN.
    """
    found = budget(snapshots, derived, constants, settings)
    return {name: np.where(np.isnan(derived[name]), np.nan, found.sd(name)) for name in found.partials}


@quiet
def budget(snapshots: Snapshots, derived: Derived, constants: Constants, settings: Uncertainties = DEFAULT) -> Budget:
    """Derivatives of the derived quantities by the raw inputs, all rows at once; see :class:`Budget`.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Those in force.

    Returns
    -------
    Budget
        Derivatives and standard uncertainties.
    """
    rows = row_factors(snapshots, derived)
    slopes = _Slopes.of(snapshots, rows, derived, constants)
    contents = _Contents.of(snapshots, derived, rows, slopes, constants)
    return Budget(_finals(snapshots, derived, rows, contents, constants), _sds(snapshots, rows, settings))


_FRACTIONS_SHOWN = ("o2er", "shunt_fraction")


@quiet
def interval(name: str, value: ArrayLike, sd: ArrayLike) -> tuple[Floats, Floats]:
    """95 % interval of a derived quantity.

    The errors of flow and FiO2 are factors, so for positive quantities the interval is symmetric on the logarithm:
    ``value exp(+-1.96 sd / value)``. Below a relative SD of 5 % that is the same as ``value +- 1.96 sd``; at 15 % the
    latter covers the truth in 93 % only (simulated courses). Fractions stay inside 0 to 1.

    Parameters
    ----------
    name : str
        Derived quantity of the catalogue.
    value, sd : array_like
        Its value and standard uncertainty [its canonical unit].

    Returns
    -------
    low, high : ndarray
        Limits [its canonical unit], NaN where any input is NaN.
    """
    value, sd = floats(value, sd)
    if name in _FRACTIONS_SHOWN:
        return np.clip(value - Z95 * sd, 0.0, 1.0), np.clip(value + Z95 * sd, 0.0, 1.0)
    if name in ("aa_gradient", "avdo2"):
        return value - Z95 * sd, value + Z95 * sd
    factor = np.exp(Z95 * sd / value)
    return np.asarray(value / factor), np.asarray(value * factor)


def first_order_doubtful(snapshots: Snapshots, derived: Derived, sds: Mapping[str, Floats]) -> dict[str, Bools]:
    """Rows where first order is not enough and the Monte Carlo should be used.

    Where the SD of FiO2 exceeds 15 % of it, where the content difference is less than four of its SD, where the
    saturation comes from the finger, where a measured saturation could be 1, and where a shunt could be 0.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    sds : mapping of str to ndarray
        Of :func:`standard_uncertainties` [canonical unit].

    Returns
    -------
    dict of str to ndarray of bool
        For each of ``quantities.WITH_SD`` [bool].
    """
    finger = (derived.flags & Flag.SATURATION_FROM_FINGER) != 0
    fio2 = fio2_sd(snapshots) > 0.15 * snapshots["fio2"]
    small = derived["avdo2"] < 4.0 * sds["avdo2"]
    full = derived.saturation + Z95 * 0.008 > 1.0
    none = derived["shunt_fraction"] < 2.0 * sds["shunt_fraction"]
    rules = {
        "cao2": finger | full, "o2er": finger | small | full, "pf_ratio": fio2,
        "shunt_fraction": finger | small | fio2 | full | none,
    }  # fmt: skip
    return {name: np.asarray(rules.get(name, finger)) for name in WITH_SD}


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
        sds["ph"] = float(np.hypot(sds["ph"], settings.curve / _PER_PH))
    sds["barometric_pressure"] = settings.quantities["barometric_pressure"][0]
    for name in raw:
        if name.startswith("venous_"):
            sds[name] = float(settings.sd(name.removeprefix("venous_"), raw[name])[0])
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


Partials = dict[str, Floats]


@dataclass(frozen=True)
class _Slopes:
    """Slopes of the saturation in use by its inputs: 0 where it was measured."""

    own: Floats  # by ln PO2, where calculated [0-1]
    venous: Floats  # the same of the paired venous sample [0-1]
    alveolar: Floats  # by ln PO2 at alveolar PO2 [0-1]

    @classmethod
    def of(cls, snapshots: Snapshots, rows: RowFactors, derived: Derived, constants: Constants) -> _Slopes:
        venous = {name: snapshots.venous[name] for name in ("po2", "ph", "pco2")}
        unmeasured = np.isnan(snapshots.venous["so2"]) & np.isnan(snapshots.venous["o2hb"])
        arterial = {"po2": rows.po2, "ph": rows.ph, "pco2": rows.pco2}
        return cls(
            _slope(arterial, rows, rows.route == Route.CURVE, constants),
            _slope(venous, rows, unmeasured & ~np.isnan(derived["cvo2"]), constants),
            _slope(arterial | {"po2": derived["pao2_alveolar"]}, rows, ~np.isnan(derived["shunt_fraction"]), constants),
        )


def _slope(gas: Mapping[str, Floats], rows: RowFactors, where: Bools, constants: Constants) -> Floats:
    """Slope of the curve by ln PO2 over one SD either side, so that its bend counts; 0 where not asked [0-1]."""
    result = np.zeros(len(where))
    if not np.any(where):
        return result
    po2, ph, pco2 = (gas[name][where] for name in ("po2", "ph", "pco2"))
    step = np.maximum(2.5 / po2, 0.03)
    pressures = po2 * np.exp(np.stack([-step, step]))
    low, high = saturation(pressures, ph, pco2, 37.0, rows.cohb[where], rows.methb[where], constants)
    result[where] = (high - low) / (2.0 * step)
    return result


@dataclass(frozen=True)
class _Contents:
    """Partial derivatives of arterial, venous and end-capillary content and of alveolar PO2 by the raw inputs."""

    arterial: Partials
    venous: Partials
    capillary: Partials
    alveolar: Partials

    @classmethod
    def of(
        cls, snapshots: Snapshots, derived: Derived, rows: RowFactors, slopes: _Slopes, constants: Constants
    ) -> _Contents:
        per_saturation = constants.hufner * rows.hb * rows.active
        alveolar = _alveolar(snapshots, constants)
        return cls(
            _arterial(rows, slopes.own, per_saturation, constants),
            _venous(snapshots, derived, rows, slopes.venous, constants),
            _capillary(derived, rows, slopes.alveolar, alveolar, constants),
            alveolar,
        )


def _arterial(rows: RowFactors, slope: Floats, per_saturation: Floats, constants: Constants) -> Partials:
    bound = constants.hufner * rows.active * rows.saturation
    by_share = np.where(rows.route == Route.O2HB, 0.0, -constants.hufner * rows.hb * rows.saturation)
    by_ln = per_saturation * slope
    return {
        "hb": bound,
        "so2": np.where(rows.route == Route.CURVE, 0.0, per_saturation),
        "dyshaemoglobins": by_share,
        "po2": constants.o2_solubility + by_ln / rows.po2,
        "ph": _PER_PH * by_ln,
        "pco2": -_PER_LN_PCO2 * by_ln / rows.pco2,
        "curve": -by_ln,
    }


def _venous(snapshots: Snapshots, derived: Derived, rows: RowFactors, slope: Floats, constants: Constants) -> Partials:
    venous_hb, po2 = snapshots.venous["hb"], snapshots.venous["po2"]
    shared = np.isnan(venous_hb)
    hb = np.where(shared, rows.hb, venous_hb)
    bound = bound_per_gram(hb, derived["cvo2"], po2, constants)
    by_o2hb = ~np.isnan(snapshots.venous["o2hb"])
    per_saturation = constants.hufner * hb * rows.active
    return {
        "hb": np.where(shared, bound, 0.0),
        "hb_venous": np.where(shared, 0.0, bound),
        "so2_venous": np.where(slope > 0.0, 0.0, per_saturation),
        "dyshaemoglobins": np.where(by_o2hb, 0.0, -bound * hb / rows.active),
        "po2_venous": constants.o2_solubility + per_saturation * slope / po2,
    }


def _alveolar(snapshots: Snapshots, constants: Constants) -> Partials:
    """Of the full alveolar gas equation."""
    fio2, quotient = snapshots["fio2"], constants.respiratory_quotient
    pressure = snapshots["barometric_pressure"]
    pressure = np.where(np.isnan(pressure), constants.barometric_pressure, pressure)
    return {
        "fio2": pressure - constants.water_vapour - snapshots["pco2"] * (1.0 - 1.0 / quotient),
        "barometric_pressure": fio2,
        "pco2": -(fio2 + (1.0 - fio2) / quotient),
    }


def _capillary(derived: Derived, rows: RowFactors, slope: Floats, alveolar: Partials, constants: Constants) -> Partials:
    """End-capillary content follows from the shunt equation solved for it; its saturation is nearly 1."""
    shunt = derived["shunt_fraction"]
    content = (derived["cao2"] - shunt * derived["cvo2"]) / (1.0 - shunt)
    bound = bound_per_gram(rows.hb, content, derived["pao2_alveolar"], constants)
    by_pressure = constants.o2_solubility + (
        constants.hufner * rows.hb * rows.active * slope / derived["pao2_alveolar"]
    )
    result = {name: by_pressure * partial for name, partial in alveolar.items()}
    return result | {"hb": bound, "dyshaemoglobins": -bound * rows.hb / rows.active}


def _combine(*pairs: tuple[Floats | float, Partials]) -> Partials:
    """Chain rule: sum of factors times partial derivatives."""
    result: Partials = {}
    for factor, partials in pairs:
        for name, partial in partials.items():
            term = factor * partial
            result[name] = result[name] + term if name in result else term
    return result


def _finals(
    snapshots: Snapshots, derived: Derived, rows: RowFactors, contents: _Contents, constants: Constants
) -> dict[str, Partials]:
    """Partial derivatives of what is reported, each by every raw input it rests on."""
    ca, cv = contents.arterial, contents.venous
    difference = _combine((1.0, ca), (-1.0, cv))
    cao2, cvo2, po2, fio2 = derived["cao2"], derived["cvo2"], rows.po2, snapshots["fio2"]
    output, index = _flow_partials(rows, constants)
    return {
        "cao2": ca,
        "cvo2": cv,
        "avdo2": difference,
        "o2er": _combine((cvo2 / cao2**2, ca), (-1.0 / cao2, cv)),
        "do2": _combine((10.0 * rows.output, ca), (10.0 * cao2, output)),
        "do2i": _combine((10.0 * rows.index, ca), (10.0 * cao2, index)),
        "vo2": _combine((10.0 * rows.output, difference), (10.0 * derived["avdo2"], output)),
        "vo2i": _combine((10.0 * rows.index, difference), (10.0 * derived["avdo2"], index)),
        "pf_ratio": {"po2": 1.0 / fio2, "fio2": -po2 / fio2**2},
        "pao2_alveolar": contents.alveolar,
        "aa_gradient": _combine((1.0, contents.alveolar), (-1.0, {"po2": np.ones_like(po2)})),
        "shunt_fraction": _shunt(derived, contents),
    }


def _shunt(derived: Derived, contents: _Contents) -> Partials:
    """(Cc' - Ca)/(Cc' - Cv) by its three contents."""
    shunt = derived["shunt_fraction"]
    whole = derived["avdo2"] / (1.0 - shunt)
    return _combine(
        ((1.0 - shunt) / whole, contents.capillary), (-1.0 / whole, contents.arterial), (shunt / whole, contents.venous)
    )


def _flow_partials(rows: RowFactors, constants: Constants) -> tuple[Partials, Partials]:
    """Of output and index by the flow that was measured and by height and weight (relative, see :func:`_sds`)."""
    by_height, by_weight = BSA_EXPONENTS[constants.bsa_formula]
    output, index = rows.output, rows.index
    made_output, made_index = ~rows.output_own, ~rows.index_own
    return (
        {"flow": output, "height": by_height * output * made_output, "weight": by_weight * output * made_output},
        {"flow": index, "height": -by_height * index * made_index, "weight": -by_weight * index * made_index},
    )


# Exponents of height and weight: Mosteller 1987, Du Bois 1916
BSA_EXPONENTS = {"mosteller": (0.5, 0.5), "dubois": (0.725, 0.425)}


def _sds(snapshots: Snapshots, rows: RowFactors, settings: Uncertainties) -> dict[str, Floats]:
    """Standard uncertainty of each raw input; flow, height and weight are relative [canonical unit, or 1]."""
    plain = {name: parts(snapshots, name, settings).total for name in ("hb", "po2", "ph", "pco2", "fio2")}
    flow = parts(snapshots, "cardiac_output", settings).total / snapshots["cardiac_output"]
    by_index = parts(snapshots, "cardiac_index", settings).total / snapshots["cardiac_index"]
    return plain | {
        "so2": saturation_sd(snapshots, rows, settings),
        "so2_venous": np.full(len(snapshots), settings.quantities["so2"][0]),
        "hb_venous": settings.sd("hb", snapshots.venous["hb"]),
        "po2_venous": settings.sd("po2", snapshots.venous["po2"]),
        "dyshaemoglobins": share_sd(snapshots, rows, settings),
        "curve": np.full(len(snapshots), settings.curve),
        "barometric_pressure": np.full(len(snapshots), settings.quantities["barometric_pressure"][0]),
        "flow": np.where(np.isnan(flow), by_index, flow),
        "height": np.full(len(snapshots), settings.quantities["height"][1]),
        "weight": np.full(len(snapshots), settings.quantities["weight"][1]),
    }


def saturation_sd(snapshots: Snapshots, rows: RowFactors, settings: Uncertainties = DEFAULT) -> Floats:
    """Standard uncertainty of the saturation in use where it was measured.

    Parameters
    ----------
    snapshots : Snapshots
        The rows.
    rows : RowFactors
        Their factors.
    settings : Uncertainties
        Those in force.

    Returns
    -------
    ndarray
        1 SD [0-1]; O2Hb's is widened to that of the functional saturation; 0 where calculated.
    """
    so2, o2hb, spo2 = (settings.quantities[name][0] for name in ("so2", "o2hb", "spo2"))
    by_route = np.choose(rows.route, [np.nan, 0.0, so2, 0.0, spo2])
    return np.where(rows.route == Route.O2HB, o2hb / rows.active, by_route)


def share_sd(snapshots: Snapshots, rows: RowFactors, settings: Uncertainties = DEFAULT) -> Floats:
    """Standard uncertainty of the inactive share of haemoglobin.

    Parameters
    ----------
    snapshots : Snapshots
        The rows.
    rows : RowFactors
        Their factors.
    settings : Uncertainties
        Those in force.

    Returns
    -------
    ndarray
        1 SD: of the measured parts in quadrature, or of the usual share where they were never measured [0-1].
    """
    measured = sum(np.nan_to_num(parts(snapshots, name, settings).total) ** 2 for name in ("cohb", "methb", "sulfhb"))
    return np.where(rows.dys_known, np.sqrt(measured), settings.usual_inactive)
