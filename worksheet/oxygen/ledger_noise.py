"""How sure each contribution of a ledger is: first order, with what both ends share cancelling.

Each step is differentiated by each factor at each end (closed form; the curve by its slopes). A value carried into
both ends is one measurement; the systematic part of one method is one error; the rest is independent.
"""

from __future__ import annotations

import numpy as np

from .constants import Constants
from .curve_split import PER_METHB, SLOPES
from .domain import Floats, quiet
from .factors import Route, RowFactors
from .measurement import Uncertainties
from .pair_noise import Noise, pair_noise
from .readings import Codes, Ints, Snapshots
from .shapley import BOUND, GAUSS, Factors, Split, bound_values

STEPS = ("lung", "haemoglobin", "function", "flow", "residual", "shift", "saturation")
Gradient = dict[str, tuple[Floats, Floats]]  # input: derivative by its value at the start and at the end


@quiet
def step_sds(
    snapshots: Snapshots, rows: RowFactors, first: Ints, last: Ints, level: Codes, start: Factors, end: Factors,
    found: Split, constants: Constants, settings: Uncertainties,
) -> dict[str, Floats]:  # fmt: skip
    """Standard uncertainty of each step of each comparison, of the total and of the residual.

    Parameters
    ----------
    snapshots : Snapshots
        The rows.
    rows : RowFactors
        Their factors.
    first, last : ndarray of int64
        Rows of the two ends [row number].
    level : ndarray of int8
        In what each comparison is counted [code].
    start, end : Factors
        The two ends on one footing [units of the attributes].
    found : Split
        The split of the change.
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Standard uncertainties in force.

    Returns
    -------
    dict of str to ndarray
        1 SD of lung, haemoglobin, function, flow, residual, shift, saturation and total [unit of the level].
    """
    gradients = _gradients(start, end, found, constants)
    gradients["total"] = _added(*(gradients[name] for name in ("lung", "haemoglobin", "function", "flow")))
    noise = pair_noise(snapshots, rows, first, last, level, start, end, settings)
    return {
        name: _sd(_raw(gradient, start, end, rows, first, last, found), noise) for name, gradient in gradients.items()
    }


def _gradients(start: Factors, end: Factors, found: Split, constants: Constants) -> dict[str, Gradient]:
    """Derivatives of each step by flow, hb, active, unloading (saturation), ln PO2 and displacement."""
    scale = 0.5 * 10.0 * constants.hufner
    low, high = bound_values(start), bound_values(end)
    first = {name: _first_level(BOUND.index(name), low, high, scale) for name in BOUND[:3]}
    weight = _weight_gradient(low, high, scale)
    parts, slopes = found.saturation_parts, found.slopes
    value = _weight(low, high, scale)
    g0, g1, p0, p1, h0, h1, bend = (slopes[name] for name in SLOPES)
    shift_part = np.asarray(sum(parts[name] for name in parts if name not in ("po2", "residual")))
    lung = _scaled(weight, parts["po2"]) | {
        "ln_po2": (-value * p0, value * p1),
        "shift": (-value * bend, -value * bend),
    }
    lung = _added(lung, _dissolved(start, end, constants))
    shift = _scaled(weight, shift_part) | {
        "ln_po2": (-value * (g0 - p0), value * (g1 - p1)),
        "shift": (value * (h0 + bend), value * (bend - h1)),
    }
    residual = _scaled(weight, parts["residual"]) | {
        "unloading": (-value, value), "ln_po2": (value * g0, -value * g1), "shift": (-value * h0, value * h1)
    }  # fmt: skip
    measured = start.measured | end.measured
    residual = {name: (a * measured, b * measured) for name, (a, b) in residual.items()}
    shift = _added(first["active"], shift)
    return {
        "lung": lung, "haemoglobin": first["hb"], "function": _added(shift, residual),
        "flow": _added(first["flow"], _dissolved_flow(start, end, constants)),
        "residual": residual, "shift": shift, "saturation": {"unloading": (-value, value)},
    }  # fmt: skip


def _along(low: tuple[Floats, ...], high: tuple[Floats, ...], t: float) -> list[Floats]:
    return [a + t * (b - a) for a, b in zip(low, high, strict=True)]


def _product(values: list[Floats], without: tuple[int, ...]) -> Floats:
    kept = [value for i, value in enumerate(values) if i not in without]
    result = kept[0]
    for value in kept[1:]:
        result = result * value
    return result


def _first_level(own: int, low: tuple[Floats, ...], high: tuple[Floats, ...], scale: float) -> Gradient:
    """Derivatives of one factor's contribution by all four factors."""
    change = high[own] - low[own]
    at = {t: _along(low, high, t) for t in GAUSS}
    weight = np.asarray(scale * sum(_product(at[t], (own,)) for t in GAUSS))
    result: Gradient = {BOUND[own]: (-weight, weight)}
    for other in range(4):
        if other != own:
            pieces = {t: scale * change * _product(at[t], (own, other)) for t in GAUSS}
            result[BOUND[other]] = (
                np.asarray(sum((1.0 - t) * pieces[t] for t in GAUSS)), np.asarray(sum(t * pieces[t] for t in GAUSS))
            )  # fmt: skip
    return result


def _weight(low: tuple[Floats, ...], high: tuple[Floats, ...], scale: float) -> Floats:
    return np.asarray(scale * sum(_product(_along(low, high, t), (3,)) for t in GAUSS))


def _weight_gradient(low: tuple[Floats, ...], high: tuple[Floats, ...], scale: float) -> Gradient:
    """Derivatives of the weight of saturation by flow, hb and active share."""
    at = {t: _along(low, high, t) for t in GAUSS}
    return {
        BOUND[i]: (
            np.asarray(scale * sum((1.0 - t) * _product(at[t], (3, i)) for t in GAUSS)),
            np.asarray(scale * sum(t * _product(at[t], (3, i)) for t in GAUSS)),
        )
        for i in range(3)
    }


def _dissolved(start: Factors, end: Factors, constants: Constants) -> Gradient:
    """Derivatives of the dissolved part of PO2; by ln PO2, like the curve."""
    scale = 10.0 * constants.o2_solubility
    mean, change = 0.5 * (start.flow + end.flow), end.po2 - start.po2
    return {
        "ln_po2": (-scale * mean * start.po2, scale * mean * end.po2),
        "flow": (0.5 * scale * change, 0.5 * scale * change),
    }


def _dissolved_flow(start: Factors, end: Factors, constants: Constants) -> Gradient:
    """Derivatives of flow's part of the dissolved term."""
    scale = 10.0 * constants.o2_solubility
    mean = 0.5 * (start.po2 + end.po2) - 0.5 * (start.held + end.held)
    half = 0.5 * scale * (end.flow - start.flow)
    return {"flow": (-scale * mean, scale * mean), "ln_po2": (half * start.po2, half * end.po2)}


def _scaled(gradient: Gradient, factor: Floats) -> Gradient:
    return {name: (a * factor, b * factor) for name, (a, b) in gradient.items()}


def _added(*gradients: Gradient) -> Gradient:
    result: Gradient = {}
    for gradient in gradients:
        for name, (a, b) in gradient.items():
            c, d = result.get(name, (0.0, 0.0))
            result[name] = (np.asarray(a + c), np.asarray(b + d))
    return result


def _raw(
    gradient: Gradient, start: Factors, end: Factors, rows: RowFactors, first: Ints, last: Ints, found: Split
) -> Gradient:
    """From factors to what was measured: O2Hb instead of saturation, PO2 and shift behind a calculated saturation."""
    zero = np.zeros_like(start.po2)
    result: dict[str, list[Floats]] = {}
    known = rows.dys_known[first] & rows.dys_known[last]
    sides = ((0, start, rows.route[first], "start"), (1, end, rows.route[last], "end"))
    for side, one, route, slope_name in sides:
        g = {name: gradient.get(name, (zero, zero))[side] for name in (*BOUND, "ln_po2", "shift")}
        calculated = route == Route.CURVE
        by_curve = np.where(calculated, g["unloading"] * found.slopes[slope_name], 0.0)
        by_shift = np.where(calculated, g["unloading"] * found.slopes[f"shift_{slope_name}"], 0.0)
        by_o2hb = route == Route.O2HB
        own = {
            "flow": g["flow"],
            "hb": g["hb"],
            "saturation": np.where(calculated, 0.0, g["unloading"] / np.where(by_o2hb, one.active, 1.0)),
            # dyshaemoglobin also shifts the curve to the left
            "share": g["active"]
            - np.where(by_o2hb, g["unloading"] * one.saturation / one.active, 0.0)
            + np.where(known, PER_METHB * (g["shift"] - by_shift), 0.0),
            "ln_po2": g["ln_po2"] + by_curve,
            "shift": g["shift"] - by_shift,
            "curve": np.where(calculated, g["shift"] - by_shift, 0.0),
        }
        for name, value in own.items():
            result.setdefault(name, []).append(np.asarray(value))
    return {name: (a, b) for name, (a, b) in result.items()}


def _sd(gradient: Gradient, noise: Noise) -> Floats:
    variance = sum(
        a * a * noise[name][0] + b * b * noise[name][1] + 2.0 * a * b * noise[name][2]
        for name, (a, b) in gradient.items()
    )
    return np.asarray(np.sqrt(np.maximum(variance, 0.0)))
