"""Snapshots to everything that follows from them, in one vectorised pass.

The core, from content to shunt, is in :mod:`~worksheet.oxygen.chain`. Decisions that the equations leave open:

- Content belongs to arterial entries; the venous one to the paired sample, and on a venous row to itself (mixed or
  central venous only). Rows without a sample get what their readings allow: S/F, ROX, body surface.
- A saturation without a PO2 (catheter, co-oximeter alone) gives a content without the dissolved part, flagged: too low
  by about 0.1 mL/dL in venous blood, by up to 2 in arterial blood on pure oxygen.
- Venous blood shares with the arterial what was not measured in it: haemoglobin (flagged) and dyshaemoglobins.
- VO2 is Fick's; the measured one stands in where Fick's cannot be had, and the flag says so.
- Cardiac output and index come from one entry; where one is missing the body surface gives it.
"""

from __future__ import annotations

from types import MappingProxyType

import numpy as np

from . import content, delivery, exchange, oximetry
from .align import VENOUS
from .chain import CHAIN_INPUTS, Chain, Raw, Rows, chain_inputs, curve_at_37, either, oxygen_chain
from .constants import DEFAULT, Constants
from .pairs import measured_saturation, p50_of_pair
from .quantities import DERIVED
from .readings import Bools, Derived, Device, Flag, Floats, Ints, Site, Snapshots

__all__ = ["CHAIN_INPUTS", "chain_inputs", "derive", "oxygen_chain", "p50_is_venous"]

LOW_FLOW = (Device.NASAL_CANNULA, Device.SIMPLE_MASK, Device.RESERVOIR_MASK)
_BLOCK = 32_768  # rows that are worked on at a time: temporaries stay in the processor's cache
_SHARED = ("hb", "cohb", "methb", "sulfhb")


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
    chain = Chain(chain_inputs(snapshots, constants, rows), constants, {"bsa": table["bsa"][rows]})
    own = {name: snapshots[name][rows] for name in ("so2_calculated", "mean_airway_pressure", "temperature")}
    columns = _supply(chain, snapshots["vo2_measured"][rows]) | _lung(chain, own) | _function(chain, own)
    for name, column in columns.items():
        table[name][rows] = column
    table.saturation[rows] = chain.arterial.saturation
    table.inactive[rows] = chain.arterial.inactive
    table.flags[rows] |= _arterial_flags(snapshots, chain, columns, rows)


def _supply(chain: Chain, vo2_measured: Floats) -> dict[str, Floats]:
    cao2, cvo2, raw = chain.column("cao2"), chain.column("cvo2"), chain.raw
    dissolved = content.dissolved_oxygen(raw["po2"], chain.constants)
    fick, fick_index = (delivery.oxygen_consumption(chain.column(flow), cao2, cvo2) for flow in ("co", "ci"))
    gap = delivery.co2_gap(raw["venous_pco2"], raw["pco2"])
    return {
        **{name: chain.column(name) for name in ("cao2", "cvo2", "do2", "do2i", "o2er")},
        "avdo2": cao2 - cvo2,
        "dissolved_share": np.where(cao2 > 0.0, dissolved / cao2, np.nan),
        "vo2": either(fick, vo2_measured),
        "vo2i": either(fick_index, vo2_measured / chain.column("bsa")),
        "co2_gap": gap,
        "co2_o2_ratio": delivery.co2_o2_ratio(gap, cao2, cvo2),
    }


def _lung(chain: Chain, own: Raw) -> dict[str, Floats]:
    raw, alveolar = chain.raw, chain.column("pao2_alveolar")
    return {
        **{name: chain.column(name) for name in ("pf_ratio", "pao2_alveolar", "shunt_fraction")},
        "aa_gradient": exchange.aa_gradient(alveolar, raw["po2"]),
        "a_a_ratio": exchange.a_a_ratio(raw["po2"], alveolar),
        "oxygenation_index": exchange.oxygenation_index(raw["fio2"], own["mean_airway_pressure"], raw["po2"]),
    }


def _function(chain: Chain, own: Raw) -> dict[str, Floats]:
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


def _p50(chain: Chain, measured: Floats) -> Floats:
    """P50 of the venous pair, which says more, else of the arterial one."""
    raw, own = chain.raw, (chain.raw["cohb"], chain.raw["methb"])
    if not chain.paired:
        return p50_of_pair(raw["po2"], measured, *own)
    venous = _venous_p50(chain)
    rest = np.isnan(venous)
    venous[rest] = p50_of_pair(raw["po2"][rest], measured[rest], *(share[rest] for share in own))
    return venous


def _venous_p50(chain: Chain) -> Floats:
    raw, dys = chain.raw, [chain.venous_or_arterial(name) for name in ("cohb", "methb", "sulfhb")]
    measured = measured_saturation(raw["venous_so2"], raw["venous_o2hb"], *dys)
    return p50_of_pair(raw["venous_po2"], measured, *dys[:2])


@np.errstate(all="ignore")
def p50_is_venous(snapshots: Snapshots, rows: Rows = slice(None), constants: Constants = DEFAULT) -> Bools:
    """Whether the P50 of arterial entries comes from the paired venous sample.

    Parameters
    ----------
    snapshots : Snapshots
        From :func:`~worksheet.oxygen.align.align` [canonical units].
    rows : slice or ndarray
        Which rows [row number].
    constants : Constants
        Constants in force.

    Returns
    -------
    ndarray of bool
        True where the venous pair gives one; elsewhere it is the arterial pair's, if any [bool].
    """
    return np.asarray(~np.isnan(_venous_p50(Chain(chain_inputs(snapshots, constants, rows), constants))))


def _arterial_flags(snapshots: Snapshots, chain: Chain, columns: Raw, rows: Rows) -> Ints:
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
    chain = Chain(
        {**{f"venous_{name}": column for name, column in own.items()}, **{n: snapshots[n][rows] for n in _SHARED}},
        constants,
    )
    central = snapshots.readings.site[rows] != Site.VENOUS
    dys = [chain.venous_or_arterial(name) for name in ("cohb", "methb", "sulfhb")]
    measured = measured_saturation(own["so2"], own["o2hb"], *dys)
    table["so2_from_po2"][rows] = curve_at_37(own["po2"], own["ph"], own["pco2"], dys[0], dys[1], constants)
    table["p50"][rows] = p50_of_pair(own["po2"], measured, *dys[:2])
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
