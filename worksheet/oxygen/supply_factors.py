"""The factors of supply at one end of a comparison, and the split of a change over them: plain arrays."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from .constants import Constants
from .domain import Bools, Floats
from .readings import Ints

DL_PER_L = 10.0
BOUND = ("flow", "hb", "active", "unloading")
SHIFTS = ("ph", "pco2", "methb", "cohb", "temperature")
CURVE = ("po2", *SHIFTS)


@dataclass(frozen=True)
class Factors:
    """What supply is made of at one end of a comparison; arrays of one shape, NaN where not known.

    Attributes
    ----------
    flow : ndarray
        Cardiac index [L/min/m²], cardiac output [L/min], or 0.1 for the ledger of content alone.
    hb : ndarray
        Haemoglobin [g/dL].
    active : ndarray
        Active share of haemoglobin [0-1].
    saturation : ndarray
        Functional saturation in use [0-1].
    measured : ndarray of bool
        Whether it was measured; False: it is the curve's, and the residual is 0.
    po2, pco2 : ndarray
        Partial pressures at 37 °C [mmHg].
    ph : ndarray
        pH at 37 °C [1].
    cohb, methb : ndarray
        Dyshaemoglobins for the curve, 0 where not known [0-1].
    temperature : ndarray
        Temperature the pressures hold at: 37 for what an analyser reports [°C].
    bound, held : ndarray
        Saturation and oxygen pressure that stay behind (extractable ledger); 0 for content [0-1, mmHg].
    """

    flow: Floats
    hb: Floats
    active: Floats
    saturation: Floats
    measured: Bools
    po2: Floats
    ph: Floats
    pco2: Floats
    cohb: Floats
    methb: Floats
    temperature: Floats
    bound: Floats
    held: Floats

    @classmethod
    def of(
        cls, flow: ArrayLike, hb: ArrayLike, active: ArrayLike, saturation: ArrayLike, po2: ArrayLike, ph: ArrayLike,
        pco2: ArrayLike, cohb: ArrayLike = 0.0, methb: ArrayLike = 0.0, temperature: ArrayLike = 37.0,
        measured: ArrayLike = True,
    ) -> Factors:  # fmt: skip
        """Factors from numbers or arrays, broadcast to one shape [units of the attributes]; nothing held back."""
        given = (flow, hb, active, saturation, po2, ph, pco2, cohb, methb, temperature, measured)
        numbers = np.broadcast_arrays(*(np.asarray(value, dtype=np.float64) for value in given))
        names = ("flow", "hb", "active", "saturation", "po2", "ph", "pco2", "cohb", "methb", "temperature")
        zero = np.zeros(numbers[0].shape)
        columns = dict(zip(names, numbers, strict=False))
        return cls(measured=numbers[-1] != 0.0, bound=zero, held=zero, **columns)

    def take(self, rows: slice | Ints) -> Factors:
        """The factors of some rows."""
        return Factors(**{name: value[rows] for name, value in vars(self).items()})

    def supply(self, constants: Constants) -> Floats:
        """Supply at this end [mL/dL times 10 flow]."""
        bound = constants.hufner * self.hb * self.active * (self.saturation - self.bound)
        return np.asarray(DL_PER_L * self.flow * (bound + constants.o2_solubility * (self.po2 - self.held)))


@dataclass(frozen=True)
class Split:
    """Terms of one change, and what the uncertainty of each needs.

    Attributes
    ----------
    terms : mapping of str to ndarray
        ``flow``, ``hb``, ``active``, ``po2`` (through saturation), ``dissolved``, each of :data:`SHIFTS`,
        ``residual`` and ``unloading`` (what stays bound) [unit of supply].
    total : ndarray
        Their sum [unit of supply].
    saturation_parts : mapping of str to ndarray
        The same second-level terms before their weight [0-1].
    slopes : mapping of str to ndarray
        ``start``, ``end``: slope of the curve at the two ends; ``po2_start``, ``po2_end``: of the part that PO2
        explains [saturation per ln PO2]; ``shift_start``, ``shift_end``: by a displacement to the left, ``bend``:
        of the part that PO2 explains by a displacement at either end [saturation per unit of displacement].
    """

    terms: Mapping[str, Floats]
    total: Floats
    saturation_parts: Mapping[str, Floats]
    slopes: Mapping[str, Floats]
