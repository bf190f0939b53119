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
from .domain import Floats, floats, quiet
from .factors import Route, RowFactors, row_factors
from .measurement import DEFAULT, Uncertainties, fio2_sd, input_sds, parts
from .monte_carlo import MonteCarlo, monte_carlo
from .quantities import WITH_SD
from .readings import Bools, Derived, Flag, Ints, Snapshots
from .sensitivity import Contents, Partials, Slopes, finals, flow_variance, surface_variance

__all__ = [
    "DEFAULT", "Budget", "MonteCarlo", "Partials", "Uncertainties", "budget", "first_order_doubtful", "input_sds",
    "interval", "monte_carlo", "sds_of_rows",
    "standard_uncertainties",
]  # fmt: skip

Z95 = 1.959963984540054


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
        """Contribution of each raw input to the variance of a derived quantity.

        Parameters
        ----------
        name : str
            Derived quantity.

        Returns
        -------
        dict of str to ndarray
            Raw input: its part of the variance [unit squared], NaN where the input is missing.
        """
        return {key: (partial * self.sds[key]) ** 2 for key, partial in self.partials[name].items()}

    def sd(self, name: str) -> Floats:
        """Standard uncertainty of a derived quantity.

        Parameters
        ----------
        name : str
            Derived quantity.

        Returns
        -------
        ndarray
            1 SD [its canonical unit]; inputs that are missing do not enter.
        """
        total = np.zeros(len(self.sds["hb"]))
        for key, partial in self.partials[name].items():
            part = partial * self.sds[key]
            part *= part
            np.copyto(part, 0.0, where=np.isnan(part))  # an input that is missing does not enter
            total += part
        return np.sqrt(total)


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
        [canonical unit]; NaN where the quantity is NaN and for rows that are not arterial.
    """
    arterial = np.flatnonzero(snapshots.arterial)
    found = sds_of_rows(snapshots, derived, arterial, constants, settings)
    result = {name: np.full(len(snapshots), np.nan) for name in found}
    for name, column in result.items():
        column[arterial] = found[name]
    return result


def sds_of_rows(
    snapshots: Snapshots, derived: Derived, rows: Ints, constants: Constants, settings: Uncertainties = DEFAULT
) -> dict[str, Floats]:
    """The same as :func:`standard_uncertainties`, for some arterial rows.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    rows : ndarray of int64
        Which rows [row number].
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Those in force.

    Returns
    -------
    dict of str to ndarray
        1 SD, one for each of the given rows [canonical unit]; NaN where the quantity is NaN.
    """
    own = _of_rows(snapshots, derived, rows)
    found = budget(*own, constants, settings)
    sds = {name: found.sd(name) for name in found.partials if name not in _PRODUCTS}
    sds |= _product_sds(*own, sds, found, constants)
    sds |= _measured_vo2_sds(*own, sds, found, constants, settings)
    return {name: np.where(np.isnan(own[1][name]), np.nan, sd) for name, sd in sds.items()}


_PRODUCTS = {"do2": "cao2", "vo2": "avdo2", "do2i": "cao2", "vo2i": "avdo2"}


@quiet
def _product_sds(
    snapshots: Snapshots, derived: Derived, sds: Mapping[str, Floats], found: Budget, constants: Constants
) -> dict[str, Floats]:
    """Flow times content: the two share no input, so their relative variances add (tests compare with the budget)."""
    rows = row_factors(snapshots, derived)
    flow = dict(zip(("do2", "do2i"), flow_variance(rows, found.sds, constants), strict=True))
    flow |= {"vo2": flow["do2"], "vo2i": flow["do2i"]}
    relative = {name: (sds[name] / derived[name]) ** 2 for name in ("cao2", "avdo2")}
    return {
        name: np.abs(derived[name]) * np.sqrt(flow[name] + relative[content]) for name, content in _PRODUCTS.items()
    }


@quiet
def _measured_vo2_sds(
    snapshots: Snapshots, derived: Derived, sds: Mapping[str, Floats], found: Budget, constants: Constants,
    settings: Uncertainties,
) -> dict[str, Floats]:  # fmt: skip
    """Where Fick's VO2 cannot be had and the measured one stands in: its own, for the index with the body surface's."""
    measured = parts(snapshots, "vo2_measured", settings).total / snapshots["vo2_measured"]
    surface = np.sqrt(surface_variance(found.sds, constants))
    own = {"vo2": measured, "vo2i": np.hypot(measured, surface)}
    return {name: np.where(np.isnan(sds[name]), np.abs(derived[name]) * own[name], sds[name]) for name in own}


_NEEDED = (
    "hb", "po2", "ph", "pco2", "fio2", "cardiac_output", "cardiac_index", "so2", "o2hb", "cohb", "methb", "sulfhb",
    "barometric_pressure", "vo2_measured",
)  # fmt: skip
_NEEDED_VENOUS = ("ph", "pco2", "po2", "hb", "so2", "o2hb")
_NEEDED_DERIVED = (
    "cao2", "cvo2", "avdo2", "do2", "do2i", "vo2", "vo2i", "o2er", "pf_ratio", "shunt_fraction", "pao2_alveolar",
    "aa_gradient", "bsa",
)  # fmt: skip


def _of_rows(snapshots: Snapshots, derived: Derived, rows: Ints) -> tuple[Snapshots, Derived]:
    """The columns that uncertainties need, of some rows."""
    return (
        replace(
            snapshots,
            values={name: snapshots[name][rows] for name in _NEEDED},
            age={name: snapshots.age[name][rows] for name in _NEEDED},
            venous={name: snapshots.venous[name][rows] for name in _NEEDED_VENOUS},
            device=snapshots.device[rows],
            flow_method=snapshots.flow_method[rows],
        ),
        Derived(
            {name: derived[name][rows] for name in _NEEDED_DERIVED},
            derived.saturation[rows], derived.inactive[rows], derived.flags[rows],
        ),
    )  # fmt: skip


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
        Derivatives and standard uncertainties [canonical units].
    """
    rows = row_factors(snapshots, derived)
    slopes = Slopes.of(snapshots, rows, derived, constants)
    contents = Contents.of(snapshots, derived, rows, slopes, constants)
    return Budget(finals(snapshots, derived, rows, contents, constants), _sds(snapshots, rows, settings))


_FRACTIONS_SHOWN = ("o2er", "shunt_fraction")


@quiet
def interval(name: str, value: ArrayLike, sd: ArrayLike) -> tuple[Floats, Floats]:
    """95 % interval of a derived quantity.

    The errors of flow and FiO2 are factors, so for positive quantities the interval is symmetric on the logarithm:
    ``value exp(+-1.96 sd / value)``. Below a relative SD of 5 % that is the same as ``value +- 1.96 sd``; at 15 % the
    latter covers the truth in 93 % only. In simulated courses, where body and samples are known, the interval of DO2I
    covers the true one in 93 to 97 % (a test holds it to that). Fractions stay inside 0 to 1.

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


def _sds(snapshots: Snapshots, rows: RowFactors, settings: Uncertainties) -> dict[str, Floats]:
    """Standard uncertainty of each raw input; flow, height and weight are relative [canonical unit, or 1]."""
    plain = {name: parts(snapshots, name, settings).total for name in ("hb", "po2", "ph", "pco2", "fio2")}
    flow = parts(snapshots, "cardiac_output", settings).total / snapshots["cardiac_output"]
    by_index = parts(snapshots, "cardiac_index", settings).total / snapshots["cardiac_index"]
    return plain | {
        "so2": saturation_sd(snapshots, rows, settings),
        "so2_venous": np.full(len(rows.hb), settings.venous_saturation),
        "hb_venous": settings.sd("hb", snapshots.venous["hb"]),
        "po2_venous": settings.sd("po2", snapshots.venous["po2"]),
        "dyshaemoglobins": share_sd(snapshots, rows, settings),
        "curve": np.full(len(rows.hb), settings.curve),
        "barometric_pressure": np.full(len(rows.hb), settings.quantities["barometric_pressure"][0]),
        "flow": np.where(np.isnan(flow), by_index, flow),
        "height": np.full(len(rows.hb), settings.quantities["height"][1]),
        "weight": np.full(len(rows.hb), settings.quantities["weight"][1]),
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
