"""What the tissues made of their supply: extraction and the course of lactate."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .change import RealChange, real_change
from .constants import Constants
from .measurement import Uncertainties
from .readings import Derived, Ints, Snapshots
from .speech import Speech
from .trend import NORMAL, LactateTrend, lactate_trend
from .uncertainty import sds_of_rows

SLOW = 48.0  # h: a half-time or doubling time beyond is not told in hours; working value
CRITICAL_EXTRACTION = 0.60  # Ronco 1993, JAMA 270:1724


@dataclass(frozen=True)
class Use:
    """What the tissues made of it: extraction at both ends and the course of lactate.

    Attributes
    ----------
    extraction : RealChange or None
        Change of O2ER, None where it is not known at both ends [0-1].
    now : float
        O2ER at the end, NaN where not known [0-1].
    lactate : LactateTrend
        Course of lactate in the window.
    worse : bool
        Whether either worsened beyond noise.
    words : str
        Empty where nothing is known.
    """

    extraction: RealChange | None
    now: float
    lactate: LactateTrend
    worse: bool
    words: str


def use_of(
    snapshots: Snapshots, derived: Derived, constants: Constants, settings: Uncertainties, rows: Ints, speech: Speech
) -> Use:
    """Extraction at both ends, lactate over the window.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Standard uncertainties in force.
    rows : ndarray of int64
        Rows of the stay in the window, in time order [row number].
    speech : Speech
        How numbers are said.

    Returns
    -------
    Use
        Numbers and words.
    """
    readings = snapshots.readings
    lactate = lactate_trend(readings.time[rows], readings["lactate"][rows], readings.site[rows], settings)
    known = rows[~np.isnan(derived["o2er"][rows])]
    extraction, now = None, np.nan
    if len(known):
        now = float(derived["o2er"][known[-1]])
    if len(known) > 1:
        sds = sds_of_rows(snapshots, derived, known[[0, -1]], constants, settings)["o2er"]
        extraction = real_change(now - float(derived["o2er"][known[0]]), float(np.hypot(*sds)))
    rising = lactate.kind == "rising" or (lactate.beyond_noise and lactate.decrease < 0.0 and lactate.last >= NORMAL)
    worse = rising or (extraction is not None and bool(extraction.low > 0.0))
    said = [text for text in (_extraction_words(extraction, now, speech), _lactate_words(lactate, speech)) if text]
    return Use(extraction, now, lactate, worse, ", ".join(said))


def _extraction_words(extraction: RealChange | None, now: float, speech: Speech) -> str:
    if not np.isfinite(now):
        return ""
    value = speech.value("o2er", now, with_unit=True)
    beyond = " (near the critical range)" if now >= CRITICAL_EXTRACTION else ""
    if extraction is None or not bool(extraction.beyond_noise):
        return f"extraction is {value}{beyond}"
    return f"extraction {'rose' if extraction.change > 0.0 else 'fell'} to {value}{beyond}"


def _lactate_words(lactate: LactateTrend, speech: Speech) -> str:
    now = speech.value("lactate", lactate.last, with_unit=True)
    if lactate.kind in ("rising", "falling"):
        if lactate.time > SLOW:
            return f"lactate is {lactate.kind} slowly ({now})"
        verb = "doubling" if lactate.kind == "rising" else "halving"
        span = f"{speech.number(lactate.time_low, 0)}–{speech.number(lactate.time_high, 0)}"
        return f"lactate is {lactate.kind} ({now}, {verb} in {speech.number(lactate.time, 0)} h, {span})"
    if lactate.kind == "normal":
        return f"lactate is normal ({now})"
    if lactate.beyond_noise:
        return f"lactate {'fell' if lactate.decrease > 0.0 else 'rose'} to {now}"
    return f"lactate is {now}" if np.isfinite(lactate.last) else ""
