"""The rules behind the findings: which rows, and the numbers that the words need.

Each rule is a function of a :class:`~worksheet.oxygen.finding_case.Case` that returns a ``Hit``. Limits without a
source are common practice. What saturations that disagree may mean is in :mod:`~worksheet.oxygen.saturation_rules`.
"""

from __future__ import annotations

import numpy as np

from . import acidbase, curve, measurement
from .align import taken
from .chain import either
from .finding_case import Case, Hit, default_sd, or_usual, rule
from .line import earlier
from .pairs import P50_OF_BLOOD
from .quantities import MMHG_PER_KPA
from .readings import Bools, Device, Event, Flag, Floats, Ints, Site

TWO_SIDED = 1.96  # 95 %
_P50_AMONG_PATIENTS = 0.05  # 1 SD of ln P50 about the modelled curve: about 1 mmHg of 26.8, more in the ill
_HILL = 2.7  # slope of the curve, for the size of an uncertainty only
CLOCK_SKEW = 5 / 60  # h that two clocks may differ by
SAME_SAMPLE = 24.0  # h within which equal values are one sample twice
_REPEATED = ("ph", "pco2", "po2", "hb", "so2", "o2hb", "lactate")


@rule("po2-above-alveolar")
def _po2_above_alveolar(case: Case) -> Hit:
    """PaO2 beyond PAO2 by more than the two can be off."""
    po2, alveolar, fio2, pco2 = case.own("po2"), case.result("pao2_alveolar"), case.known("fio2"), case.known("pco2")
    r = case.constants.respiratory_quotient
    pressure = or_usual(case.known("barometric_pressure"), case.constants.barometric_pressure)
    fio2_sd = measurement.parts(case.snapshots, "fio2").total[case.rows]
    per_fio2 = pressure - case.constants.water_vapour - pco2 * (1.0 - 1.0 / r)
    variance = (
        default_sd("po2", po2) ** 2
        + (per_fio2 * fio2_sd) ** 2
        + ((fio2 + (1.0 - fio2) / r) * default_sd("pco2", pco2)) ** 2
        + (pco2 * (1.0 - fio2) / r**2 * 0.1) ** 2  # R 0.7 to 1.0
        + (fio2 * np.where(case.flagged(Flag.BAROMETRIC_STANDARD), 10.0, 2.0)) ** 2  # weather
    )
    where = case.arterial & (po2 - alveolar > TWO_SIDED * np.sqrt(variance))
    return Hit(where, {"po2": ("po2", po2), "alveolar": ("po2", alveolar), "fio2": ("fio2", fio2),
                       "pco2": ("pco2", pco2)})  # fmt: skip


def _saturation_hint(case: Case) -> Floats:
    """Any saturation that was not worked out from the PO2 itself."""
    return either(case.so2(), case.known("spo2"))


def _alkali(case: Case) -> Floats:
    """Bicarbonate that pH and PCO2 would give; what no patient has gives a wrong unit away."""
    return acidbase.bicarbonate(case.own("ph"), case.own("pco2"))


@rule("pco2-looks-like-kpa")
def _pco2_like_kpa(case: Case) -> Hit:
    """PCO2 under 12 mmHg at a pH that it cannot have, while its 7.5-fold can be.

    Beside a PO2 that cannot be in kPa it takes a pH above 7.30: in the worst metabolic acidosis PCO2 does fall to 10.
    """
    pco2, bicarbonate = case.own("pco2"), _alkali(case)
    least_ph = np.where(case.own("po2") > 30.0, 7.30, 7.15)
    where = (pco2 < 12.0) & (case.own("ph") > least_ph) & (bicarbonate < 6.5) & (bicarbonate * MMHG_PER_KPA < 55.0)
    return Hit(where, {"pco2": ("pco2", pco2)})


@rule("pco2-looks-like-mmhg")
def _pco2_like_mmhg(case: Case) -> Hit:
    """PCO2 above 120 mmHg at a pH that it cannot have, while a 7.5th of it can be."""
    pco2 = case.own("pco2")
    bicarbonate = _alkali(case)
    where = (pco2 > 120.0) & (bicarbonate > 60.0) & (bicarbonate / MMHG_PER_KPA > 3.0)
    return Hit(where, {"pco2": ("pco2", pco2)})


@rule("po2-looks-like-kpa")
def _po2_like_kpa(case: Case) -> Hit:
    """PO2 that fits the saturation only when taken as kPa; without a saturation, when PCO2 looks like kPa too."""
    po2, seen = case.own("po2"), _saturation_hint(case)
    off, fits = seen - case.curve_at(po2), np.abs(seen - case.curve_at(po2 * MMHG_PER_KPA))
    by_saturation = (off > 0.25) & (fits < 0.10)
    jointly = np.isnan(seen) & _pco2_like_kpa(case).where & (po2 < 80.0)
    return Hit((po2 < 80.0) & (by_saturation | jointly), {"po2": ("po2", po2)})


@rule("po2-looks-like-mmhg")
def _po2_like_mmhg(case: Case) -> Hit:
    """PO2 that fits a low saturation only when a 7.5th of it is taken, or stands beside such a PCO2."""
    po2, seen = case.own("po2"), _saturation_hint(case)
    real = case.curve_at(po2 / MMHG_PER_KPA)
    by_saturation = (seen < 0.94) & (np.abs(seen - real) < 0.05) & (case.curve_at(po2) - seen > 0.05)
    jointly = _pco2_like_mmhg(case).where & (po2 > 200.0)
    return Hit((po2 > 200.0) & (by_saturation | jointly), {"po2": ("po2", po2)})


@rule("so2-against-curve")
def _so2_against_curve(case: Case) -> Hit:
    """Measured and calculated saturation apart by more than 3 points and more than their uncertainty."""
    so2, expected, po2 = case.so2(), case.calculated(), case.own("po2")
    slope = _HILL * expected * (1.0 - expected)  # per unit of ln PO2
    ln_po2_sd = np.hypot(default_sd("po2", po2) / np.maximum(po2, 1.0), _P50_AMONG_PATIENTS)
    sd = np.hypot(default_sd("so2", so2), slope * ln_po2_sd)
    where = np.abs(so2 - expected) > np.maximum(0.03, TWO_SIDED * sd)
    return Hit(where, {"so2": ("so2", so2), "expected": ("so2", expected), "po2": ("po2", po2)})


@rule("arterial-looks-venous")
def _arterial_looks_venous(case: Case) -> Hit:
    """A saturation far below the finger's, or a PO2 that few living arteries hold."""
    so2 = either(case.so2(), case.by_curve())
    po2, spo2 = case.own("po2"), case.known("spo2")
    low = (so2 < 0.85) & ((spo2 - so2 > 0.08) | (np.isnan(spo2) & (so2 < 0.75) & (po2 < 45.0)))
    return Hit(case.arterial & low, {"so2": ("so2", so2), "po2": ("po2", po2), "spo2": ("spo2", spo2)})


@rule("fractions-do-not-add")
def _fractions_do_not_add(case: Case) -> Hit:
    """O2Hb + HHb + COHb + MetHb (+ SulfHb); HHb follows from sO2. 2.5 points: four readings in whole percents."""
    so2, o2hb, cohb, methb = (case.own(name) for name in ("so2", "o2hb", "cohb", "methb"))
    dys = cohb + methb + np.nan_to_num(case.own("sulfhb"))
    whole = o2hb / so2 + dys
    parts = o2hb + dys
    where = (np.abs(whole - 1.0) > 0.025) | (np.isnan(so2) & (parts > 1.015))
    return Hit(where, {"sum": ("o2hb", either(whole, parts))})


@rule("venous-above-arterial")
def _venous_above_arterial(case: Case) -> Hit:
    """The paired venous saturation in use above the arterial one in use."""
    arterial = case.derived.saturation[case.rows]
    venous = taken(case.derived.saturation, case.snapshots.venous_row[case.rows])
    return Hit(case.arterial & (venous > arterial), {"venous": ("so2", venous), "arterial": ("so2", arterial)})


@rule("hb-jump")
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


@rule("ph-pco2-hco3-disagree")
def _ph_pco2_hco3(case: Case) -> Hit:
    """Bicarbonate against Henderson-Hasselbalch: more than 4 mmol/L and 15 % (total CO2 runs 1-2 above)."""
    given, expected = case.own("bicarbonate"), _alkali(case)
    where = np.abs(given - expected) > np.maximum(4.0, 0.15 * expected)
    return Hit(where, {"bicarbonate": ("bicarbonate", given), "expected": ("bicarbonate", expected),
                       "ph": ("ph", case.own("ph")), "pco2": ("pco2", case.own("pco2"))})  # fmt: skip


@rule("calculated-as-measured")
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


@rule("co-and-ci-disagree")
def _co_and_ci_disagree(case: Case) -> Hit:
    """Body surface from CO over CI against that from height and weight, by more than 15 %."""
    co, ci, bsa = case.known("cardiac_output"), case.known("cardiac_index"), case.result("bsa")
    where = case.arterial & (np.abs(co / ci / bsa - 1.0) > 0.15)
    return Hit(where, {"co": ("cardiac_output", co), "ci": ("cardiac_index", ci), "area": ("bsa", co / ci),
                       "bsa": ("bsa", bsa)})  # fmt: skip


@rule("p50-out-of-range")
def _p50_out_of_range(case: Case) -> Hit:
    """P50 that no blood has, from a saturation that should have shown it well (up to 0.95)."""
    p50 = case.result("p50")
    return Hit((p50 < P50_OF_BLOOD[0]) | (p50 > P50_OF_BLOOD[1]), {"p50": ("p50", p50)})


@rule("o2er-out-of-range")
def _o2er_out_of_range(case: Case) -> Hit:
    """Extraction under 5 % or above 80 %."""
    o2er = case.result("o2er")
    return Hit((o2er < 0.05) | (o2er > 0.80), {"o2er": ("o2er", o2er)})


@rule("room-air-with-oxygen")
def _room_air_with_oxygen(case: Case) -> Hit:
    """Room air recorded with more than 22 % oxygen."""
    fio2 = case.known("fio2")
    return Hit((case.snapshots.device[case.rows] == Device.ROOM_AIR) & (fio2 > 0.22), {"fio2": ("fio2", fio2)})


@rule("time-in-future")
def _time_in_future(case: Case) -> Hit:
    """Later than now, by more than two clocks differ."""
    ahead = case.snapshots.readings.time[case.rows] - (np.inf if case.now is None else case.now)
    return Hit(ahead > CLOCK_SKEW, {"hours": ("", ahead)})


@rule("duplicate-sample")
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


@rule("pf-from-estimated-fio2")
def _pf_from_estimated_fio2(case: Case) -> Hit:
    """P/F with an FiO2 of a low-flow device."""
    pf = case.result("pf_ratio")
    where = case.flagged(Flag.FIO2_ESTIMATED) & ~np.isnan(pf)
    return Hit(where, {"pf_ratio": ("pf_ratio", pf), "fio2": ("fio2", case.known("fio2"))})


@rule("spo2-above-97")
def _spo2_above_97(case: Case) -> Hit:
    """S/F asked for where the curve is flat."""
    return Hit(case.flagged(Flag.SPO2_ABOVE_97), {"spo2": ("spo2", case.known("spo2"))})
