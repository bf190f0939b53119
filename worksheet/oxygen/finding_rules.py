"""The rules behind the findings: which rows, and the numbers that the words need.

Each rule is a function of a :class:`Case` that returns a :class:`Hit`. Limits without a source are common practice.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import NamedTuple

import numpy as np

from . import acidbase, curve, measurement, oximetry
from .align import Line, earlier, taken
from .constants import Constants
from .derive import P50_OF_BLOOD, measured_saturation
from .domain import quiet
from .quantities import CATALOGUE, MMHG_PER_KPA
from .readings import Bools, Derived, Device, Event, Flag, Floats, Ints, Site, Snapshots

TWO_SIDED = 1.96  # 95 %
_P50_AMONG_PATIENTS = 0.05  # 1 SD of ln P50 about the modelled curve: about 1 mmHg of 26.8, more in the ill
_HILL = 2.7  # slope of the curve, for the size of an uncertainty only
CLOCK_SKEW = 5 / 60  # h that two clocks may differ by
SAME_SAMPLE = 24.0  # h within which equal values are one sample twice
_REPEATED = ("ph", "pco2", "po2", "hb", "so2", "o2hb", "lactate")

Numbers = Mapping[str, tuple[str, Floats]]


class Hit(NamedTuple):
    """Rows of a finding and the numbers for its words: name → (quantity, or "" for a plain number; values)."""

    where: Bools
    numbers: Numbers


@dataclass(frozen=True)
class Case:
    """The rows that rules look at: all of them samples, as columns."""

    snapshots: Snapshots
    derived: Derived
    constants: Constants
    rows: Ints
    line: Line
    now: float | None = None
    _columns: dict[str, Floats] = field(default_factory=dict)

    def own(self, name: str) -> Floats:
        """What was measured on the row itself."""
        return self._column(f"own {name}", lambda: self.snapshots.readings[name][self.rows])

    def known(self, name: str) -> Floats:
        """What was known at the row, carried values included."""
        return self._column(name, lambda: self.snapshots[name][self.rows])

    def result(self, name: str) -> Floats:
        """What was derived for the row."""
        return self._column(f"result {name}", lambda: self.derived[name][self.rows])

    def flagged(self, flag: Flag) -> Bools:
        """Whether the row's numbers rest on this."""
        return np.asarray((self.derived.flags[self.rows] & flag) != 0)

    @property
    def site(self) -> Ints:
        """Site codes."""
        return self.snapshots.readings.site[self.rows].astype(np.int64)

    @property
    def arterial(self) -> Bools:
        """Whether the row is an arterial sample."""
        return np.asarray(self.site == Site.ARTERIAL)

    def so2(self) -> Floats:
        """Functional saturation as measured on the row's own sample."""
        own, known = (self.own("so2"), self.own("o2hb")), (self.known(name) for name in ("cohb", "methb", "sulfhb"))
        return self._column("measured", lambda: measured_saturation(*own, *known))

    def by_curve(self) -> Floats:
        """The curve at the sample's own PO2."""
        return self.result("so2_from_po2")

    def calculated(self) -> Floats:
        """The analyser's calculated saturation, else the curve's."""
        given = self.own("so2_calculated")
        return np.where(np.isnan(given), self.by_curve(), given)

    def co_oximetry(self) -> Bools:
        """Whether COHb and MetHb are known (own or carried)."""
        return np.asarray(~np.isnan(self.known("cohb") + self.known("methb")))

    def curve_at(self, po2: Floats) -> Floats:
        """Saturation at another PO2 of the same sample; a missing pH or PCO2 counts as usual here, to judge units."""
        ph, pco2 = _or(self.own("ph"), 7.4), _or(self.own("pco2"), 40.0)
        return curve.saturation(po2, ph, np.clip(pco2, 20.0, 80.0), 37.0, 0.0, 0.0, self.constants)

    def _column(self, key: str, make: Callable[[], Floats]) -> Floats:
        if key not in self._columns:
            self._columns[key] = make()
        return self._columns[key]


RULES: dict[str, Callable[[Case], Hit]] = {}
"""Rules that look at one row and what goes with it, by code."""


def _rule(code: str) -> Callable[[Callable[[Case], Hit]], Callable[[Case], Hit]]:
    def register(rule: Callable[[Case], Hit]) -> Callable[[Case], Hit]:
        RULES[code] = quiet(rule)
        return RULES[code]

    return register


def _or(value: Floats, usual: float) -> Floats:
    return np.where(np.isnan(value), usual, value)


def _sd(name: str, value: Floats) -> Floats:
    return CATALOGUE[name].default_sd(value)


@_rule("po2-above-alveolar")
def _po2_above_alveolar(case: Case) -> Hit:
    """PaO2 beyond PAO2 by more than the two can be off."""
    po2, alveolar, fio2, pco2 = case.own("po2"), case.result("pao2_alveolar"), case.known("fio2"), case.known("pco2")
    r = case.constants.respiratory_quotient
    pressure = _or(case.known("barometric_pressure"), case.constants.barometric_pressure)
    fio2_sd = measurement.parts(case.snapshots, "fio2").total[case.rows]
    per_fio2 = pressure - case.constants.water_vapour - pco2 * (1.0 - 1.0 / r)
    variance = (
        _sd("po2", po2) ** 2
        + (per_fio2 * fio2_sd) ** 2
        + ((fio2 + (1.0 - fio2) / r) * _sd("pco2", pco2)) ** 2
        + (pco2 * (1.0 - fio2) / r**2 * 0.1) ** 2  # R 0.7 to 1.0
        + (fio2 * np.where(case.flagged(Flag.BAROMETRIC_STANDARD), 10.0, 2.0)) ** 2  # weather
    )
    where = case.arterial & (po2 - alveolar > TWO_SIDED * np.sqrt(variance))
    return Hit(where, {"po2": ("po2", po2), "alveolar": ("po2", alveolar), "fio2": ("fio2", fio2),
                       "pco2": ("pco2", pco2)})  # fmt: skip


def _saturation_hint(case: Case) -> Floats:
    """Any saturation that was not worked out from the PO2 itself."""
    return _or_else(case.so2(), case.known("spo2"))


def _or_else(first: Floats, second: Floats) -> Floats:
    return np.where(np.isnan(first), second, first)


def _alkali(case: Case) -> Floats:
    """Bicarbonate that pH and PCO2 would give; what no patient has gives a wrong unit away."""
    return acidbase.bicarbonate(case.own("ph"), case.own("pco2"))


@_rule("pco2-looks-like-kpa")
def _pco2_like_kpa(case: Case) -> Hit:
    """PCO2 under 12 mmHg at a pH that it cannot have, while its 7.5-fold can be.

    Beside a PO2 that cannot be in kPa it takes a pH above 7.30: in the worst metabolic acidosis PCO2 does fall to 10.
    """
    pco2, bicarbonate = case.own("pco2"), _alkali(case)
    least_ph = np.where(case.own("po2") > 30.0, 7.30, 7.15)
    where = (pco2 < 12.0) & (case.own("ph") > least_ph) & (bicarbonate < 6.5) & (bicarbonate * MMHG_PER_KPA < 55.0)
    return Hit(where, {"pco2": ("pco2", pco2)})


@_rule("pco2-looks-like-mmhg")
def _pco2_like_mmhg(case: Case) -> Hit:
    """PCO2 above 120 mmHg at a pH that it cannot have, while a 7.5th of it can be."""
    pco2 = case.own("pco2")
    bicarbonate = _alkali(case)
    where = (pco2 > 120.0) & (bicarbonate > 60.0) & (bicarbonate / MMHG_PER_KPA > 3.0)
    return Hit(where, {"pco2": ("pco2", pco2)})


@_rule("po2-looks-like-kpa")
def _po2_like_kpa(case: Case) -> Hit:
    """PO2 that fits the saturation only when taken as kPa; without a saturation, when PCO2 looks like kPa too."""
    po2, seen = case.own("po2"), _saturation_hint(case)
    off, fits = seen - case.curve_at(po2), np.abs(seen - case.curve_at(po2 * MMHG_PER_KPA))
    by_saturation = (off > 0.25) & (fits < 0.10)
    jointly = np.isnan(seen) & _pco2_like_kpa(case).where & (po2 < 80.0)
    return Hit((po2 < 80.0) & (by_saturation | jointly), {"po2": ("po2", po2)})


@_rule("po2-looks-like-mmhg")
def _po2_like_mmhg(case: Case) -> Hit:
    """PO2 that fits a low saturation only when a 7.5th of it is taken, or stands beside such a PCO2."""
    po2, seen = case.own("po2"), _saturation_hint(case)
    real = case.curve_at(po2 / MMHG_PER_KPA)
    by_saturation = (seen < 0.94) & (np.abs(seen - real) < 0.05) & (case.curve_at(po2) - seen > 0.05)
    jointly = _pco2_like_mmhg(case).where & (po2 > 200.0)
    return Hit((po2 > 200.0) & (by_saturation | jointly), {"po2": ("po2", po2)})


@_rule("so2-against-curve")
def _so2_against_curve(case: Case) -> Hit:
    """Measured and calculated saturation apart by more than 3 points and more than their uncertainty."""
    so2, expected, po2 = case.so2(), case.calculated(), case.own("po2")
    slope = _HILL * expected * (1.0 - expected)  # per unit of ln PO2
    ln_po2_sd = np.hypot(_sd("po2", po2) / np.maximum(po2, 1.0), _P50_AMONG_PATIENTS)
    sd = np.hypot(_sd("so2", so2), slope * ln_po2_sd)
    where = np.abs(so2 - expected) > np.maximum(0.03, TWO_SIDED * sd)
    return Hit(where, {"so2": ("so2", so2), "expected": ("so2", expected), "po2": ("po2", po2)})


@_rule("arterial-looks-venous")
def _arterial_looks_venous(case: Case) -> Hit:
    """A saturation far below the finger's, or a PO2 that few living arteries hold."""
    so2 = _or_else(case.so2(), case.by_curve())
    po2, spo2 = case.own("po2"), case.known("spo2")
    low = (so2 < 0.85) & ((spo2 - so2 > 0.08) | (np.isnan(spo2) & (so2 < 0.75) & (po2 < 45.0)))
    return Hit(case.arterial & low, {"so2": ("so2", so2), "po2": ("po2", po2), "spo2": ("spo2", spo2)})


@_rule("fractions-do-not-add")
def _fractions_do_not_add(case: Case) -> Hit:
    """O2Hb + HHb + COHb + MetHb (+ SulfHb); HHb follows from sO2. 2.5 points: four readings in whole percents."""
    so2, o2hb, cohb, methb = (case.own(name) for name in ("so2", "o2hb", "cohb", "methb"))
    dys = cohb + methb + np.nan_to_num(case.own("sulfhb"))
    whole = o2hb / so2 + dys
    parts = o2hb + dys
    where = (np.abs(whole - 1.0) > 0.025) | (np.isnan(so2) & (parts > 1.015))
    return Hit(where, {"sum": ("o2hb", _or_else(whole, parts))})


@_rule("venous-above-arterial")
def _venous_above_arterial(case: Case) -> Hit:
    """The paired venous saturation in use above the arterial one in use."""
    arterial = case.derived.saturation[case.rows]
    venous = taken(case.derived.saturation, case.snapshots.venous_row[case.rows])
    return Hit(case.arterial & (venous > arterial), {"venous": ("so2", venous), "arterial": ("so2", arterial)})


@_rule("hb-jump")
def _hb_jump(case: Case) -> Hit:
    """More than 3 g/dL and 30 % from the stay's previous haemoglobin within 12 h, with nothing recorded between.

    Two units of red cells give 2 g/dL (common practice); fast dilution rarely takes more than a third. Said where it
    was measured, and on the first arterial sample that uses it.
    """
    readings = case.snapshots.readings
    hb, before_row = readings["hb"], earlier(readings["hb"], case.line)
    before, hours = taken(hb, before_row), readings.time - taken(readings.time, before_row)
    cause = case.line.since(np.isin(readings.event, (Event.TRANSFUSION, Event.BLEED)))
    change = np.abs(hb - before)
    jumped = (change > 3.0) & (change > 0.30 * np.maximum(before, hb)) & (hours <= 12.0) & ~(cause <= hours)
    source = case.snapshots.source["hb"]
    previous = case.snapshots.previous
    first_use = case.snapshots.arterial & (source >= 0) & (source != np.where(previous >= 0, source[previous], -1))
    at = np.where(np.isnan(hb) & first_use, source, np.arange(len(hb)))[case.rows]
    return Hit(jumped[at], {"before": ("hb", before[at]), "hb": ("hb", hb[at]), "hours": ("", hours[at])})


@_rule("ph-pco2-hco3-disagree")
def _ph_pco2_hco3(case: Case) -> Hit:
    """Bicarbonate against Henderson-Hasselbalch: more than 4 mmol/L and 15 % (total CO2 runs 1-2 above)."""
    given, expected = case.own("bicarbonate"), _alkali(case)
    where = np.abs(given - expected) > np.maximum(4.0, 0.15 * expected)
    return Hit(where, {"bicarbonate": ("bicarbonate", given), "expected": ("bicarbonate", expected),
                       "ph": ("ph", case.own("ph")), "pco2": ("pco2", case.own("pco2"))})  # fmt: skip


@_rule("calculated-as-measured")
def _calculated_as_measured(case: Case) -> Hit:
    """A measured saturation with decimals that is a calculated one to the last digit.

    One sample proves it with two decimals (chance about 1 in 200); with one decimal it takes three in a row.
    """
    so2 = case.own("so2")
    percent = 100.0 * so2
    decimals = sum((np.abs(np.round(percent, d) - percent) > 1e-7).astype(np.int64) for d in range(4))
    step = np.power(10.0, -decimals) / 100.0
    ph, pco2, po2 = (case.own(name) for name in ("ph", "pco2", "po2"))
    candidates = (
        case.own("so2_calculated"),
        case.by_curve(),
        curve.saturation_severinghaus_kelman(po2, ph, pco2),
        curve.saturation_severinghaus(po2),
    )
    equal = np.zeros(len(so2), dtype=np.bool_)
    for candidate in candidates:
        equal |= np.abs(so2 - candidate) <= 0.5 * step + 1e-9
    equal &= so2 < 0.9995
    alone = equal & (decimals >= 2)
    run = equal & (decimals == 1)
    return Hit(alone | _third_in_a_row(case, run), {"so2": ("so2", so2)})


def _third_in_a_row(case: Case, run: Bools) -> Bools:
    """True where this and the stay's two earlier measured saturations are all so."""
    n = len(case.snapshots)
    everywhere, so2 = np.zeros(n, dtype=np.bool_), case.snapshots.readings["so2"]
    everywhere[case.rows] = run
    one = earlier(so2, case.line)
    two = np.where(one >= 0, one[one], -1)
    both = (one >= 0) & (two >= 0) & everywhere[one] & everywhere[two]
    return np.asarray(run & both[case.rows])


@_rule("co-and-ci-disagree")
def _co_and_ci_disagree(case: Case) -> Hit:
    """Body surface from CO over CI against that from height and weight, by more than 15 %."""
    co, ci, bsa = case.known("cardiac_output"), case.known("cardiac_index"), case.result("bsa")
    where = case.arterial & (np.abs(co / ci / bsa - 1.0) > 0.15)
    return Hit(where, {"co": ("cardiac_output", co), "ci": ("cardiac_index", ci), "area": ("bsa", co / ci),
                       "bsa": ("bsa", bsa)})  # fmt: skip


@_rule("p50-out-of-range")
def _p50_out_of_range(case: Case) -> Hit:
    """P50 that no blood has, from a saturation that should have shown it well (up to 0.95)."""
    p50 = case.result("p50")
    return Hit((p50 < P50_OF_BLOOD[0]) | (p50 > P50_OF_BLOOD[1]), {"p50": ("p50", p50)})


@_rule("o2er-out-of-range")
def _o2er_out_of_range(case: Case) -> Hit:
    """Extraction under 5 % or above 80 %."""
    o2er = case.result("o2er")
    return Hit((o2er < 0.05) | (o2er > 0.80), {"o2er": ("o2er", o2er)})


@_rule("room-air-with-oxygen")
def _room_air_with_oxygen(case: Case) -> Hit:
    """Room air recorded with more than 22 % oxygen."""
    fio2 = case.known("fio2")
    return Hit((case.snapshots.device[case.rows] == Device.ROOM_AIR) & (fio2 > 0.22), {"fio2": ("fio2", fio2)})


@_rule("time-in-future")
def _time_in_future(case: Case) -> Hit:
    """Later than now, by more than two clocks differ."""
    ahead = case.snapshots.readings.time[case.rows] - (np.inf if case.now is None else case.now)
    return Hit(ahead > CLOCK_SKEW, {"hours": ("", ahead)})


@_rule("duplicate-sample")
def _duplicate_sample(case: Case) -> Hit:
    """The stay's previous sample from the same site with equal pH, PCO2 and PO2, or two gases at one time.

    Equal within an hour; within a day only if a fourth value is equal too: rounded gases of a steady patient do meet.
    """
    readings = case.snapshots.readings
    before = _earlier_same_site(case)
    apart = {name: np.abs(case.own(name) - taken(readings[name], before)) for name in _REPEATED}
    same = np.all([apart[name] == 0.0 for name in _REPEATED[:3]], axis=0)
    same &= ~np.any([apart[name] > 0.0 for name in _REPEATED[3:]], axis=0)
    fourth = np.any([apart[name] == 0.0 for name in _REPEATED[3:]], axis=0)
    hours = readings.time[case.rows] - taken(readings.time, before)
    same &= hours <= np.where(fourth, SAME_SAMPLE, 1.0)
    return Hit(same | (~np.isnan(apart["po2"]) & (hours < 1e-6)), {"hours": ("", hours)})


def _earlier_same_site(case: Case) -> Ints:
    """Row of the stay's previous sample from the same site, -1 for none."""
    site = case.snapshots.readings.site
    found = np.full(len(case.rows), -1)
    for code in (Site.ARTERIAL, Site.MIXED_VENOUS, Site.CENTRAL_VENOUS, Site.VENOUS):
        own = case.site == code
        if np.any(own):
            found[own] = earlier(np.where(site == code, 0.0, np.nan), case.line)[case.rows[own]]
    return found


def _gap(case: Case) -> Bools:
    """SpO2 below the calculated saturation by more than the gap that asks for co-oximetry."""
    return np.asarray(case.arterial & (case.calculated() - case.known("spo2") > oximetry.GAP_ASKS))


def _gap_numbers(case: Case) -> dict[str, tuple[str, Floats]]:
    return {
        "spo2": ("spo2", case.known("spo2")), "calculated": ("so2", case.calculated()), "po2": ("po2", case.own("po2")),
    }  # fmt: skip


@_rule("gap-reading-false")
def _gap_reading_false(case: Case) -> Hit:
    """PaO2 normal, co-oximetry clean (COHb < 5 %, MetHb and SulfHb < 3 %), measured saturation as calculated."""
    so2 = case.so2()
    clean = case.co_oximetry() & (case.known("cohb") < 0.05) & (_met(case) < 0.03)
    agree = np.isnan(so2) | (np.abs(so2 - case.calculated()) <= 0.03)
    where = _gap(case) & clean & agree & (case.own("po2") >= 70.0)
    return Hit(where, _gap_numbers(case) | {"so2": ("so2", _or_else(so2, case.calculated()))})


def _met(case: Case) -> Floats:
    return np.asarray(case.known("methb") + np.nan_to_num(case.known("sulfhb")))


@_rule("gap-dyshaemoglobin")
def _gap_dyshaemoglobin(case: Case) -> Hit:
    """The same gap with MetHb or SulfHb of 3 % or more."""
    share = np.nan_to_num(case.known("methb")) + np.nan_to_num(case.known("sulfhb"))
    return Hit(_gap(case) & (share >= 0.03), _gap_numbers(case) | {"share": ("methb", share)})


@_rule("gap-send-co-oximetry")
def _gap_send_co_oximetry(case: Case) -> Hit:
    """The same gap with MetHb not measured; the MetHb that would explain it is stated, never concluded."""
    methb = oximetry.methb_explaining(case.known("spo2"), _or_else(case.so2(), case.calculated()))
    where = _gap(case) & np.isnan(case.known("methb")) & ~_arterial_looks_venous(case).where
    return Hit(where, _gap_numbers(case) | {"methb": ("methb", methb)})


@_rule("cohb-hidden")
def _cohb_hidden(case: Case) -> Hit:
    """COHb of 5 % or more with a normal SpO2 (from 94 %) or, without one, a normal PaO2 (from 70 mmHg)."""
    spo2, po2, cohb = case.known("spo2"), case.own("po2"), case.known("cohb")
    looks_well = np.where(np.isnan(spo2), po2 >= 70.0, spo2 >= 0.94)
    return Hit(case.arterial & (cohb >= 0.05) & looks_well, {"cohb": ("cohb", cohb)})


@_rule("hypoxaemia-agreed")
def _hypoxaemia_agreed(case: Case) -> Hit:
    """SpO2 and measured saturation under 90 %, PaO2 under 60 mmHg."""
    so2, spo2, po2 = case.so2(), case.known("spo2"), case.own("po2")
    where = case.arterial & (so2 < 0.90) & (spo2 < 0.90) & (po2 < 60.0)
    return Hit(where, {"so2": ("so2", so2), "spo2": ("spo2", spo2), "po2": ("po2", po2)})


@_rule("hypoxaemia-occult")
def _hypoxaemia_occult(case: Case) -> Hit:
    """SpO2 above the measured saturation by more than 4 points."""
    so2, spo2 = case.so2(), case.known("spo2")
    return Hit(case.arterial & (spo2 - so2 > 0.04 + 1e-9), {"so2": ("so2", so2), "spo2": ("spo2", spo2)})


@_rule("pf-from-estimated-fio2")
def _pf_from_estimated_fio2(case: Case) -> Hit:
    """P/F with an FiO2 of a low-flow device."""
    pf = case.result("pf_ratio")
    where = case.flagged(Flag.FIO2_ESTIMATED) & ~np.isnan(pf)
    return Hit(where, {"pf_ratio": ("pf_ratio", pf), "fio2": ("fio2", case.known("fio2"))})


@_rule("spo2-above-97")
def _spo2_above_97(case: Case) -> Hit:
    """S/F asked for where the curve is flat."""
    return Hit(case.flagged(Flag.SPO2_ABOVE_97), {"spo2": ("spo2", case.known("spo2"))})
