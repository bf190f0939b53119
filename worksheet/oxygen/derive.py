"""Snapshots to everything that follows from them, in one vectorised pass.

:func:`oxygen_chain` is the core that uncertainties differentiate: the same code for values and their errors.
Decisions that the equations leave open:

- Content belongs to arterial entries; the venous one to the paired sample, and on a venous row to itself (mixed or
  central venous only). Rows without a sample get what their readings allow: S/F, ROX, body surface.
- A saturation without a PO2 (catheter, co-oximeter alone) gives a content without the dissolved part, flagged: too low
  by about 0.1 mL/dL in venous blood, by up to 2 in arterial blood on pure oxygen.
- Venous blood shares with the arterial what was not measured in it: haemoglobin (flagged) and dyshaemoglobins.
- VO2 is Fick's; the measured one stands in where Fick's cannot be had, and the flag says so.
- Cardiac output and index come from one entry; where one is missing the body surface gives it.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from . import content, curve, delivery, exchange, oximetry
from .align import VENOUS, taken
from .constants import DEFAULT, Constants
from .quantities import DERIVED, WITH_SD
from .readings import Bools, Derived, Device, Flag, Floats, Ints, Site, Snapshots

# mmHg: no adult's blood is outside, even at pH 6.9, 41 °C or with half its haemoglobin holding CO; common practice
P50_OF_BLOOD = (12.0, 50.0)
LOW_FLOW = (Device.NASAL_CANNULA, Device.SIMPLE_MASK, Device.RESERVOIR_MASK)
_OWN = (
    "ph", "pco2", "po2", "hb", "so2", "o2hb", "cohb", "methb", "sulfhb", "spo2", "fio2", "cardiac_output",
    "cardiac_index", "height", "weight", "barometric_pressure",
)  # fmt: skip
_SHARED = ("hb", "cohb", "methb", "sulfhb")
CHAIN_INPUTS: tuple[str, ...] = (*_OWN, *(f"venous_{name}" for name in VENOUS if name != "lactate"))
"""Raw columns that :func:`oxygen_chain` reads [canonical units], NaN where not measured."""
_BLOCK = 32_768  # rows that are worked on at a time: temporaries stay in the processor's cache

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
    chain = _Chain(raw, constants)
    return {name: chain.column(name) for name in wanted}


class _Chain:
    """The chain of one block of rows; each link is made once, when first asked for."""

    def __init__(self, raw: Raw, constants: Constants, made: Raw | None = None) -> None:
        self.raw = raw
        self.constants = constants
        self._made: dict[str, Floats] = dict(made or {})
        self._links: dict[str, Callable[[], Floats]] = {
            "bsa": lambda: delivery.body_surface(raw["height"], raw["weight"], constants),
            "co": lambda: _either(raw["cardiac_output"], raw["cardiac_index"] * self.column("bsa")),
            "ci": lambda: _either(raw["cardiac_index"], raw["cardiac_output"] / self.column("bsa")),
            "cohb_or_0": lambda: _or_zero(raw["cohb"]),
            "methb_or_0": lambda: _or_zero(raw["methb"]),
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
        if name not in self._made:
            with np.errstate(all="ignore"):
                self._made[name] = self._links[name]()
        return self._made[name]

    @property
    def arterial(self) -> oximetry.Chosen:
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
            by_curve = _curve(po2, self.raw["venous_ph"], self.raw["venous_pco2"], cohb, methb, self.constants)
            self._venous = oximetry.choose_saturation(
                self.raw["venous_so2"], self.raw["venous_o2hb"], by_curve, np.nan, po2,
                cohb, methb, sulfhb, self.constants,
            )  # fmt: skip
        return self._venous

    def venous_or_arterial(self, name: str) -> Floats:
        return _either(self.raw[f"venous_{name}"], self.raw[name])

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


def _either(first: Floats, second: Floats) -> Floats:
    return np.where(np.isnan(first), second, first)


def _or_zero(value: Floats) -> Floats:
    return np.where(np.isnan(value), 0.0, value)


def _curve(po2: Floats, ph: Floats, pco2: Floats, cohb: Floats, methb: Floats, constants: Constants) -> Floats:
    """The curve at 37 °C, with the shifts of the dyshaemoglobins that are known."""
    return curve.saturation(po2, ph, pco2, 37.0, _or_zero(cohb), _or_zero(methb), constants)


def _content(hb: Floats, o2hb: Floats, po2: Floats, constants: Constants) -> Floats:
    """Oxygen content; without a PO2 the dissolved part is not counted (flagged by the caller)."""
    return content.oxygen_content(hb, o2hb, _or_zero(po2), constants)


def derive(snapshots: Snapshots, constants: Constants = DEFAULT) -> Derived:
    """All derived quantities of the catalogue for all rows.

    Parameters
    ----------
    snapshots : Snapshots
        From :func:`~worksheet.oxygen.align.align` [canonical units].
    constants : Constants
        Constants in force.

    Returns
    -------
    Derived
        Row i belongs to snapshot i [canonical units]; NaN where something needed is missing.
    """
    n = len(snapshots)
    values = {name: np.empty(n) for name in DERIVED}
    table = Derived(MappingProxyType(values), np.empty(n), np.empty(n), np.empty(n, dtype=np.int64))
    for first in range(0, n, _BLOCK):
        block = slice(first, min(first + _BLOCK, n))
        site = snapshots.readings.site[block]
        if not np.all(site == Site.ARTERIAL):
            for column in (*values.values(), table.saturation, table.inactive):
                column[block] = np.nan
        _everywhere(snapshots, constants, block, table)
        for chosen, fill in ((site == Site.ARTERIAL, _arterial), (site > Site.ARTERIAL, _venous)):
            if np.all(chosen):
                fill(snapshots, constants, block, table)
            elif np.any(chosen):
                fill(snapshots, constants, first + np.flatnonzero(chosen), table)
    return table


def _everywhere(snapshots: Snapshots, constants: Constants, rows: slice, table: Derived) -> None:
    """What needs no sample."""
    spo2, fio2 = snapshots["spo2"][rows], snapshots["fio2"][rows]
    table["bsa"][rows] = delivery.body_surface(snapshots["height"][rows], snapshots["weight"][rows], constants)
    table["sf_ratio"][rows] = exchange.sf_ratio(spo2, fio2)
    table["rox_index"][rows] = exchange.rox_index(spo2, fio2, snapshots["respiratory_rate"][rows])
    high = ~np.isnan(fio2) & (spo2 > exchange.SPO2_LIMIT + 1e-9)
    estimated = np.isin(snapshots.device[rows], LOW_FLOW) & ~np.isnan(fio2)
    table.flags[rows] = _bits(high, Flag.SPO2_ABOVE_97) | _bits(estimated, Flag.FIO2_ESTIMATED)


@np.errstate(all="ignore")
def _arterial(snapshots: Snapshots, constants: Constants, rows: Rows, table: Derived) -> None:
    chain = _Chain(chain_inputs(snapshots, constants, rows), constants, {"bsa": table["bsa"][rows]})
    own = {name: snapshots[name][rows] for name in ("so2_calculated", "mean_airway_pressure", "temperature")}
    columns = _supply(chain, snapshots["vo2_measured"][rows]) | _lung(chain, own) | _function(chain, own)
    for name, column in columns.items():
        table[name][rows] = column
    table.saturation[rows] = chain.arterial.saturation
    table.inactive[rows] = chain.arterial.inactive
    table.flags[rows] |= _arterial_flags(snapshots, chain, columns, rows)


def _supply(chain: _Chain, vo2_measured: Floats) -> dict[str, Floats]:
    cao2, cvo2, raw = chain.column("cao2"), chain.column("cvo2"), chain.raw
    dissolved = content.dissolved_oxygen(raw["po2"], chain.constants)
    fick, fick_index = (delivery.oxygen_consumption(chain.column(flow), cao2, cvo2) for flow in ("co", "ci"))
    gap = delivery.co2_gap(raw["venous_pco2"], raw["pco2"])
    return {
        **{name: chain.column(name) for name in ("cao2", "cvo2", "do2", "do2i", "o2er")},
        "avdo2": cao2 - cvo2,
        "dissolved_share": np.where(cao2 > 0.0, dissolved / cao2, np.nan),
        "vo2": _either(fick, vo2_measured),
        "vo2i": _either(fick_index, vo2_measured / chain.column("bsa")),
        "co2_gap": gap,
        "co2_o2_ratio": delivery.co2_o2_ratio(gap, cao2, cvo2),
    }


def _lung(chain: _Chain, own: Raw) -> dict[str, Floats]:
    raw, alveolar = chain.raw, chain.column("pao2_alveolar")
    return {
        **{name: chain.column(name) for name in ("pf_ratio", "pao2_alveolar", "shunt_fraction")},
        "aa_gradient": exchange.aa_gradient(alveolar, raw["po2"]),
        "a_a_ratio": exchange.a_a_ratio(raw["po2"], alveolar),
        "oxygenation_index": exchange.oxygenation_index(raw["fio2"], own["mean_airway_pressure"], raw["po2"]),
    }


def _function(chain: _Chain, own: Raw) -> dict[str, Floats]:
    raw, chosen, by_curve = chain.raw, chain.arterial, chain.column("so2_curve")
    measured = measured_saturation(raw["so2"], raw["o2hb"], raw["cohb"], raw["methb"], raw["sulfhb"])
    warmth = np.where(np.isnan(own["temperature"]), 37.0, own["temperature"])
    extractable = content.extractable_oxygen(
        raw["hb"], chosen.inactive, chosen.saturation, raw["po2"], raw["ph"], raw["pco2"], warmth,
        chain.column("cohb_or_0"), chain.column("methb_or_0"), chain.constants,
    )  # fmt: skip
    return {
        "so2_from_po2": by_curve,
        "gap_calculated": oximetry.gap_calculated(own["so2_calculated"], by_curve, raw["spo2"]),
        "gap_measured": oximetry.gap_measured(measured, raw["spo2"]),
        "p50": _p50(chain, measured),
        "extractable_o2": extractable,
        "predicted_spo2": oximetry.predicted_spo2(chosen.saturation, raw["cohb"], raw["methb"]),
    }


@np.errstate(all="ignore")
def measured_saturation(so2: Floats, o2hb: Floats, cohb: Floats, methb: Floats, sulfhb: Floats) -> Floats:
    """Functional saturation as measured: sO2, else what O2Hb and the measured dyshaemoglobins say.

    Parameters
    ----------
    so2, o2hb : ndarray
        Functional saturation; oxyhaemoglobin, share of total [0-1].
    cohb, methb, sulfhb : ndarray
        Dyshaemoglobins, share of total, NaN where not measured [0-1].

    Returns
    -------
    ndarray
        Functional saturation [0-1]; NaN where it was not measured, whatever a curve may say.
    """
    if np.all(np.isnan(o2hb)):
        return so2
    active = 1.0 - np.maximum(cohb, 0.0) - np.maximum(methb, 0.0) - np.maximum(_or_zero(sulfhb), 0.0)
    ratio = o2hb / active
    return _either(so2, np.where((active > 0.0) & (ratio <= 1.005), np.minimum(ratio, 1.0), np.nan))


def _p50(chain: _Chain, measured: Floats) -> Floats:
    """P50 of the venous pair, which says more, else of the arterial one."""
    raw = chain.raw
    if not chain.paired:
        return p50_of_pair(raw["po2"], measured)
    dys = (chain.venous_or_arterial(name) for name in ("cohb", "methb", "sulfhb"))
    venous = p50_of_pair(raw["venous_po2"], measured_saturation(raw["venous_so2"], raw["venous_o2hb"], *dys))
    rest = np.isnan(venous)
    venous[rest] = p50_of_pair(raw["po2"][rest], measured[rest])
    return venous


@np.errstate(all="ignore")
def p50_of_pair(po2: Floats, so2: Floats) -> Floats:
    """In-vivo P50 that can be meant: on the flat part of the curve noise alone makes values that no blood has.

    Parameters
    ----------
    po2 : ndarray
        Oxygen partial pressure at 37 °C [mmHg].
    so2 : ndarray
        Functional saturation by co-oximetry [0-1].

    Returns
    -------
    ndarray
        P50 [mmHg]; NaN outside a saturation of 0.30 to 0.97, and above 0.95 where it is not 12 to 50 mmHg.
    """
    p50 = curve.p50_in_vivo(po2, so2)
    noise = (so2 > curve.P50_FULL[1]) & ~((p50 >= P50_OF_BLOOD[0]) & (p50 <= P50_OF_BLOOD[1]))
    return np.where(noise, np.nan, p50)


def _arterial_flags(snapshots: Snapshots, chain: _Chain, columns: Raw, rows: Rows) -> Ints:
    raw, there = chain.raw, ~np.isnan(columns["cao2"])
    venous = ~np.isnan(columns["cvo2"])
    known = (chain.arterial.flags & Flag.DYSHAEMOGLOBINS_ASSUMED) == 0
    measured_vo2 = ~np.isnan(columns["vo2"]) & np.isnan(columns["avdo2"] * chain.column("co"))
    bare = (there & np.isnan(raw["po2"])) | (venous & np.isnan(raw["venous_po2"]))
    return (
        np.where(there | ~np.isnan(chain.arterial.saturation), chain.arterial.flags, 0)
        | _bits(there & _carried(snapshots, "hb", rows), Flag.HB_CARRIED)
        | _bits(there & known & _carried_dys(snapshots, rows), Flag.DYSHAEMOGLOBINS_CARRIED)
        | _bits(_carried_flow(snapshots, rows), Flag.FLOW_CARRIED)
        | _bits(snapshots.venous_site[rows] == Site.CENTRAL_VENOUS, Flag.CENTRAL_VENOUS)
        | _bits(
            ~np.isnan(columns["extractable_o2"]) & np.isnan(snapshots["temperature"][rows]), Flag.TEMPERATURE_ASSUMED
        )
        | _bits(
            ~np.isnan(columns["pao2_alveolar"]) & np.isnan(snapshots["barometric_pressure"][rows]),
            Flag.BAROMETRIC_STANDARD,
        )
        | _bits(venous & np.isnan(raw["venous_hb"]), Flag.VENOUS_HB_SHARED)
        | _bits(measured_vo2, Flag.VO2_MEASURED)
        | _bits(bare, Flag.DISSOLVED_NOT_COUNTED)
    )


@np.errstate(all="ignore")
def _venous(snapshots: Snapshots, constants: Constants, rows: Rows, table: Derived) -> None:
    """A venous row by itself: its curve and P50; its content where it is mixed or central venous blood."""
    own = {name: snapshots.readings[name][rows] for name in VENOUS}
    chain = _Chain(
        {**{f"venous_{name}": column for name, column in own.items()}, **{n: snapshots[n][rows] for n in _SHARED}},
        constants,
    )
    central = snapshots.readings.site[rows] != Site.VENOUS
    dys = [chain.venous_or_arterial(name) for name in ("cohb", "methb", "sulfhb")]
    measured = measured_saturation(own["so2"], own["o2hb"], *dys)
    table["so2_from_po2"][rows] = _curve(own["po2"], own["ph"], own["pco2"], dys[0], dys[1], constants)
    table["p50"][rows] = p50_of_pair(own["po2"], measured)
    content_there = np.where(central, chain.column("cvo2"), np.nan)
    table["cvo2"][rows] = content_there
    table.saturation[rows] = chain.venous.saturation
    table.inactive[rows] = chain.venous.inactive
    there = ~np.isnan(content_there)
    table.flags[rows] |= (
        np.where(np.isnan(chain.venous.saturation), 0, chain.venous.flags)
        | _bits(there & _carried(snapshots, "hb", rows), Flag.HB_CARRIED)
        | _bits(there & _carried_dys(snapshots, rows), Flag.DYSHAEMOGLOBINS_CARRIED)
        | _bits(there & np.isnan(own["po2"]), Flag.DISSOLVED_NOT_COUNTED)
    )


def _carried(snapshots: Snapshots, name: str, rows: Rows) -> Bools:
    source = snapshots.source[name][rows]
    own = np.arange(rows.start, rows.stop) if isinstance(rows, slice) else rows
    return np.asarray((source >= 0) & (source != own))


def _carried_flow(snapshots: Snapshots, rows: Rows) -> Bools:
    return _carried(snapshots, "cardiac_output", rows) | _carried(snapshots, "cardiac_index", rows)


def _carried_dys(snapshots: Snapshots, rows: Rows) -> Bools:
    return _carried(snapshots, "cohb", rows) | _carried(snapshots, "methb", rows)


def _bits(where: Bools, flag: Flag) -> Ints:
    return where * np.int64(flag)
