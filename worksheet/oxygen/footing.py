"""Both ends of a comparison on one footing: what was measured at one end only must not look like a change."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from .constants import Constants
from .factors import Route, RowFactors
from .ledger_table import Level, Note
from .measurement import hb_method
from .readings import Bools, Codes, Derived, Ints, Snapshots
from .shapley import Factors

CONTENT_FLOW = 0.1  # ten times this is one: supply is then content itself
# PO2 not known at an end: the curve sees the same at both
_NO_CURVE = {"po2": 100.0, "ph": 7.4, "pco2": 40.0, "cohb": 0.0, "methb": 0.0}


@dataclass(frozen=True)
class Pair:
    """Both ends of each comparison on one footing."""

    start_row: Ints
    end_row: Ints
    start: Factors
    end: Factors
    notes: Ints

    @classmethod
    def of(
        cls, rows: RowFactors, snapshots: Snapshots, derived: Derived, first: Ints, last: Ints, level: Codes,
        constants: Constants, unloading: bool,
    ) -> Pair:  # fmt: skip
        """Both ends of each comparison, from the rows' factors [units of the attributes]."""
        start, end = (_end(rows, derived, at, level, constants, unloading) for at in (first, last))
        start, end = _same_dyshaemoglobins(rows, first, last, start, end)
        start, end = _without_po2(*_same_shift(start, end))
        return cls(first, last, start, end, _notes(rows, snapshots, first, last, level))


def _end(rows: RowFactors, derived: Derived, at: Ints, level: Codes, constants: Constants, unloading: bool) -> Factors:
    flow = np.where(level == Level.DO2I, rows.index[at], np.where(level == Level.DO2, rows.output[at], CONTENT_FLOW))
    one = Factors.of(
        flow, rows.hb[at], rows.active[at], rows.saturation[at], rows.po2[at], rows.ph[at], rows.pco2[at],
        rows.cohb[at], rows.methb[at], 37.0, np.isin(rows.route[at], (Route.O2HB, Route.SO2)),
    )  # fmt: skip
    if not unloading:
        return one
    held = np.full(len(at), constants.end_capillary_po2)
    capacity = constants.hufner * one.hb * one.active
    free = derived["extractable_o2"][at] - constants.o2_solubility * (one.po2 - held)
    return replace(one, held=held, bound=one.saturation - free / capacity)


def _same_dyshaemoglobins(
    rows: RowFactors, first: Ints, last: Ints, start: Factors, end: Factors
) -> tuple[Factors, Factors]:
    """Known at one end only: both ends use the known ones; a measured O2Hb keeps its meaning."""
    known, o2hb = (rows.dys_known[first], rows.dys_known[last]), (rows.route[first], rows.route[last])
    start_from_end, end_from_start = known[1] & ~known[0], known[0] & ~known[1]
    return (
        _with_dyshaemoglobins(start, end, start_from_end, o2hb[0] == Route.O2HB),
        _with_dyshaemoglobins(end, start, end_from_start, o2hb[1] == Route.O2HB),
    )


def _with_dyshaemoglobins(one: Factors, other: Factors, where: Bools, by_o2hb: Bools) -> Factors:
    if not np.any(where):
        return one
    active = np.where(where, other.active, one.active)
    saturation = np.where(where & by_o2hb, np.minimum(one.saturation * one.active / active, 1.0), one.saturation)
    return replace(
        one, active=active, saturation=saturation,
        cohb=np.where(where, other.cohb, one.cohb), methb=np.where(where, other.methb, one.methb),
    )  # fmt: skip


def _same_shift(start: Factors, end: Factors) -> tuple[Factors, Factors]:
    """PH and PCO2 missing at one end: taken as the same; at both: as usual."""
    pairs = []
    for name, usual in (("ph", 7.4), ("pco2", 40.0)):
        a, b = getattr(start, name), getattr(end, name)
        pairs.append((name, np.where(np.isnan(a), np.where(np.isnan(b), usual, b), a),
                      np.where(np.isnan(b), np.where(np.isnan(a), usual, a), b)))  # fmt: skip
    return replace(start, **{n: a for n, a, _ in pairs}), replace(end, **{n: b for n, _, b in pairs})


def _without_po2(start: Factors, end: Factors) -> tuple[Factors, Factors]:
    """PO2 missing at an end: nothing dissolved is counted at either, and the curve sees no change."""
    missing = np.isnan(start.po2 + end.po2)
    if not np.any(missing):
        return start, end
    same = {name: np.where(missing, usual, getattr(start, name)) for name, usual in _NO_CURVE.items()}
    other = {name: np.where(missing, usual, getattr(end, name)) for name, usual in _NO_CURVE.items()}
    held = _NO_CURVE["po2"]
    return (
        replace(start, **same, measured=start.measured | missing, held=np.where(missing, held, start.held)),
        replace(end, **other, measured=end.measured | missing, held=np.where(missing, held, end.held)),
    )


def _notes(rows: RowFactors, snapshots: Snapshots, first: Ints, last: Ints, level: Codes) -> Ints:
    """What each comparison rests on; see :class:`Note`."""
    flow = level > Level.CAO2
    known = rows.dys_known[first], rows.dys_known[last]
    route = rows.route[first], rows.route[last]
    method = hb_method(snapshots)
    flow_method = snapshots.flow_method[first], snapshots.flow_method[last]
    same_flow = _same_source(snapshots, "cardiac_output", first, last) | _same_source(
        snapshots, "cardiac_index", first, last
    )
    said = {
        Note.HB_NOT_REMEASURED: _same_source(snapshots, "hb", first, last),
        Note.FLOW_NOT_REMEASURED: flow & same_flow,
        Note.DYSHAEMOGLOBINS_NOT_REMEASURED: (known[0] != known[1]) | _same_source(snapshots, "cohb", first, last),
        Note.DYSHAEMOGLOBINS_ASSUMED: ~known[0] & ~known[1],
        Note.FLOW_MISSING: ~flow,
        Note.SATURATION_CALCULATED: (route[0] == Route.CURVE) | (route[1] == Route.CURVE),
        Note.SATURATION_BY_TWO_WAYS: route[0] != route[1],
        Note.HB_BY_TWO_METHODS: method[first] != method[last],
        Note.FLOW_BY_TWO_METHODS: flow & (flow_method[0] != flow_method[1]),
        Note.FLOW_METHOD_UNKNOWN: flow & ((flow_method[0] == 0) | (flow_method[1] == 0)),
        Note.PO2_MISSING: np.isnan(rows.po2[first] + rows.po2[last]),
        Note.SHIFT_UNKNOWN: np.isnan(rows.ph[first] + rows.ph[last] + rows.pco2[first] + rows.pco2[last]),
    }
    bits = np.zeros(len(first), dtype=np.int64)
    for bit, where in said.items():
        bits |= np.where(where, np.int64(bit), np.int64(0))
    return bits


def _same_source(snapshots: Snapshots, name: str, first: Ints, last: Ints) -> Bools:
    """Whether both ends took a value from one and the same row."""
    source = snapshots.source[name]
    return np.asarray((source[first] >= 0) & (source[first] == source[last]))
