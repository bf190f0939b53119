"""Invented courses with a known cause, for tests and training: what truly happened, and what would have been charted.

A course lasts 2 to 5 days. Its cause is a failing lung, a falling haemoglobin, haemoglobin that stops working (carbon
monoxide, methaemoglobin, or a shifted curve), falling flow, two of these, or nothing. Gases are drawn at irregular
times; flow, blood counts and central-venous samples at their own. The noise is that of published repeatability, part of
it fixed for one analyser or method (sources in the catalogue of quantities), with heavier tails than a normal
distribution; values are rounded as on a slip, and some are missing. No person is described.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from .simulated_body import STEPS, Body, Floats, po2_for, true_parts

CAUSES = ("none", *STEPS, "mixed")
_SHARE = (0.25, 0.15, 0.15, 0.15, 0.15, 0.15)
_COLUMNS = 48  # most gases in a course
START = 490_000.0  # h since the epoch: any day
Bools = NDArray[np.bool_]
Random = np.random.Generator
METHODS = ("thermodilution", "pulse_contour", "ultrasound")


@dataclass(frozen=True)
class Courses:
    """Simulated courses: arrays with one row a course, and one column a gas where they have two dimensions.

    ``time`` is in h since the epoch, ``drawn`` says which columns exist, ``last`` is the last of them. ``parts`` is
    what each step truly did from the first gas to the last, relative to delivery at the first.
    """

    time: Floats
    drawn: Bools
    last: NDArray[np.int64]
    cause: NDArray[np.str_]
    detail: NDArray[np.str_]
    body: Body
    parts: dict[str, Floats]
    height: Floats
    weight: Floats
    age: Floats
    vo2_index: Floats

    def __len__(self) -> int:
        return len(self.cause)

    @property
    def fall(self) -> Floats:
        """True fall of delivery from the first gas to the last, share of the first; negative for a rise [1]."""
        rows = np.arange(len(self))
        delivery = self.body.delivery
        return np.asarray(1.0 - delivery[rows, self.last] / delivery[rows, 0])

    @property
    def larger(self) -> NDArray[np.str_]:
        """The step that truly cost most; ``none`` where nothing was done."""
        table = np.stack([self.parts[name] for name in STEPS])
        return np.where(self.cause == "none", "none", np.array(STEPS)[np.argmin(table, axis=0)])


def courses(n: int, seed: int) -> Courses:
    """Make ``n`` courses; the same seed makes the same ones."""
    random = np.random.default_rng(seed)
    time, drawn, hours = _times(n, random)
    cause = random.choice(CAUSES, size=n, p=_SHARE)
    progress = _progress(time, hours, random)
    start = _healthy(n, random)
    end, detail = _failed(start, cause, random)
    body = _path(start, end, progress, random)
    last = drawn.sum(axis=1) - 1
    parts = true_parts(body.at(np.zeros(n, dtype=np.int64)), body.at(last))
    return Courses(
        START + time, drawn, last, cause, detail, body, parts, random.normal(171, 9, n).round(),
        np.clip(random.normal(78, 15, n), 45, 140).round(), np.clip(random.normal(61, 15, n), 18, 92).round(),
        np.clip(random.normal(130, 15, n), 90, 180),
    )  # fmt: skip


def _times(n: int, random: Random) -> tuple[Floats, Bools, Floats]:
    """Irregular times of the gases, median gap 4 h [h]."""
    hours = random.uniform(48.0, 120.0, n)
    gaps = np.clip(np.exp(random.normal(np.log(4.0), 0.45, (n, _COLUMNS))), 1.0, 10.0)
    time = np.cumsum(gaps, axis=1)
    return time, time <= hours[:, np.newaxis], hours


def _progress(time: Floats, hours: Floats, random: Random) -> Floats:
    """How far the cause has got at each time: 0 before it begins, 1 when it is complete; done before the end."""
    onset = random.uniform(0.15, 0.60, len(hours)) * hours
    ramp = np.minimum(np.clip(random.exponential(6.0, len(hours)), 0.5, 24.0), 0.8 * hours - onset)
    return np.clip((time - onset[:, np.newaxis]) / ramp[:, np.newaxis], 0.0, 1.0)


def _healthy(n: int, random: Random) -> Body:
    """The state before the cause."""
    return Body(
        po2=random.uniform(72, 130, n), pco2=np.clip(random.normal(40, 4, n), 30, 55),
        ph=np.clip(random.normal(7.39, 0.04, n), 7.25, 7.50), hb=np.clip(random.normal(10.8, 1.5, n), 8.0, 15.0),
        cohb=random.uniform(0.005, 0.02, n), methb=random.uniform(0.003, 0.012, n),
        index=np.clip(random.normal(3.2, 0.6, n), 2.2, 5.0), p50_offset=random.normal(0.0, 1.0, n),
    )  # fmt: skip


def _failed(start: Body, cause: NDArray[np.str_], random: Random) -> tuple[Body, NDArray[np.str_]]:
    """The state after it, and how it came about."""
    n = len(cause)
    first = np.where(cause == "mixed", random.choice(STEPS, size=n), cause)
    shift = np.array([(STEPS.index(one) + more) % 4 for one, more in zip(
        np.where(np.isin(first, STEPS), first, "lung"), random.integers(1, 4, n), strict=True)])  # fmt: skip
    second = np.where(cause == "mixed", np.array(STEPS)[shift], "none")
    detail = np.where((first == "function") | (second == "function"), random.choice(
        ["cohb", "methb", "shift"], size=n, p=[0.4, 0.4, 0.2]), "")  # fmt: skip
    detail = np.where((cause == "mixed") & (detail == "shift"), "methb", detail)
    end = start
    for chosen, low, high in ((first, 0.10, 0.60), (second, 0.06, 0.50)):
        loss = random.uniform(low, high, n)
        for step in STEPS:
            end = _changed(end, step, np.where(chosen == step, loss, 0.0), detail, random)
    rising = np.isin(cause, ("lung", "haemoglobin", "function")) & (random.random(n) < 0.3)
    return replace(end, index=end.index * np.where(rising, random.uniform(1.05, 1.25, n), 1.0)), detail


def _changed(body: Body, step: str, loss: Floats, detail: NDArray[np.str_], random: Random) -> Body:
    """One step loses a share of what it gave."""
    if step == "haemoglobin":
        return replace(body, hb=body.hb * (1.0 - loss))
    if step == "flow":
        return replace(body, index=body.index * (1.0 - loss))
    if step == "lung":
        worse = po2_for(body, body.saturation * (1.0 - np.minimum(loss, 0.45)))
        return replace(body, po2=np.where(loss > 0.0, worse, body.po2))
    lost = np.minimum(loss, 0.50) * (1.0 - body.cohb - body.methb)
    shifted = (loss > 0.0) & (detail == "shift")
    return replace(
        body,
        cohb=body.cohb + np.where(detail == "cohb", lost, 0.0),
        methb=body.methb + np.where(detail == "methb", lost, 0.0),
        ph=body.ph - np.where(shifted, random.uniform(0.20, 0.40, len(loss)), 0.0),
        pco2=body.pco2 + np.where(shifted, random.uniform(10, 40, len(loss)), 0.0),
        po2=np.where(shifted, random.uniform(48, 62, len(loss)), body.po2),
    )


def _path(start: Body, end: Body, progress: Floats, random: Random) -> Body:
    """From one state to the other, with small true fluctuation from gas to gas."""
    wiggle = {"hb": 0.005, "index": 0.02, "po2": 0.03, "pco2": 0.02}
    low_po2 = np.where((end.ph < start.ph - 0.1) & (end.po2 < start.po2), end.po2, start.po2)
    start = replace(start, po2=low_po2)  # a shift costs something only where PO2 is low all along
    states = {}
    for name in vars(start):
        a, b = getattr(start, name)[:, np.newaxis], getattr(end, name)[:, np.newaxis]
        path = np.exp(np.log(a) + progress * np.log(b / a)) if name == "po2" else a + progress * (b - a)
        factor = np.exp(wiggle.get(name, 0.0) * random.standard_normal(progress.shape))
        states[name] = path * factor
    states["ph"] = states["ph"] + 0.01 * random.standard_normal(progress.shape)
    return Body(**states)
