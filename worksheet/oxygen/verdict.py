"""What a review window says, in one or two sentences: no score, no order, no diagnosis."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from .change import Z95, RealChange, probability_of_fall, real_change
from .constants import Constants
from .doubts import DOUBTS, doubts
from .finding_table import Findings
from .judgement import MATERIAL, NONE, UNDETERMINED, Judgement, Review, judge, limiting_steps, review
from .ledger_table import STEPS, UNITS, Ledger, Level, Note
from .measurement import DEFAULT, Uncertainties
from .readings import Derived, Flag, Ints, Snapshots
from .speech import PLAIN, Speech, age, joined
from .use import Use, use_of

__all__ = [
    "DOUBTS",
    "Evidence",
    "Judgement",
    "Review",
    "Use",
    "Verdict",
    "judge",
    "limiting_steps",
    "review",
    "verdict",
]

QUANTITY = {Level.DO2I: "do2i", Level.DO2: "do2", Level.CAO2: "cao2"}
_NAMES = {Level.DO2I: "Delivery", Level.DO2: "Delivery", Level.CAO2: "Arterial oxygen content"}


@dataclass(frozen=True)
class Evidence:
    """One step's part in the change.

    Attributes
    ----------
    step : str
        Of ``ledger.STEPS``.
    change, sd : float
        Contribution in the ledger and its SD [unit of the level].
    share, sd_share : float
        The contribution as it is judged and its SD, of the supply at the start [1].
    real, material : bool
        Whether a loss is beyond noise, and at least 5 % of the supply at the start.
    words : str
        What changed, with the measured values.
    """

    step: str
    change: float
    sd: float
    share: float
    sd_share: float
    real: bool
    material: bool
    words: str

    @property
    def interval(self) -> tuple[float, float]:
        """95 % interval of the contribution [unit of the level]."""
        return self.change - Z95 * self.sd, self.change + Z95 * self.sd


@dataclass(frozen=True)
class Verdict:
    """What a window says of one stay.

    Attributes
    ----------
    sentences : tuple of str
        One or two; one more in front where a compared gas is itself asked about.
    limiting_step : str
        As in :func:`limiting_steps`.
    total : RealChange or None
        Change of supply [unit of the level].
    unit : str
        Of the change.
    evidence : tuple of Evidence
        The four steps.
    use : Use
        Extraction and lactate.
    basis : tuple of str
        What is assumed, carried, missing or not re-measured.
    start_supply : float
        Supply at the start [unit of the change].
    """

    sentences: tuple[str, ...]
    limiting_step: str
    total: RealChange | None
    unit: str
    evidence: tuple[Evidence, ...]
    use: Use
    basis: tuple[str, ...]
    start_supply: float = np.nan

    def probability_of_fall(self, share: float = 0.0) -> float:
        """Probability that supply truly fell by more than a share of that at the start.

        Parameters
        ----------
        share : float
            Share of the supply at the start, 0 for any fall [0-1].

        Returns
        -------
        float
            Probability [0-1], NaN where there is nothing to compare.
        """
        if self.total is None:
            return np.nan
        return float(probability_of_fall(self.total.change, self.total.sd, share * self.start_supply))

    @property
    def text(self) -> str:
        """The sentences together."""
        return " ".join(self.sentences)


def verdict(
    snapshots: Snapshots,
    derived: Derived,
    found: Review,
    stay: int,
    constants: Constants,
    settings: Uncertainties = DEFAULT,
    speech: Speech = PLAIN,
    asked: Findings | None = None,
) -> Verdict:
    """The verdict on one stay of a review, in words.

    Parameters
    ----------
    snapshots, derived : Snapshots, Derived
        The rows and what follows from them.
    found : Review
        Of :func:`review`.
    stay : int
        Which stay.
    constants : Constants
        Constants in force.
    settings : Uncertainties
        Standard uncertainties in force.
    speech : Speech
        How numbers and times are said.
    asked : Findings, optional
        Findings about the rows: a gas at either end whose blood or values are asked about is told first.

    Returns
    -------
    Verdict
        Sentences, evidence and what they rest on.
    """
    at = int(np.searchsorted(found.stay, stay))
    if at >= len(found.stay) or found.stay[at] != stay:
        raise KeyError(f"no stay {stay} in this review")
    one, step = found.ledger.take(np.array([at])), str(found.judgement.step[at])
    if one.level[0] == Level.NONE or not one.start_supply[0] > 0.0:
        use = use_of(snapshots, derived, constants, settings, _rows_of(snapshots, stay), speech)
        return Verdict((_NOTHING,), step, None, "", (), use, ())
    rows = _rows_of(snapshots, stay, int(one.start_row[0]), int(one.end_row[0]))
    use = use_of(snapshots, derived, constants, settings, rows, speech)
    evidence = tuple(_evidence(snapshots, derived, found, at, name, speech) for name in STEPS)
    total = real_change(one.total[0], one.sd["total"][0])
    doubted = doubts(snapshots, (int(one.start_row[0]), int(one.end_row[0])), asked, speech)
    sentences = (*doubted, _supply(one, total, snapshots, speech), _cause(step, evidence, total, use))
    basis = _basis(snapshots, derived, one, use, speech)
    start = float(one.start_supply[0])
    return Verdict(sentences, step, total, UNITS[int(one.level[0])], evidence, use, basis, start)


_NOTHING = "Nothing to compare: two arterial gases with haemoglobin are needed."


def _rows_of(snapshots: Snapshots, stay: int, first: int | None = None, last: int | None = None) -> Ints:
    """Rows of a stay in time order, between two of them."""
    rows: Ints = snapshots.order[snapshots.readings.stay[snapshots.order] == stay]
    time = snapshots.readings.time
    if first is None or last is None:
        return rows
    within: Ints = rows[(time[rows] >= time[first]) & (time[rows] <= time[last])]
    return within


def _supply(one: Ledger, total: RealChange, snapshots: Snapshots, speech: Speech) -> str:
    """How supply changed, and whether beyond noise."""
    level = Level(int(one.level[0]))
    name, start = QUANTITY[level], float(one.start_supply[0])
    since = speech.clock(float(snapshots.readings.time[one.start_row[0]]))
    share, half = 100.0 * float(total.change) / start, 100.0 * Z95 * float(total.sd) / start
    if not bool(total.beyond_noise):
        change = f"{speech.number(share, 0, True)} % ± {speech.number(half, 0)}"
        return f"The change of {_NAMES[level].lower()} since {since} is inside measurement noise ({change})."
    verb = "fell" if share < 0.0 else "rose"
    ends = f"{speech.value(name, start)} to {speech.value(name, float(one.end_supply[0]), with_unit=True)}"
    return f"{_NAMES[level]} {verb} {speech.number(abs(share), 0)} % ± {speech.number(half, 0)} since {since} ({ends})."


def _cause(step: str, evidence: tuple[Evidence, ...], total: RealChange, use: Use) -> str:
    """Which step it was, what made up for it, and what the tissues say."""
    by_name = {item.step: item for item in evidence}
    if not step:
        said = "Which step it was cannot be judged from these values"
    elif step == UNDETERMINED:
        lost = [item for item in evidence if item.real and item.material]
        said = (
            f"{joined([item.words for item in lost])} both took supply; which took more cannot be told"
            if len(lost) > 1
            else "No step that was measured lost supply; flow was not measured and could be the cause"
        )
    elif step == NONE:
        said = "No single step lost supply beyond noise"
    else:
        said = _named(by_name[step], evidence, bool(total.high < 0.0))
    return _capital(f"{said}{'; ' + use.words if use.words else ''}.")


def _named(worst: Evidence, evidence: tuple[Evidence, ...], fell: bool) -> str:
    """The step that failed, what else was lost, and what made up for it."""
    losses = -sum(min(item.share, 0.0) for item in evidence if item.real or item is worst)
    others = [item.step for item in evidence if item is not worst and item.real and item.material]
    # flow counts only where supply is delivery: a content that fell is not made up for by flow
    counted = [item for item in evidence if item.change > 0.0]
    gains = [item.words for item in counted if item.share >= MATERIAL and item.share > Z95 * item.sd_share]
    if fell:
        said = f"{_part_words(-worst.share / losses)} of the loss is {worst.words}"
        said += f", the rest {joined(others)}" if others else ""
        return said + (f"; {joined(gains)} made up for part of it" if gains else "")
    said = f"{worst.words} took {-100.0 * worst.share:.0f} % of supply"
    said += f", {joined(others)} some more" if others else ""
    return said + (f"; {joined(gains)} made up for it" if gains else "")


def _part_words(share: float) -> str:
    limits = ((0.95, "all"), (0.85, "nearly all"), (0.70, "three quarters"), (0.58, "two thirds"), (0.42, "half"))
    return next((word for least, word in limits if share >= least), "a third")


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def _evidence(snapshots: Snapshots, derived: Derived, found: Review, at: int, step: str, speech: Speech) -> Evidence:
    """One step: its part and what was measured at both ends."""
    source = found.ends
    if step == "flow" and found.ends.level[at] <= Level.CAO2:
        source = found.flow_ends
    if step == "function" and found.ends.notes[at] & Note.DYSHAEMOGLOBINS_NOT_REMEASURED:
        source = found.function_ends
    ends = int(source.start_row[at]), int(source.end_row[at])
    judged = found.judgement
    return Evidence(
        step, float(found.ledger.step(step)[at]), float(found.ledger.sd[step][at]),
        float(judged.part[step][at]), float(judged.sd[step][at]),
        bool(judged.real[step][at]), bool(judged.material[step][at]),
        _step_words(snapshots, derived, step, ends, speech) if min(ends) >= 0 else f"{step} (not measured)",
    )  # fmt: skip


def _step_words(snapshots: Snapshots, derived: Derived, step: str, ends: tuple[int, int], speech: Speech) -> str:
    """What was measured for a step, at the start and at the end."""
    if step == "function":
        if abs(float(derived.inactive[ends[0]] - derived.inactive[ends[1]])) < 0.01:
            return "function (shift of the curve)"
        active = (speech.number(100.0 * (1.0 - float(derived.inactive[row])), 0) for row in ends)
        return f"function (active haemoglobin {' → '.join(active)} %)"
    names = {"lung": ("po2",), "haemoglobin": ("hb",), "flow": ("cardiac_index", "cardiac_output")}[step]
    said = {"lung": "the lung (PaO2", "haemoglobin": "haemoglobin (", "flow": "flow ("}[step]
    for name in names:
        values = [float(snapshots[name][row]) for row in ends]
        if np.all(np.isfinite(values)):
            first = speech.value(name, values[0])
            return f"{said.rstrip()} {first} → {speech.value(name, values[1], with_unit=True)})".replace("( ", "(")
    return {"lung": "the lung"}.get(step, step)


_NOTE_WORDS = (
    (Note.FLOW_MISSING, "flow not measured at both ends: judged on content"),
    (Note.FLOW_NOT_REMEASURED, "flow not re-measured"),
    (Note.HB_NOT_REMEASURED, "haemoglobin not re-measured"),
    (Note.DYSHAEMOGLOBINS_ASSUMED, "dyshaemoglobins not measured: usual share assumed"),
    (Note.DYSHAEMOGLOBINS_NOT_REMEASURED, "dyshaemoglobins not re-measured: taken as unchanged"),
    (Note.SATURATION_CALCULATED, "saturation calculated, not measured"),
    (Note.SATURATION_BY_TWO_WAYS, "saturation obtained in two ways"),
    (Note.HB_BY_TWO_METHODS, "haemoglobin by two methods"),
    (Note.FLOW_BY_TWO_METHODS, "flow by two methods"),
    (Note.FLOW_METHOD_UNKNOWN, "method of flow not recorded: taken as one method"),
    (Note.SHIFT_UNKNOWN, "pH or PCO2 missing at one end: curve taken as unshifted"),
    (Note.PO2_MISSING, "PO2 missing at one end: saturation counted for the lung as a whole"),
)


def _basis(snapshots: Snapshots, derived: Derived, one: Ledger, use: Use, speech: Speech) -> tuple[str, ...]:
    """What is assumed, carried, missing or not re-measured."""
    notes, last = int(one.notes[0]), int(one.end_row[0])
    said = [words for bit, words in _NOTE_WORDS if notes & bit]
    for name, words in (("hb", "haemoglobin"), ("cardiac_output", "flow"), ("cardiac_index", "flow")):
        source, hours = int(snapshots.source[name][last]), float(snapshots.age[name][last])
        if source >= 0 and source != last and abs(hours) > 1.0 / 60.0:
            when = speech.clock(float(snapshots.readings.time[source]))
            said.append(f"{words} from {when} ({age(hours)} {'old' if hours > 0.0 else 'later'})")
    if np.isfinite(use.now) and int(derived.flags[last]) & Flag.CENTRAL_VENOUS:
        said.append(
            "central venous sample: extraction is an estimate; its ± leaves out how far central stands from mixed "
            "venous blood"
        )
    if use.lactate.mixed:
        said.append("arterial and venous lactate taken together")
    return tuple(dict.fromkeys(said))
