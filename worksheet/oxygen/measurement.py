"""How sure each measured value is: standard uncertainties by quantity, method, device and age.

What one method gets wrong in the same way each time (systematic) is kept apart from what differs from sample to sample
(random), because a difference by the same method cancels the first.

References
----------
.. [1] Mallat J et al. Repeatability of blood gas parameters. Medicine (Baltimore) 2015;94(3):e415.
.. [2] Stetz CW et al. Reliability of the thermodilution method. Am Rev Respir Dis 1982;126:1001-1004.
.. [3] Peyton PJ, Chong SW. Minimally invasive measurement of cardiac output. Anesthesiology 2010;113:1220-1235.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import NamedTuple

import numpy as np

from .domain import Floats
from .quantities import CATALOGUE, MEASURED
from .readings import Codes, Device, FlowMethod, Site, Snapshots


def _catalogue_sds() -> Mapping[str, tuple[float, float]]:
    return MappingProxyType({name: (CATALOGUE[name].sd_abs, CATALOGUE[name].sd_rel) for name in MEASURED})


@dataclass(frozen=True)
class Uncertainties:
    """Standard uncertainties in force at a site, all 1 SD in canonical units; defaults of the methods page.

    Attributes
    ----------
    quantities : mapping of str to (float, float)
        Absolute and relative SD of each measured quantity; the larger counts [canonical unit, 1].
    random : mapping of str to float
        Share of that SD that differs from sample to sample; the rest is systematic and cancels in a difference
        by one method. 1 where not named [0-1].
    fio2 : mapping of int to float
        By device code; common practice [0-1].
    flow : mapping of int to (float, float)
        Precision and accuracy of cardiac output by method code, relative [0-1].
    hb_other_method : float
        SD of haemoglobin by another method than the value it is compared with, relative [0-1].
    growth : mapping of str to float
        How the SD of a carried value grows with age, added in quadrature as for a random walk; relative for
        haemoglobin, flow and dyshaemoglobins, absolute for temperature [per square root of an hour].
    venous_saturation : float
        SD of the saturation of a venous sample [0-1].
    usual_inactive : float
        SD of the usual inactive share where dyshaemoglobins were never measured [0-1].
    curve : float
        SD of a patient's curve about the modelled one, as displacement; counts where the saturation is calculated
        [1, natural log of PO2].
    """

    quantities: Mapping[str, tuple[float, float]] = field(default_factory=_catalogue_sds)
    # Hb: an analyser repeats to 1 %, but how each sample was drawn and mixed comes with it (common practice): most of
    # the 2 % differs from sample to sample; sO2: repeat SD 0.44 points [1] of 0.8
    random: Mapping[str, float] = field(
        default_factory=lambda: MappingProxyType(
            {"hb": 0.9, "so2": 0.55, "o2hb": 0.55, "cohb": 0.7, "methb": 0.7, "sulfhb": 0.7, "spo2": 0.7}
        )
    )
    fio2: Mapping[int, float] = field(
        default_factory=lambda: MappingProxyType({
            Device.ROOM_AIR: 0.001, Device.VENTILATOR: 0.01, Device.HIGH_FLOW: 0.02, Device.NONINVASIVE: 0.02,
            Device.RESERVOIR_MASK: 0.08, Device.NASAL_CANNULA: 0.05, Device.SIMPLE_MASK: 0.06,
        })
    )  # fmt: skip
    # Thermodilution, mean of three: precision 5 %, accuracy 10 % [2]; other methods 15 % in all [3], half of it random
    flow: Mapping[int, tuple[float, float]] = field(
        default_factory=lambda: MappingProxyType({FlowMethod.THERMODILUTION: (0.05, 0.10)})
    )
    flow_other: tuple[float, float] = (0.075, 0.13)
    hb_other_method: float = 0.04  # CLIA +-4 % (42 CFR 493.931)
    growth: Mapping[str, float] = field(
        default_factory=lambda: MappingProxyType(
            {"hb": 0.01, "flow": 0.05, "temperature": 0.1, "dyshaemoglobins": 0.10}  # common practice
        )
    )
    venous_saturation: float = 0.008  # as in arterial blood; repeat SD of central-venous samples 0.0105 [1]
    usual_inactive: float = 0.012  # common practice: COHb 0.5-3 %, MetHb about 1 %
    # P50 varies by about 1 mmHg of 26.8 between healthy people, more in the ill; common practice
    curve: float = 0.05

    def sd(self, name: str, value: Floats) -> Floats:
        """Standard uncertainty of a fresh value; not for flow and FiO2, see :func:`parts`.

        Parameters
        ----------
        name : str
            Quantity of the catalogue.
        value : ndarray
            Its values [canonical unit].

        Returns
        -------
        ndarray
            1 SD [canonical unit], NaN where the value is missing.
        """
        absolute, relative = self.quantities[name]
        return np.asarray(np.maximum(absolute, relative * np.abs(value)) + 0.0 * value)


DEFAULT = Uncertainties()


class Parts(NamedTuple):
    """Standard uncertainty in three parts: from sample to sample, of the method, and by age [canonical unit]."""

    random: Floats
    systematic: Floats
    growth: Floats

    @property
    def total(self) -> Floats:
        """All three in quadrature [canonical unit]."""
        return np.asarray(np.sqrt(self.random**2 + self.systematic**2 + self.growth**2))


def parts(snapshots: Snapshots, name: str, settings: Uncertainties = DEFAULT) -> Parts:
    """Standard uncertainty of one measured quantity at every row, growth with age included.

    Parameters
    ----------
    snapshots : Snapshots
        The rows.
    name : str
        Quantity of the catalogue.
    settings : Uncertainties
        Those in force.

    Returns
    -------
    Parts
        Random, systematic and by age, 1 SD [canonical unit]; NaN where the value is missing.
    """
    value = snapshots[name]
    age = np.maximum(np.abs(snapshots.age[name]), 0.0)
    if name in ("cardiac_output", "cardiac_index"):
        precision, accuracy = _flow_sds(snapshots.flow_method, settings)
        growth = settings.growth["flow"] * np.sqrt(age)
        return Parts(precision * value, accuracy * value, growth * value)
    sd = fio2_sd(snapshots, settings) if name == "fio2" else settings.sd(name, value)
    share = settings.random.get(name, 1.0)
    return Parts(share * sd, float(np.sqrt(1.0 - share * share)) * sd, _growth(name, value, age, settings))


def _growth(name: str, value: Floats, age: Floats, settings: Uncertainties) -> Floats:
    if name == "temperature":
        return np.asarray(settings.growth["temperature"] * np.sqrt(age))
    key = "dyshaemoglobins" if name in ("cohb", "methb", "sulfhb") else name
    return np.asarray(settings.growth.get(key, 0.0) * np.sqrt(age) * np.abs(value))


def _flow_sds(method: Codes, settings: Uncertainties) -> tuple[Floats, Floats]:
    table = np.array([settings.flow.get(int(m), settings.flow_other) for m in FlowMethod])
    return table[method, 0], table[method, 1]


def fio2_sd(snapshots: Snapshots, settings: Uncertainties = DEFAULT) -> Floats:
    """Standard uncertainty of FiO2 by device at every row.

    Parameters
    ----------
    snapshots : Snapshots
        The rows.
    settings : Uncertainties
        Those in force.

    Returns
    -------
    ndarray
        1 SD [0-1], NaN where FiO2 is missing.
    """
    default = settings.quantities["fio2"][0]
    table = np.array([settings.fio2.get(int(d), default) for d in Device])
    return np.asarray(table[snapshots.device] + 0.0 * snapshots["fio2"])


def input_sds(snapshots: Snapshots, settings: Uncertainties = DEFAULT) -> dict[str, Floats]:
    """Standard uncertainty of every measured quantity at every row.

    Parameters
    ----------
    snapshots : Snapshots
        The rows.
    settings : Uncertainties
        Those in force.

    Returns
    -------
    dict of str to ndarray
        1 SD [canonical unit], NaN where the value is missing.
    """
    return {name: parts(snapshots, name, settings).total for name in MEASURED}


def hb_method(snapshots: Snapshots) -> Codes:
    """How each row's haemoglobin was measured.

    Parameters
    ----------
    snapshots : Snapshots
        The rows.

    Returns
    -------
    ndarray of int8
        1 by the gas analyser, 0 by a blood count, -1 missing [code].
    """
    source = snapshots.source["hb"]
    on_gas = snapshots.readings.site[np.maximum(source, 0)] != Site.NONE
    return np.where(source < 0, -1, on_gas).astype(np.int8)
