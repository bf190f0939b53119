"""Noise of what was measured at both ends of a comparison: variances, and what the ends have in common.

A value carried into both ends is one measurement; the systematic part of one method is one error; the rest is
independent.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from .domain import Floats
from .factors import Route, RowFactors
from .measurement import Parts, Uncertainties, hb_method, parts
from .readings import Bools, Codes, Ints, Snapshots
from .supply_factors import Factors

Noise = Mapping[str, tuple[Floats, Floats, Floats]]  # input: variance at the start, at the end, covariance


def pair_noise(
    snapshots: Snapshots, rows: RowFactors, first: Ints, last: Ints, level: Codes, start: Factors, end: Factors,
    settings: Uncertainties,
) -> Noise:  # fmt: skip
    """Variance of each input at both ends and their covariance."""
    sd_po2 = settings.sd("po2", start.po2) / start.po2, settings.sd("po2", end.po2) / end.po2
    same_route = rows.route[first] == rows.route[last]
    shift = tuple(_shift_sd(one, settings) for one in (start, end))
    curve = np.full(len(first), settings.curve)
    both_curve = same_route & (rows.route[first] == Route.CURVE)
    return {
        "flow": _flow_noise(snapshots, rows, first, last, level, start, end, settings),
        "hb": _hb_noise(snapshots, first, last, settings),
        "saturation": _saturation_noise(rows, first, last, same_route, settings),
        "share": _share_noise(snapshots, rows, first, last, settings),
        "ln_po2": _independent(*sd_po2),
        "shift": _independent(*shift),
        # the patient's own curve is the same at both ends: it cancels unless one saturation was measured
        "curve": (curve**2, curve**2, np.where(both_curve, curve**2, 0.0)),
    }


def _independent(a: Floats, b: Floats) -> tuple[Floats, Floats, Floats]:
    return a * a, b * b, np.zeros_like(a)


def _shift_sd(one: Factors, settings: Uncertainties) -> Floats:
    """SD of the displacement that pH and PCO2 give [1, natural log of PO2]."""
    return np.asarray(np.hypot(0.88 * settings.sd("ph", one.ph), 0.048 * settings.sd("pco2", one.pco2) / one.pco2))


def _shared(
    found: Parts, first: Ints, last: Ints, source: Ints, same_method: Bools, age: Floats
) -> tuple[Floats, Floats, Floats]:
    """Variances and covariance of one measured quantity at two rows."""
    same = source[first] == source[last]
    random = np.where(same, found.random[first] * found.random[last], 0.0)
    systematic = np.where(same | same_method, found.systematic[first] * found.systematic[last], 0.0)
    # of two ages of one value the shorter is common to both
    a, b = np.abs(age[first]), np.abs(age[last])
    both_aged = same & (a > 0) & (b > 0)
    growth = np.where(
        both_aged, found.growth[first] * found.growth[last] * np.sqrt(np.minimum(a, b) / np.maximum(a, b)), 0.0
    )
    return found.total[first] ** 2, found.total[last] ** 2, random + systematic + growth


def _hb_noise(snapshots: Snapshots, first: Ints, last: Ints, settings: Uncertainties) -> tuple[Floats, Floats, Floats]:
    """Haemoglobin; by another method than at the start its SD is that between methods."""
    method = hb_method(snapshots)
    same = method[first] == method[last]
    a, b, both = _shared(
        parts(snapshots, "hb", settings), first, last, snapshots.source["hb"], same, snapshots.age["hb"]
    )
    other = (settings.hb_other_method * snapshots["hb"][last]) ** 2
    return a, np.where(same, b, np.maximum(b, other)), both


def _flow_noise(
    snapshots: Snapshots, rows: RowFactors, first: Ints, last: Ints, level: Codes, start: Factors, end: Factors,
    settings: Uncertainties,
) -> tuple[Floats, Floats, Floats]:  # fmt: skip
    """Output or index in use; height and weight are the same at both ends, so their error is common."""
    name = "cardiac_output" if np.any(~np.isnan(snapshots["cardiac_output"])) else "cardiac_index"
    other = "cardiac_index" if name == "cardiac_output" else "cardiac_output"
    relative = _relative(parts(snapshots, name, settings), snapshots[name])
    spare = _relative(parts(snapshots, other, settings), snapshots[other])
    missing = np.isnan(snapshots[name])
    used = Parts(*(np.where(missing, b, a) for a, b in zip(relative, spare, strict=True)))
    source = np.where(missing, snapshots.source[other], snapshots.source[name])
    age = np.where(missing, snapshots.age[other], snapshots.age[name])
    same = snapshots.flow_method[first] == snapshots.flow_method[last]
    a, b, both = _shared(used, first, last, source, same, age)
    flow = level > 1
    surface = np.where((level == 3) & ~(rows.index_own[first] & rows.index_own[last]), _surface_variance(settings), 0.0)
    return tuple(  # type: ignore[return-value]
        np.where(flow, (part + surface) * x * y, 0.0)
        for part, x, y in ((a, start.flow, start.flow), (b, end.flow, end.flow), (both, start.flow, end.flow))
    )


def _relative(found: Parts, value: Floats) -> Parts:
    return Parts(*(part / value for part in found))


def _surface_variance(settings: Uncertainties) -> float:
    """Relative variance of body surface from height and weight (Mosteller's exponents)."""
    height, weight = settings.quantities["height"][1], settings.quantities["weight"][1]
    return (0.5 * height) ** 2 + (0.5 * weight) ** 2


def _saturation_noise(
    rows: RowFactors, first: Ints, last: Ints, same_route: Bools, settings: Uncertainties
) -> tuple[Floats, Floats, Floats]:
    """Measured saturation: O2Hb or sO2 by co-oximetry, SpO2; two ways of measuring share nothing."""
    names = ("so2", "o2hb", "so2", "so2", "spo2")
    sds = np.array([settings.quantities[name][0] for name in names])
    systematic = np.array([1.0 - settings.random.get(name, 1.0) ** 2 for name in names])
    a, b = sds[rows.route[first]], sds[rows.route[last]]
    return a * a, b * b, np.where(same_route, systematic[rows.route[first]] * a * b, 0.0)


def _share_noise(
    snapshots: Snapshots, rows: RowFactors, first: Ints, last: Ints, settings: Uncertainties
) -> tuple[Floats, Floats, Floats]:
    """Inactive share: measured; the usual one (the same error at both ends); or taken over from the other end."""
    known = rows.dys_known[first], rows.dys_known[last]
    usual = np.full(len(first), settings.usual_inactive**2)
    zero = np.zeros(len(first))
    a, b, both = zero, zero, zero
    for name in ("cohb", "methb", "sulfhb"):
        found = Parts(*(np.nan_to_num(part) for part in parts(snapshots, name, settings)))
        age = np.nan_to_num(snapshots.age[name])
        every = np.ones(len(first), dtype=np.bool_)
        x, y, z = _shared(found, first, last, snapshots.source[name], every, age)
        a, b, both = a + x, b + y, both + z
    one, other = known[0] & ~known[1], known[1] & ~known[0]
    neither = ~known[0] & ~known[1]
    a, b = np.where(other, b, a), np.where(one, a, b)
    both = np.where(one, a, np.where(other, b, both))
    return tuple(np.where(neither, usual, part) for part in (a, b, both))  # type: ignore[return-value]
