"""What saturations that disagree may mean: finger, calculated, measured, and dyshaemoglobins.

The rules name which explanations fit the numbers and which do not; none is a diagnosis.
"""

from __future__ import annotations

import numpy as np

from . import oximetry
from .chain import either
from .finding_case import RULES, Case, Hit, rule
from .readings import Bools, Floats


def _gap(case: Case) -> Bools:
    """SpO2 below the calculated saturation by more than the gap that asks for co-oximetry."""
    return np.asarray(case.arterial & (case.calculated() - case.known("spo2") > oximetry.GAP_ASKS))


def _gap_numbers(case: Case) -> dict[str, tuple[str, Floats]]:
    return {
        "spo2": ("spo2", case.known("spo2")), "calculated": ("so2", case.calculated()), "po2": ("po2", case.own("po2")),
    }  # fmt: skip


@rule("gap-reading-false")
def _gap_reading_false(case: Case) -> Hit:
    """PaO2 normal, co-oximetry clean (COHb < 5 %, MetHb and SulfHb < 3 %), measured saturation as calculated."""
    so2 = case.so2()
    clean = case.co_oximetry() & (case.known("cohb") < 0.05) & (_met(case) < 0.03)
    agree = np.isnan(so2) | (np.abs(so2 - case.calculated()) <= 0.03)
    where = _gap(case) & clean & agree & (case.own("po2") >= 70.0)
    return Hit(where, _gap_numbers(case) | {"so2": ("so2", either(so2, case.calculated()))})


def _met(case: Case) -> Floats:
    return np.asarray(case.known("methb") + np.nan_to_num(case.known("sulfhb")))


@rule("gap-dyshaemoglobin")
def _gap_dyshaemoglobin(case: Case) -> Hit:
    """The same gap with MetHb or SulfHb of 3 % or more."""
    share = np.nan_to_num(case.known("methb")) + np.nan_to_num(case.known("sulfhb"))
    return Hit(_gap(case) & (share >= 0.03), _gap_numbers(case) | {"share": ("methb", share)})


@rule("gap-send-co-oximetry")
def _gap_send_co_oximetry(case: Case) -> Hit:
    """The same gap with MetHb not measured; the MetHb that would explain it is stated, never concluded."""
    methb = _explaining(case)
    return Hit(_unexplained(case) & ~np.isnan(methb), _gap_numbers(case) | {"methb": ("", 100.0 * methb)})


@rule("gap-beyond-methb")
def _gap_beyond_methb(case: Case) -> Hit:
    """The same where no share of MetHb gives so low a reading: a probe that sees MetHb alone shows about 85 %."""
    return Hit(_unexplained(case) & np.isnan(_explaining(case)), _gap_numbers(case))


def _unexplained(case: Case) -> Bools:
    """A gap with MetHb not measured, in a sample that does not look venous."""
    venous = RULES["arterial-looks-venous"](case).where
    return np.asarray(_gap(case) & np.isnan(case.known("methb")) & ~venous)


def _explaining(case: Case) -> Floats:
    return oximetry.methb_explaining(case.known("spo2"), either(case.so2(), case.calculated()))


@rule("cohb-hidden")
def _cohb_hidden(case: Case) -> Hit:
    """COHb of 5 % or more with a normal SpO2 (from 94 %) or, without one, a normal PaO2 (from 70 mmHg)."""
    spo2, po2, cohb = case.known("spo2"), case.own("po2"), case.known("cohb")
    looks_well = np.where(np.isnan(spo2), po2 >= 70.0, spo2 >= 0.94)
    return Hit(case.arterial & (cohb >= 0.05) & looks_well, {"cohb": ("cohb", cohb)})


@rule("hypoxaemia-agreed")
def _hypoxaemia_agreed(case: Case) -> Hit:
    """SpO2 and measured saturation under 90 %, PaO2 under 60 mmHg."""
    so2, spo2, po2 = case.so2(), case.known("spo2"), case.own("po2")
    where = case.arterial & (so2 < 0.90) & (spo2 < 0.90) & (po2 < 60.0)
    return Hit(where, {"so2": ("so2", so2), "spo2": ("spo2", spo2), "po2": ("po2", po2)})


@rule("hypoxaemia-occult")
def _hypoxaemia_occult(case: Case) -> Hit:
    """SpO2 above the measured saturation by more than 4 points."""
    so2, spo2 = case.so2(), case.known("spo2")
    return Hit(case.arterial & (spo2 - so2 > 0.04 + 1e-9), {"so2": ("so2", so2), "spo2": ("spo2", spo2)})
