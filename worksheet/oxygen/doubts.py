"""Doubts about the gases that a comparison rests on: told before anything is concluded from them."""

from __future__ import annotations

from collections.abc import Mapping

from .finding_table import Findings
from .readings import Snapshots
from .speech import Speech, joined

# Findings that question the blood or the values that supply is worked out from, not those about the finger
DOUBTS: Mapping[str, str] = {
    "arterial-looks-venous": "it looks venous",
    "values-of-another-patient": "its values may be another patient's",
    "po2-above-alveolar": "its PaO2 is above what FiO2 allows",
    "so2-against-curve": "its saturation does not go with its PO2",
    "po2-looks-like-kpa": "its PO2 may be in another unit",
    "po2-looks-like-mmhg": "its PO2 may be in another unit",
    "fractions-do-not-add": "its fractions do not add up",
    "hb-jump": "its haemoglobin jumped without a recorded cause",
}


def doubts(snapshots: Snapshots, ends: tuple[int, int], asked: Findings | None, speech: Speech) -> tuple[str, ...]:
    """That a gas which a comparison rests on is itself asked about.

    Parameters
    ----------
    snapshots : Snapshots
        The rows.
    ends : (int, int)
        The two rows compared [row number].
    asked : Findings or None
        Findings about the rows.
    speech : Speech
        How times are said.

    Returns
    -------
    tuple of str
        One sentence [words], or none where neither gas is in doubt.
    """
    said = []
    for row, where in zip(ends, ("starts", "ends"), strict=True):
        why = [words for code, words in DOUBTS.items() if asked is not None and row in asked.rows.get(code, ())]
        if why:
            clock = speech.clock(float(snapshots.readings.time[row]))
            said.append(f"the gas of {clock}, with which the comparison {where}, is in doubt ({joined(why)})")
    text = "; ".join(said)
    return (f"{text[:1].upper()}{text[1:]}: settle that before the rest is relied on.",) if said else ()
