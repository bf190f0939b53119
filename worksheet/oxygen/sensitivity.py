"""How derived quantities answer to each raw input: partial derivatives of all rows at once, by the chain rule.

The contents are differentiated by what was measured; what is reported by the contents. The slope of the curve, where a
saturation is calculated, is taken over one SD of PO2 either side. Tests compare all of it with numerical derivatives
and with Monte Carlo through the very pass that derives the values.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from .align import Lazy
from .constants import Constants
from .curve import saturation
from .domain import Floats, quiet
from .factors import Route, RowFactors, bound_per_gram
from .readings import Bools, Derived, Snapshots

PER_PH, PER_LN_PCO2, PER_METHB = 0.88, 0.048, 0.7  # displacement of the curve: Siggaard-Andersen 1993
# Exponents of height and weight: Mosteller 1987, Du Bois 1916
BSA_EXPONENTS = {"mosteller": (0.5, 0.5), "dubois": (0.725, 0.425)}

Partials = dict[str, Floats]


@dataclass(frozen=True)
class Slopes:
    """Slopes of the saturation in use by its inputs: 0 where it was measured."""

    own: Floats  # by ln PO2, where calculated [0-1]
    venous: Floats  # the same of the paired venous sample [0-1]
    alveolar: Floats  # by ln PO2 at alveolar PO2 [0-1]

    @classmethod
    def of(cls, snapshots: Snapshots, rows: RowFactors, derived: Derived, constants: Constants) -> Slopes:
        """All three, for all rows."""
        venous = {name: snapshots.venous[name] for name in ("po2", "ph", "pco2")}
        unmeasured = np.isnan(snapshots.venous["so2"]) & np.isnan(snapshots.venous["o2hb"])
        arterial = {"po2": rows.po2, "ph": rows.ph, "pco2": rows.pco2}
        return cls(
            _slope(arterial, rows, rows.route == Route.CURVE, constants),
            _slope(venous, rows, unmeasured & ~np.isnan(derived["cvo2"]), constants),
            # at alveolar PO2 the curve is nearly flat: carbon monoxide changes nothing there
            _slope(
                arterial | {"po2": derived["pao2_alveolar"]}, rows, ~np.isnan(derived["shunt_fraction"]), constants, 0.0
            ),
        )


def _slope(
    gas: Mapping[str, Floats], rows: RowFactors, where: Bools, constants: Constants, co_counts: float = 1.0
) -> Floats:
    """Slope of the curve by ln PO2 over one SD either side, so that its bend counts; 0 where not asked [0-1]."""
    result = np.zeros(len(where))
    if not np.any(where):
        return result
    po2, ph, pco2 = (gas[name][where] for name in ("po2", "ph", "pco2"))
    step = np.maximum(2.5 / po2, 0.03)
    pressures = po2 * np.exp(np.stack([-step, step]))
    low, high = saturation(pressures, ph, pco2, 37.0, co_counts * rows.cohb[where], rows.methb[where], constants)
    result[where] = (high - low) / (2.0 * step)
    return result


@dataclass(frozen=True)
class Contents:
    """Partial derivatives of arterial, venous and end-capillary content and of alveolar PO2 by the raw inputs."""

    arterial: Partials
    venous: Partials
    capillary: Partials
    alveolar: Partials

    @classmethod
    def of(
        cls, snapshots: Snapshots, derived: Derived, rows: RowFactors, slopes: Slopes, constants: Constants
    ) -> Contents:
        """All four, for all rows."""
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
    # dyshaemoglobin also shifts the curve to the left, which a calculated saturation follows
    by_share = by_share + np.where(rows.dys_known, PER_METHB * by_ln, 0.0)
    return {
        "hb": bound,
        "so2": np.where(rows.route == Route.CURVE, 0.0, per_saturation),
        "dyshaemoglobins": by_share,
        "po2": constants.o2_solubility + by_ln / rows.po2,
        "ph": PER_PH * by_ln,
        "pco2": -PER_LN_PCO2 * by_ln / rows.pco2,
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


def finals(
    snapshots: Snapshots, derived: Derived, rows: RowFactors, contents: Contents, constants: Constants
) -> Mapping[str, Partials]:
    """Partial derivatives of what is reported, each by every raw input it rests on; made when asked for.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    rows : RowFactors
        Their factors.
    contents : Contents
        Derivatives of the contents.
    constants : Constants
        Constants in force.

    Returns
    -------
    mapping of str to dict of str to ndarray
        Derived quantity, raw input: derivative; by flow, height and weight relative to these [units of both].
    """
    ca, cv = contents.arterial, contents.venous
    difference = _combine((1.0, ca), (-1.0, cv))
    cao2, cvo2, po2, fio2 = derived["cao2"], derived["cvo2"], rows.po2, snapshots["fio2"]
    by_output, by_index = _flow_partials(rows, constants)
    made: dict[str, Callable[[], Partials]] = {
        "cao2": lambda: ca,
        "cvo2": lambda: cv,
        "avdo2": lambda: difference,
        "o2er": lambda: _combine((cvo2 / cao2**2, ca), (-1.0 / cao2, cv)),
        "do2": lambda: _combine((10.0 * rows.output, ca), (10.0 * cao2, by_output)),
        "do2i": lambda: _combine((10.0 * rows.index, ca), (10.0 * cao2, by_index)),
        "vo2": lambda: _combine((10.0 * rows.output, difference), (10.0 * derived["avdo2"], by_output)),
        "vo2i": lambda: _combine((10.0 * rows.index, difference), (10.0 * derived["avdo2"], by_index)),
        "pf_ratio": lambda: {"po2": 1.0 / fio2, "fio2": -po2 / fio2**2},
        "pao2_alveolar": lambda: contents.alveolar,
        "aa_gradient": lambda: _combine((1.0, contents.alveolar), (-1.0, {"po2": np.ones_like(po2)})),
        "shunt_fraction": lambda: _shunt(derived, contents),
    }
    return Lazy(made, lambda name: quiet(made[name])())


def _shunt(derived: Derived, contents: Contents) -> Partials:
    """(Cc' - Ca)/(Cc' - Cv) by its three contents."""
    shunt = derived["shunt_fraction"]
    whole = derived["avdo2"] / (1.0 - shunt)
    return _combine(
        ((1.0 - shunt) / whole, contents.capillary), (-1.0 / whole, contents.arterial), (shunt / whole, contents.venous)
    )


def flow_variance(rows: RowFactors, sds: Mapping[str, Floats], constants: Constants) -> tuple[Floats, Floats]:
    """Relative variance of output and index: of the measured flow, and of body surface where it made the other.

    Parameters
    ----------
    rows : RowFactors
        Factors of the rows.
    sds : mapping of str to ndarray
        1 SD of ``flow``, ``height`` and ``weight``, relative [1].
    constants : Constants
        Of which ``bsa_formula``.

    Returns
    -------
    output, index : ndarray
        Relative variance [1].
    """
    surface = surface_variance(sds, constants)
    measured = sds["flow"] ** 2
    return measured + np.where(rows.output_own, 0.0, surface), measured + np.where(rows.index_own, 0.0, surface)


def surface_variance(sds: Mapping[str, Floats], constants: Constants) -> Floats:
    """Relative variance of body surface.

    Parameters
    ----------
    sds : mapping of str to ndarray
        1 SD of ``height`` and ``weight``, relative [1].
    constants : Constants
        Of which ``bsa_formula``.

    Returns
    -------
    ndarray
        Relative variance [1].
    """
    by_height, by_weight = BSA_EXPONENTS[constants.bsa_formula]
    return np.asarray((by_height * sds["height"]) ** 2 + (by_weight * sds["weight"]) ** 2)


def _flow_partials(rows: RowFactors, constants: Constants) -> tuple[Partials, Partials]:
    """Of output and index by the flow that was measured and by height and weight (relative, see :func:`_sds`)."""
    by_height, by_weight = BSA_EXPONENTS[constants.bsa_formula]
    output, index = rows.output, rows.index
    made_output, made_index = ~rows.output_own, ~rows.index_own
    return (
        {"flow": output, "height": by_height * output * made_output, "weight": by_weight * output * made_output},
        {"flow": index, "height": -by_height * index * made_index, "weight": -by_weight * index * made_index},
    )
