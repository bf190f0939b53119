"""Which saturation to trust, and what a finger would show.

References
----------
.. [1] Zijlstra WG, Buursma A, van Assendelft OW. Visible and near infrared absorption spectra of human and animal
   haemoglobin. VSP, Utrecht 2000.
.. [2] Barker SJ, Tremper KK, Hyatt J. Effects of methemoglobinemia on pulse oximetry and mixed venous oximetry.
   Anesthesiology 1989;70:112-117.
.. [3] Barker SJ, Tremper KK. The effect of carbon monoxide inhalation on pulse oximetry and transcutaneous PO2.
   Anesthesiology 1987;66:677-679.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from .constants import Constants
from .domain import Bools, Floats, floats, keep, quiet
from .readings import Flag, Ints

# Millimolar absorptivity per haem at 660 and 940 nm [L/mmol/cm], tabulated in [1]
_O2HB = (0.100, 0.294)
_HHB = (0.815, 0.183)
_COHB = (0.069, 0.001)
_METHB = (0.945, 0.729)
GAP_NOISE = 0.044  # 1.96 SD of a gap, SD 0.022-0.023: Ebmeier 2018; Mallat 2015
COHB_PREDICTED_TO = 0.60
GAP_ASKS = 0.05  # common practice: above this, send co-oximetry


class Chosen(NamedTuple):
    """The saturation that goes into content.

    Attributes
    ----------
    saturation : ndarray
        Functional saturation [0-1].
    o2hb : ndarray
        Oxyhaemoglobin, share of total: always ``saturation * (1 - inactive)`` [0-1].
    inactive : ndarray
        Share of haemoglobin that cannot carry oxygen [0-1].
    flags : ndarray of int64
        Bits of :class:`~worksheet.oxygen.readings.Flag`.
    """

    saturation: Floats
    o2hb: Floats
    inactive: Floats
    flags: Ints


@quiet
def inactive_share(cohb: ArrayLike, methb: ArrayLike, sulfhb: ArrayLike, constants: Constants) -> tuple[Floats, Bools]:
    """Share of haemoglobin that cannot carry oxygen, and whether it was measured.

    Measured means COHb and MetHb; SulfHb is added where it was looked for. With only one of them the share is at
    least the usual one and counts as assumed. Small negative readings count as 0.

    Parameters
    ----------
    cohb, methb, sulfhb : array_like
        Dyshaemoglobins, share of total, NaN where not measured [0-1].
    constants : Constants
        Of which ``usual_inactive`` [0-1].

    Returns
    -------
    share : ndarray
        Inactive share [0-1]; NaN where the parts leave no haemoglobin.
    known : ndarray of bool
        Whether COHb and MetHb were both measured [bool].
    """
    cohb, methb, sulfhb = floats(cohb, methb, sulfhb)
    known = np.asarray(~np.isnan(cohb + methb))
    total = _counted(cohb) + _counted(methb) + _counted(sulfhb)
    share = np.where(known, total, np.maximum(total, constants.usual_inactive))
    return keep(share < 1.0, share), known


def _counted(part: Floats) -> Floats:
    return np.asarray(np.fmax(part, 0.0))


@quiet
def choose_saturation(
    so2: ArrayLike,
    o2hb: ArrayLike,
    so2_curve: ArrayLike,
    spo2: ArrayLike,
    po2: ArrayLike,
    cohb: ArrayLike,
    methb: ArrayLike,
    sulfhb: ArrayLike,
    constants: Constants,
) -> Chosen:
    """The saturation that goes into content, in the order of trust, with flags for what it rests on.

    Measured O2Hb; else measured sO2 less the inactive share; else the curve at PO2 (flagged calculated); else, only
    with no gas saturation and no PO2 at all, SpO2 (flagged from the finger). A saturation that an analyser calculated
    is compared elsewhere, never used.

    Parameters
    ----------
    so2 : array_like
        Functional saturation, measured [0-1].
    o2hb : array_like
        Oxyhaemoglobin, measured, share of total [0-1].
    so2_curve : array_like
        Functional saturation by the curve at the sample's PO2 [0-1].
    spo2 : array_like
        Saturation by pulse oximeter [0-1].
    po2 : array_like
        Oxygen partial pressure [mmHg].
    cohb, methb, sulfhb : array_like
        Dyshaemoglobins, share of total, NaN where not measured [0-1].
    constants : Constants
        Of which ``usual_inactive`` [0-1].

    Returns
    -------
    Chosen
        Saturation, O2Hb and inactive share [0-1], flags [bits]; NaN where there is nothing to go by.
    """
    so2, o2hb, so2_curve, spo2, po2 = floats(so2, o2hb, so2_curve, spo2, po2)
    so2, o2hb = _measured(so2), _measured(o2hb)
    share, known = inactive_share(cohb, methb, sulfhb, constants)
    by_o2hb = ~np.isnan(o2hb)
    share, implied = _share_beside_o2hb(share, known, so2, o2hb)
    by_so2 = ~by_o2hb & ~np.isnan(so2)
    by_curve = ~by_o2hb & ~by_so2 & ~np.isnan(so2_curve)
    by_finger = ~by_o2hb & ~by_so2 & ~by_curve & np.isnan(po2) & ~np.isnan(spo2)
    finger = np.where(by_finger, _measured(spo2), np.nan)
    chosen = np.where(by_so2, so2, np.where(by_curve, so2_curve, finger))
    chosen = np.where(by_o2hb, o2hb / (1.0 - share), chosen)
    flags = (
        np.where(known | implied, 0, Flag.DYSHAEMOGLOBINS_ASSUMED)
        | np.where(by_curve, Flag.SATURATION_CALCULATED, 0)
        | np.where(by_finger, Flag.SATURATION_FROM_FINGER, 0)
    )
    there = ~np.isnan(chosen)
    return Chosen(chosen, chosen * (1.0 - share), share, np.where(there, flags, 0).astype(np.int64))


def _measured(value: Floats) -> Floats:
    """A measured saturation: 1.00 to 1.005 is rounding, beyond is not a saturation."""
    return keep((value >= 0.0) & (value <= 1.005), np.minimum(value, 1.0))


def _share_beside_o2hb(share: Floats, known: Bools, so2: Floats, o2hb: Floats) -> tuple[Floats, Bools]:
    """Inactive share that keeps O2Hb = sO2 (1 - share): where not measured, what O2Hb and sO2 together imply."""
    implied = np.asarray(~known & (so2 > 0.0) & (o2hb <= so2))
    share = np.where(implied, 1.0 - o2hb / so2, share)
    return np.where(o2hb > 1.0 - share, 1.0 - o2hb, share), implied


@quiet
def predicted_spo2(so2: ArrayLike, cohb: ArrayLike, methb: ArrayLike) -> Floats:
    """What a two-wavelength oximeter would show for this blood.

    R is the ratio of the mixture's absorbances at 660 and 940 nm [1]_, read with the usual empirical calibration
    SpO2 = 110 - 25 R (common practice), capped at 100. MetHb draws it toward 85 % [2]_, COHb leaves it nearly
    unchanged [3]_. It explains a gap; it never corrects an SpO2. Above a COHb of 0.60 it falls below what was observed
    [3]_ and is not given. The calibration is a straight line: for blood without dyshaemoglobin it reads 2 to 3 points
    high at 97 %, 6 at 85 % and 10 at 70 %, so a gap is judged with :func:`dyshaemoglobin_effect`, where that cancels.

    Parameters
    ----------
    so2 : array_like
        Functional saturation of the blood [0-1].
    cohb, methb : array_like
        Carboxy- and methaemoglobin, share of total [0-1].

    Returns
    -------
    ndarray
        Predicted SpO2 [0-1], NaN where any input is NaN or out of domain.
    """
    so2, cohb, methb = floats(so2, cohb, methb)
    valid = (so2 >= 0.0) & (so2 <= 1.0) & (np.maximum(cohb, 0.0) + np.maximum(methb, 0.0) <= 1.0)
    shown = np.clip(_reading(so2, cohb, methb), 0.0, 1.0)
    return keep(valid & (cohb <= COHB_PREDICTED_TO), shown)


@quiet
def _reading(so2: Floats, cohb: ArrayLike, methb: ArrayLike) -> Floats:
    """110 - 25 R of the mixture, not capped."""
    cohb, methb = np.maximum(cohb, 0.0), np.maximum(methb, 0.0)
    active = 1.0 - cohb - methb
    red, infrared = (
        active * (so2 * _O2HB[i] + (1.0 - so2) * _HHB[i]) + cohb * _COHB[i] + methb * _METHB[i] for i in (0, 1)
    )
    return np.asarray(1.10 - 0.25 * red / infrared)


def dyshaemoglobin_effect(so2: ArrayLike, cohb: ArrayLike, methb: ArrayLike) -> Floats:
    """How far dyshaemoglobins move the reading of a two-wavelength oximeter from that of the same blood without them.

    The difference of two readings of :func:`predicted_spo2`, before their cap at 100: errors of the calibration for
    blood without dyshaemoglobin cancel.

    Parameters
    ----------
    so2 : array_like
        Functional saturation of the blood [0-1].
    cohb, methb : array_like
        Carboxy- and methaemoglobin, share of total [0-1].

    Returns
    -------
    ndarray
        Change of the reading [0-1; times 100 for points]: negative with MetHb, near 0 with COHb. NaN as the prediction.
    """
    so2 = np.asarray(so2, dtype=np.float64)
    with_them, without = _reading(so2, cohb, methb), _reading(so2, 0.0, 0.0)
    return keep(~np.isnan(predicted_spo2(so2, cohb, methb)), with_them - without)


@quiet
def methb_explaining(spo2: ArrayLike, so2: ArrayLike, cohb: ArrayLike = 0.0) -> Floats:
    """Methaemoglobin that would explain an SpO2, if nothing else does: the inverse of :func:`predicted_spo2`.

    Said where co-oximetry is missing, as a reason to send it; never as a diagnosis.

    Parameters
    ----------
    spo2 : array_like
        Saturation by pulse oximeter [0-1].
    so2 : array_like
        Functional saturation, measured or by the curve [0-1].
    cohb : array_like
        Carboxyhaemoglobin, share of total [0-1].

    Returns
    -------
    ndarray
        MetHb, share of total [0-1]; NaN where no MetHb from 0 to 1 - COHb explains the reading, or any input is NaN.
    """
    spo2, so2, cohb = floats(spo2, so2, cohb)
    ratio = (1.10 - spo2) / 0.25

    def excess(absorptivity: tuple[float, float]) -> Floats:
        return np.asarray(absorptivity[0] - ratio * absorptivity[1])

    active = so2 * excess(_O2HB) + (1.0 - so2) * excess(_HHB)
    methb = -((1.0 - cohb) * active + cohb * excess(_COHB)) / (excess(_METHB) - active)
    valid = (spo2 > 0.0) & (spo2 < 1.0) & (so2 >= 0.0) & (so2 <= 1.0) & (cohb >= 0.0)
    return keep(valid & (methb >= -1e-9) & (methb <= 1.0 - cohb), np.maximum(methb, 0.0))


def gap_calculated(so2_calculated: ArrayLike, so2_curve: ArrayLike, spo2: ArrayLike) -> Floats:
    """Calculated saturation less SpO2: the analyser's where it gave one, else the curve's.

    Parameters
    ----------
    so2_calculated, so2_curve : array_like
        Saturation as the analyser calculated it, and by the curve [0-1].
    spo2 : array_like
        Saturation by pulse oximeter [0-1].

    Returns
    -------
    ndarray
        Gap [0-1; times 100 for points], NaN without either calculated value or without SpO2.
    """
    so2_calculated, so2_curve, spo2 = floats(so2_calculated, so2_curve, spo2)
    return np.asarray(np.where(np.isnan(so2_calculated), so2_curve, so2_calculated) - spo2)


def gap_measured(so2: ArrayLike, spo2: ArrayLike) -> Floats:
    """Measured saturation less SpO2.

    Parameters
    ----------
    so2 : array_like
        Functional saturation, measured [0-1].
    spo2 : array_like
        Saturation by pulse oximeter [0-1].

    Returns
    -------
    ndarray
        Gap [0-1; times 100 for points], NaN where any input is NaN.
    """
    so2, spo2 = floats(so2, spo2)
    return np.asarray(so2 - spo2)
