"""What the supply of each row is made of, as the ledger and the uncertainties need it."""

from __future__ import annotations

from dataclasses import dataclass
from enum import IntEnum

import numpy as np

from .constants import Constants
from .domain import Floats, quiet
from .readings import Bools, Codes, Derived, Flag, Snapshots


class Route(IntEnum):
    """Where the saturation in use comes from, best first."""

    NONE = 0
    O2HB = 1  # measured oxyhaemoglobin
    SO2 = 2  # measured functional saturation
    CURVE = 3  # calculated from PO2
    FINGER = 4  # pulse oximeter


@dataclass(frozen=True)
class RowFactors:
    """The factors of supply at every row; NaN where not known.

    Attributes
    ----------
    output, index : ndarray
        Cardiac output [L/min] and cardiac index [L/min/m²] in use.
    output_own, index_own : ndarray of bool
        Whether it was measured as such (else made from the other with the body surface).
    hb : ndarray
        Haemoglobin [g/dL].
    active : ndarray
        Active share of haemoglobin [0-1].
    dys_known : ndarray of bool
        Whether the dyshaemoglobins were measured (own or carried).
    saturation : ndarray
        Functional saturation in use [0-1].
    route : ndarray of int8
        Codes of :class:`Route`.
    po2, pco2, ph : ndarray
        Gas values at 37 °C [mmHg, mmHg, 1].
    cohb, methb : ndarray
        Dyshaemoglobins for the curve, 0 where not known [0-1].
    """

    output: Floats
    index: Floats
    output_own: Bools
    index_own: Bools
    hb: Floats
    active: Floats
    dys_known: Bools
    saturation: Floats
    route: Codes
    po2: Floats
    pco2: Floats
    ph: Floats
    cohb: Floats
    methb: Floats


@quiet
def row_factors(snapshots: Snapshots, derived: Derived) -> RowFactors:
    """The factors of supply at every row.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.

    Returns
    -------
    RowFactors
        One value for each row [units of the attributes].
    """
    output, index, surface = snapshots["cardiac_output"], snapshots["cardiac_index"], derived["bsa"]
    no_output, no_index = np.isnan(output), np.isnan(index)
    return RowFactors(
        np.where(no_output, index * surface, output),
        np.where(no_index, output / surface, index),
        ~no_output,
        ~no_index,
        snapshots["hb"],
        1.0 - derived.inactive,
        (derived.flags & Flag.DYSHAEMOGLOBINS_ASSUMED) == 0,
        derived.saturation,
        _route(snapshots, derived),
        snapshots["po2"],
        snapshots["pco2"],
        snapshots["ph"],
        np.maximum(np.nan_to_num(snapshots["cohb"]), 0.0),
        np.maximum(np.nan_to_num(snapshots["methb"]), 0.0),
    )


def _route(snapshots: Snapshots, derived: Derived) -> Codes:
    flags = derived.flags
    measured = np.where(np.isnan(snapshots["o2hb"]), Route.SO2, Route.O2HB)
    route = np.where((flags & Flag.SATURATION_CALCULATED) != 0, Route.CURVE, measured)
    route = np.where((flags & Flag.SATURATION_FROM_FINGER) != 0, Route.FINGER, route)
    return np.where(np.isnan(derived.saturation), Route.NONE, route).astype(np.int8)


def bound_per_gram(hb: Floats, content: Floats, po2: Floats, constants: Constants) -> Floats:
    """Oxygen bound for each g/dL of haemoglobin, from a content.

    Parameters
    ----------
    hb : ndarray
        Haemoglobin [g/dL].
    content : ndarray
        Oxygen content [mL/dL].
    po2 : ndarray
        Oxygen partial pressure, NaN counts as nothing dissolved [mmHg].
    constants : Constants
        Of which ``o2_solubility``.

    Returns
    -------
    ndarray
        Bound oxygen [mL/g], NaN without haemoglobin.
    """
    bound = content - constants.o2_solubility * np.nan_to_num(po2)
    return np.asarray(np.divide(bound, hb, out=np.full_like(bound, np.nan), where=hb > 0.0))
