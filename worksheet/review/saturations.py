"""The saturations of one arterial sample side by side, and in words whether they can all be true."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from worksheet.oxygen.change import Z95
from worksheet.oxygen.oximetry import dyshaemoglobin_effect
from worksheet.oxygen.plausibility import Finding
from worksheet.oxygen.quantities import CATALOGUE
from worksheet.oxygen.readings import Flag, Ints
from worksheet.ward.display import Display, age_words
from worksheet.ward.sheet import Sheet

_MEASURED = ("so2", "o2hb", "cohb", "methb", "sulfhb", "so2_calculated", "spo2")
COHB_CLEAN, METHB_CLEAN = 0.05, 0.03  # co-oximetry counts as clean below, as for the findings
_WORDS = {
    "so2": "measured in the sample, of haemoglobin that can carry oxygen",
    "o2hb": "measured in the sample, of all haemoglobin",
    "cohb": "carbon monoxide, of all haemoglobin",
    "methb": "methaemoglobin, of all haemoglobin",
    "sulfhb": "sulfhaemoglobin, of all haemoglobin",
    "so2_calculated": "as the analyser calculated it",
    "spo2": "on the finger",
    "so2_from_po2": "by the curve, from this PO2, pH and PCO2",
}
_ABOUT = (  # codes of findings that speak of saturations
    "gap-reading-false", "gap-dyshaemoglobin", "gap-send-co-oximetry", "gap-beyond-methb", "cohb-hidden",
    "hypoxaemia-agreed", "hypoxaemia-occult", "so2-against-curve", "arterial-looks-venous", "calculated-as-measured",
    "fractions-do-not-add",
)  # fmt: skip


@dataclass(frozen=True)
class Saturation:
    """One saturation, what it is and where it comes from."""

    symbol: str
    value: str
    words: str
    origin: str


@dataclass(frozen=True)
class Reconciled:
    """The saturations of one sample and what is concluded."""

    when: str
    lines: tuple[Saturation, ...]
    sentences: tuple[str, ...]
    findings: tuple[Finding, ...]


def reconcile(sheet: Sheet, rows: Ints, display: Display) -> Reconciled | None:
    """The newest arterial sample among ``rows`` that has a saturation; None where there is none."""
    row = _newest(sheet, rows)
    if row < 0:
        return None

    def show(name: str, value: float) -> str:
        return display.value(name, value, with_unit=True) if math.isfinite(value) else "not measured"

    found = tuple(f for f in sheet.findings.of_row(row, show) if f.code in _ABOUT)
    lines = tuple(_lines(sheet, row, display))
    compared = _compared(sheet, row, display, bool(found))
    sentences = (*compared, _on_a_finger(sheet, row, display), _used(sheet, row, display))
    return Reconciled(display.stamp(float(sheet.readings.time[row])), lines, tuple(filter(None, sentences)), found)


def _newest(sheet: Sheet, rows: Ints) -> int:
    rows = rows[sheet.snapshots.arterial[rows]]
    known = np.zeros(len(rows), dtype=np.bool_)
    for name in ("so2", "o2hb", "so2_calculated", "spo2"):
        known |= np.isfinite(sheet.snapshots[name][rows])
    rows = rows[known | np.isfinite(sheet.derived["so2_from_po2"][rows])]
    return int(rows[-1]) if len(rows) else -1


def _lines(sheet: Sheet, row: int, display: Display) -> Iterator[Saturation]:
    for name in (*_MEASURED, "so2_from_po2"):
        table = sheet.derived if CATALOGUE[name].derived else sheet.snapshots
        value = float(table[name][row])
        if math.isfinite(value):
            shown = display.value(name, value, with_unit=True)
            yield Saturation(CATALOGUE[name].symbol, shown, _WORDS[name], _origin(sheet, name, row))


def _on_a_finger(sheet: Sheet, row: int, display: Display) -> str:
    """How far dyshaemoglobins move a reading on the finger, beside what haemoglobin carries; empty without them.

    Their effect alone: without dyshaemoglobins the probe's formula reads high, and that cancels.
    """
    snap, saturation = sheet.snapshots, float(sheet.derived.saturation[row])
    cohb, methb = (float(snap[name][row]) for name in ("cohb", "methb"))
    effect = float(dyshaemoglobin_effect(saturation, cohb, methb))
    if not (cohb >= COHB_CLEAN or methb >= METHB_CLEAN) or not math.isfinite(effect):
        return ""
    carries = saturation * (1 - float(sheet.derived.inactive[row]))
    moved, shown, held = (display.number(100 * x, 0) for x in (abs(effect), min(saturation + effect, 1.0), carries))
    return (
        f"These dyshaemoglobins alone move a two-wavelength finger probe about {moved} points "
        f"{'down' if effect < 0 else 'up'}, to about {shown} %, while {held} % of haemoglobin carries oxygen."
    )


def _origin(sheet: Sheet, name: str, row: int) -> str:
    if CATALOGUE[name].derived:
        return "derived"
    age = float(sheet.snapshots.age[name][row])
    if age == 0:
        return "this sample"
    return f"carried, {age_words(age)} old" if age > 0 else f"read {age_words(age)} later"


def _compared(sheet: Sheet, row: int, display: Display, explained: bool) -> Iterator[str]:
    """Each pair of saturations against the noise of both; a gap that a finding explains is left to the finding."""
    finger = float(sheet.snapshots["spo2"][row])
    if not math.isfinite(finger):
        yield "No reading on the finger within reach, so there is nothing to compare the sample with."
        return
    spo2_sd = float(sheet.settings.sd("spo2", np.array(finger)))
    for name, other, words in (
        ("gap_measured", "so2", "the measured saturation"),
        ("gap_calculated", "so2", "the calculated one"),
    ):
        gap = float(sheet.derived[name][row])
        if math.isfinite(gap):
            half = Z95 * math.hypot(spo2_sd, float(sheet.settings.sd(other, np.array(finger))))
            yield _gap_words(gap, half, words, display, explained)


def _gap_words(gap: float, half: float, words: str, display: Display, explained: bool) -> str:
    noise = f"{display.number(100 * half, 0)} points"
    if abs(gap) <= half:
        return f"Finger and {words} agree within their noise (± {noise})."
    side = "below" if gap > 0 else "above"
    said = f"The finger reads {display.number(abs(100 * gap), 0)} points {side} {words}, more than noise (± {noise})"
    return f"{said}." if explained else f"{said}; nothing measured here explains it."


def _used(sheet: Sheet, row: int, display: Display) -> str:
    flags = int(sheet.derived.flags[row])
    if flags & Flag.SATURATION_FROM_FINGER:
        source = "the finger's saturation, because the sample has none"
    elif flags & Flag.SATURATION_CALCULATED:
        source = "the curve at this PO2, because saturation was not measured"
    elif math.isfinite(float(sheet.derived.saturation[row])):
        source = "the saturation measured in the sample"
    else:
        return ""
    inactive = display.number(100 * float(sheet.derived.inactive[row]), 1)
    assumed = " (assumed: never measured)" if flags & Flag.DYSHAEMOGLOBINS_ASSUMED else ""
    return f"Content uses {source}, and takes {inactive} % of haemoglobin as unable to carry oxygen{assumed}."
