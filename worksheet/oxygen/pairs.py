"""What a sample's own measurements say of its haemoglobin: the measured saturation, and P50 from a pair."""

from __future__ import annotations

import numpy as np

from . import curve
from .chain import either, or_zero
from .domain import Floats

# mmHg: no adult's blood is outside, even at pH 6.9, 41 °C or with half its haemoglobin holding CO; common practice
P50_OF_BLOOD = (12.0, 50.0)


@np.errstate(all="ignore")
def measured_saturation(so2: Floats, o2hb: Floats, cohb: Floats, methb: Floats, sulfhb: Floats) -> Floats:
    """Functional saturation as measured: sO2, else what O2Hb and the measured dyshaemoglobins say.

    Parameters
    ----------
    so2, o2hb : ndarray
        Functional saturation; oxyhaemoglobin, share of total [0-1].
    cohb, methb, sulfhb : ndarray
        Dyshaemoglobins, share of total, NaN where not measured [0-1].

    Returns
    -------
    ndarray
        Functional saturation [0-1]; NaN where it was not measured, whatever a curve may say.
    """
    if np.all(np.isnan(o2hb)):
        return so2
    active = 1.0 - np.maximum(cohb, 0.0) - np.maximum(methb, 0.0) - np.maximum(or_zero(sulfhb), 0.0)
    ratio = o2hb / active
    return either(so2, np.where((active > 0.0) & (ratio <= 1.005), np.minimum(ratio, 1.0), np.nan))


@np.errstate(all="ignore")
def p50_of_pair(po2: Floats, so2: Floats, cohb: Floats, methb: Floats) -> Floats:
    """In-vivo P50 that can be meant: on the flat part of the curve noise alone makes values that no blood has.

    Parameters
    ----------
    po2 : ndarray
        Oxygen partial pressure at 37 °C [mmHg].
    so2 : ndarray
        Functional saturation by co-oximetry [0-1].
    cohb, methb : ndarray
        Carboxy- and methaemoglobin, share of total; what was not measured stays inside the displacement [0-1].

    Returns
    -------
    ndarray
        P50 [mmHg]; NaN outside a saturation of 0.30 to 0.97, and above 0.95 where it is not 12 to 50 mmHg.
    """
    p50 = curve.p50_in_vivo(po2, so2, 37.0, or_zero(cohb), or_zero(methb))
    noise = (so2 > curve.P50_FULL[1]) & ~((p50 >= P50_OF_BLOOD[0]) & (p50 <= P50_OF_BLOOD[1]))
    return np.where(noise, np.nan, p50)
