"""From raw columns to content, delivery, extraction, P/F and shunt: the lean core that uncertainties differentiate.

The whole derived table uses the same code, so that a value and its uncertainty cannot part ways.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping

import numpy as np
from numpy.typing import NDArray

from . import content, curve, delivery, exchange, oximetry
from .align import VENOUS, taken
from .constants import DEFAULT, Constants
from .quantities import WITH_SD
from .readings import Floats, Ints, Snapshots

_OWN = (
    "ph", "pco2", "po2", "hb", "so2", "o2hb", "cohb", "methb", "sulfhb", "spo2", "fio2", "cardiac_output",
    "cardiac_index", "height", "weight", "barometric_pressure",
)  # fmt: skip
CHAIN_INPUTS: tuple[str, ...] = (*_OWN, *(f"venous_{name}" for name in VENOUS if name != "lactate"))
"""Raw columns that :func:`oxygen_chain` reads [canonical units], NaN where not measured."""

Raw = Mapping[str, Floats]
Rows = slice | Ints | NDArray[np.bool_]


def chain_inputs(snapshots: Snapshots, constants: Constants = DEFAULT, rows: Rows = slice(None)) -> dict[str, Floats]:
    """The raw columns that content, delivery, extraction, P/F and shunt follow from.

    Parameters
    ----------
    snapshots : Snapshots
        From :func:`~worksheet.oxygen.align.align` [canonical units].
    constants : Constants
        Constants in force; the barometric pressure stands in where none was measured.
    rows : slice or ndarray
        Which rows [row number].

    Returns
    -------
    dict of str to ndarray
        :data:`CHAIN_INPUTS` [canonical units], carried values and the paired venous sample filled in.
    """
    raw = {name: snapshots[name][rows] for name in _OWN}
    pressure = raw["barometric_pressure"]
    raw["barometric_pressure"] = np.where(np.isnan(pressure), constants.barometric_pressure, pressure)
    paired = snapshots.venous_row[rows]
    raw |= {f"venous_{name}": taken(snapshots.readings[name], paired) for name in VENOUS if name != "lactate"}
    return raw


def oxygen_chain(
    raw: Raw, constants: Constants = DEFAULT, wanted: Collection[str] = ("cvo2", *WITH_SD)
) -> dict[str, Floats]:
    """Content, delivery, extraction, P/F and shunt of arterial entries from raw columns, and nothing else.

    Lean on purpose: uncertainties call it once for each input that they move.

    Parameters
    ----------
    raw : mapping of str to ndarray
        :data:`CHAIN_INPUTS` [canonical units].
    constants : Constants
        Constants in force.
    wanted : collection of str
        Which of ``cao2, cvo2, do2, do2i, o2er, pf_ratio, shunt_fraction``; what they do not need is not computed.

    Returns
    -------
    dict of str to ndarray
        The wanted columns [canonical units], NaN where they cannot be derived.
    """
    chain = Chain(raw, constants)
    return {name: chain.column(name) for name in wanted}


class Chain:
    """The chain of one block of rows; each link is made once, when first asked for."""

    def __init__(self, raw: Raw, constants: Constants, made: Raw | None = None) -> None:
        self.raw = raw
        self.constants = constants
        self._made: dict[str, Floats] = dict(made or {})
        self._links: dict[str, Callable[[], Floats]] = {
            "bsa": lambda: delivery.body_surface(raw["height"], raw["weight"], constants),
            "co": lambda: either(raw["cardiac_output"], raw["cardiac_index"] * self.column("bsa")),
            "ci": lambda: either(raw["cardiac_index"], raw["cardiac_output"] / self.column("bsa")),
            "cohb_or_0": lambda: or_zero(raw["cohb"]),
            "methb_or_0": lambda: or_zero(raw["methb"]),
            "so2_curve": self._so2_curve,
            "cao2": lambda: _content(raw["hb"], self.arterial.o2hb, raw["po2"], constants),
            "cvo2": self._cvo2,
            "do2": lambda: delivery.oxygen_delivery(self.column("co"), self.column("cao2")),
            "do2i": lambda: delivery.oxygen_delivery(self.column("ci"), self.column("cao2")),
            "o2er": lambda: delivery.extraction_ratio(self.column("cao2"), self.column("cvo2")),
            "pf_ratio": lambda: exchange.pf_ratio(raw["po2"], raw["fio2"]),
            "pao2_alveolar": self._alveolar,
            "shunt_fraction": self._shunt,
        }
        self._arterial: oximetry.Chosen | None = None
        self._venous: oximetry.Chosen | None = None

    def column(self, name: str) -> Floats:
        """One link of the chain by name."""
        if name not in self._made:
            with np.errstate(all="ignore"):
                self._made[name] = self._links[name]()
        return self._made[name]

    @property
    def arterial(self) -> oximetry.Chosen:
        """Saturation in use of the arterial sample."""
        if self._arterial is None:
            raw = self.raw
            self._arterial = oximetry.choose_saturation(
                raw["so2"], raw["o2hb"], self.column("so2_curve"), raw["spo2"], raw["po2"],
                raw["cohb"], raw["methb"], raw["sulfhb"], self.constants,
            )  # fmt: skip
        return self._arterial

    @property
    def venous(self) -> oximetry.Chosen:
        """Saturation of the paired venous sample; dyshaemoglobins not measured in it are the arterial ones."""
        if self._venous is None:
            cohb, methb, sulfhb = (self.venous_or_arterial(name) for name in ("cohb", "methb", "sulfhb"))
            po2 = self.raw["venous_po2"]
            by_curve = curve_at_37(po2, self.raw["venous_ph"], self.raw["venous_pco2"], cohb, methb, self.constants)
            self._venous = oximetry.choose_saturation(
                self.raw["venous_so2"], self.raw["venous_o2hb"], by_curve, np.nan, po2,
                cohb, methb, sulfhb, self.constants,
            )  # fmt: skip
        return self._venous

    def venous_or_arterial(self, name: str) -> Floats:
        """The venous sample's own value, else the arterial one: the same blood."""
        return either(self.raw[f"venous_{name}"], self.raw[name])

    def _so2_curve(self) -> Floats:
        raw = self.raw
        share = self.column("cohb_or_0"), self.column("methb_or_0")
        return curve.saturation(raw["po2"], raw["ph"], raw["pco2"], 37.0, *share, self.constants)

    @property
    def paired(self) -> bool:
        """Whether any row has a venous sample that content can follow from."""
        return any(not np.all(np.isnan(self.raw[f"venous_{name}"])) for name in ("so2", "o2hb", "po2"))

    def _cvo2(self) -> Floats:
        if not self.paired:
            return np.full(len(self.raw["hb"]), np.nan)
        return _content(self.venous_or_arterial("hb"), self.venous.o2hb, self.raw["venous_po2"], self.constants)

    def _alveolar(self) -> Floats:
        raw = self.raw
        return exchange.alveolar_po2(raw["fio2"], raw["pco2"], raw["barometric_pressure"], self.constants)

    def _shunt(self) -> Floats:
        raw = self.raw
        if np.all(np.isnan(self.column("cvo2"))):
            return self.column("cvo2")
        end = exchange.end_capillary_content(
            raw["hb"], self.arterial.inactive, self.column("pao2_alveolar"), raw["ph"], raw["pco2"],
            self.column("cohb_or_0"), self.column("methb_or_0"), self.constants,
        )  # fmt: skip
        return exchange.shunt_fraction(end, self.column("cao2"), self.column("cvo2"))


def either(first: Floats, second: Floats) -> Floats:
    """The first value, the second where the first is missing.

    Parameters
    ----------
    first, second : ndarray
        Values of one quantity [its unit].

    Returns
    -------
    ndarray
        The values [unchanged], NaN where both are missing.
    """
    return np.where(np.isnan(first), second, first)


def or_zero(value: Floats) -> Floats:
    """The value, 0 where it is missing: for what does not count unless it is known.

    Parameters
    ----------
    value : ndarray
        Values [any unit].

    Returns
    -------
    ndarray
        The values without NaN [unchanged].
    """
    return np.where(np.isnan(value), 0.0, value)


def curve_at_37(po2: Floats, ph: Floats, pco2: Floats, cohb: Floats, methb: Floats, constants: Constants) -> Floats:
    """The curve at 37 °C, with the shifts of the dyshaemoglobins that are known.

    Parameters
    ----------
    po2, pco2 : ndarray
        Oxygen and carbon dioxide partial pressure at 37 °C [mmHg].
    ph : ndarray
        pH at 37 °C [1].
    cohb, methb : ndarray
        Carboxy- and methaemoglobin, share of total, NaN where not known [0-1].
    constants : Constants
        Constants in force.

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN where PO2, pH or PCO2 is.
    """
    return curve.saturation(po2, ph, pco2, 37.0, or_zero(cohb), or_zero(methb), constants)


def _content(hb: Floats, o2hb: Floats, po2: Floats, constants: Constants) -> Floats:
    """Oxygen content; without a PO2 the dissolved part is not counted (flagged by the caller)."""
    return content.oxygen_content(hb, o2hb, or_zero(po2), constants)
