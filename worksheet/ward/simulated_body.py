"""A simple body for simulated courses: its own physiology, apart from the equations that it is used to judge.

The curve is Dash, Korman & Bassingthwaighte 2016 (Eur J Appl Physiol 116:97; the variant of the paper), with carbon
monoxide by Haldane's law and a left shift with methaemoglobin (Darling & Roughton 1942; size from memory). Nothing
here is imported from the worksheet's physiology, so an error there cannot hide.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]

PER_GRAM = 1.39  # mL O2 per gram of active haemoglobin: 4 x 22,394 / 64,458
PER_MMHG = 0.0031  # mL/dL/mmHg: Christoforides & Hedley-Whyte 1969
_STANDARD_P50 = 26.8


@dataclass(frozen=True)
class Body:
    """True state of many patients at many times; arrays of one shape.

    ``po2``, ``pco2`` in mmHg, ``hb`` in g/dL, ``cohb`` and ``methb`` as shares of haemoglobin, ``index`` in L/min/m²,
    ``p50_offset`` in mmHg: the patient's own curve.
    """

    po2: Floats
    pco2: Floats
    ph: Floats
    hb: Floats
    cohb: Floats
    methb: Floats
    index: Floats
    p50_offset: Floats

    @property
    def saturation(self) -> Floats:
        """Functional saturation [0-1]."""
        return saturation(self)

    @property
    def content(self) -> Floats:
        """Arterial oxygen content [mL/dL]."""
        active = 1.0 - self.cohb - self.methb
        return np.asarray(PER_GRAM * self.hb * active * self.saturation + PER_MMHG * self.po2)

    @property
    def delivery(self) -> Floats:
        """Oxygen delivery index [mL/min/m²]."""
        return np.asarray(10.0 * self.index * self.content)

    def at(self, column: int | NDArray[np.int64]) -> Body:
        """The state at one time of each patient."""
        rows = np.arange(len(self.po2))
        return Body(**{name: value[rows, column] for name, value in vars(self).items()})


def half_saturation(ph: Floats, pco2: Floats, methb: Floats, offset: Floats) -> Floats:
    """P50 at 37 °C [mmHg]: Dash 2016, the patient's own offset, and methaemoglobin's left shift."""
    cell = 0.795 * ph + 1.357 - 7.24
    by_ph = _STANDARD_P50 - 25.535 * cell + 10.646 * cell**2 - 1.764 * cell**3
    by_pco2 = _STANDARD_P50 + 0.1273 * (pco2 - 40.0) + 1.083e-4 * (pco2 - 40.0) ** 2
    return np.asarray((by_ph * by_pco2 / _STANDARD_P50 + offset) * np.exp(-0.6 * methb))


def _curve(po2: Floats, p50: Floats) -> Floats:
    power = 2.82 - 1.20 * np.power(10.0, -po2 / 29.25)
    ratio = np.power(np.maximum(po2, 1e-6) / p50, power)
    return np.asarray(ratio / (1.0 + ratio))


def saturation(body: Body) -> Floats:
    """Functional saturation; oxygen and carbon monoxide share the curve (Haldane), solved by halving [0-1]."""
    p50 = half_saturation(body.ph, body.pco2, body.methb, body.p50_offset)
    taken = body.cohb / (1.0 - body.methb)  # of the sites that can bind a gas
    low, high = taken + 1e-9, np.ones_like(taken)
    for _ in range(40):
        middle = 0.5 * (low + high)  # sites with either gas
        too_low = middle < _curve(body.po2 * middle / (middle - taken), p50)
        low, high = np.where(too_low, middle, low), np.where(too_low, high, middle)
    return np.asarray((0.5 * (low + high) - taken) / (1.0 - taken))


def po2_for(body: Body, wanted: Floats) -> Floats:
    """PO2 at which the saturation is as wanted, by halving [mmHg]."""
    low, high = np.full_like(body.po2, 5.0), np.full_like(body.po2, 600.0)
    for _ in range(40):
        middle = 0.5 * (low + high)
        short = saturation(replace(body, po2=middle)) < wanted
        low, high = np.where(short, middle, low), np.where(short, high, middle)
    return np.asarray(0.5 * (low + high))


STEPS = ("lung", "haemoglobin", "function", "flow")


def true_parts(start: Body, end: Body) -> dict[str, Floats]:
    """What each step truly did to delivery, relative to the start [1].

    Log-mean Divisia split (Ang 2004, Energy Policy 32:1131) over flow, haemoglobin, active share and saturation;
    saturation between PO2 and the rest of the curve by the mean of both orders; dissolved oxygen to flow and PO2.
    """
    before, after = start.saturation, end.saturation
    only_po2 = saturation(replace(start, po2=end.po2)), saturation(replace(end, po2=start.po2))
    by_po2 = 0.5 * ((only_po2[0] - before) + (after - only_po2[1]))
    active = 1.0 - start.cohb - start.methb, 1.0 - end.cohb - end.methb
    bound = 10.0 * PER_GRAM * start.index * start.hb * active[0] * before
    bound_end = 10.0 * PER_GRAM * end.index * end.hb * active[1] * after
    mean = _log_mean(bound, bound_end)
    of_saturation = mean * np.log(after / before)
    change = np.where(np.abs(after - before) > 1e-9, after - before, 1.0)
    lung = np.where(np.abs(after - before) > 1e-9, of_saturation * by_po2 / change, mean * by_po2 / before)
    dissolved = 10.0 * PER_MMHG * 0.5
    parts = {
        "lung": lung + dissolved * (start.index + end.index) * (end.po2 - start.po2),
        "haemoglobin": mean * np.log(end.hb / start.hb),
        "function": mean * np.log(active[1] / active[0]) + of_saturation - lung,
        "flow": mean * np.log(end.index / start.index) + dissolved * (start.po2 + end.po2) * (end.index - start.index),
    }
    return {name: part / start.delivery for name, part in parts.items()}


def _log_mean(a: Floats, b: Floats) -> Floats:
    near = np.abs(a - b) < 1e-9 * a
    return np.where(near, a, (a - b) / np.where(near, 1.0, np.log(a / b)))
