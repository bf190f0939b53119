"""Acid-base and the correction of gases to body temperature.

The worksheet computes on the values at 37 °C that an analyser reports; gases at body temperature are for display and
for the blood in the body.

References
----------
.. [1] Siggaard-Andersen O. The Van Slyke equation. Scand J Clin Lab Invest 1977;37 Suppl 146:15-20.
.. [2] CLSI. Blood gas and pH analysis and related measurements; approved guideline C46 (from memory: the form of the
   constants 0.0307, 6.105, 24.8, 16.2 and of the temperature corrections).
.. [3] Lang W, Zander R. The accuracy of calculated base excess in blood. Clin Chem Lab Med 2002;40:404-410.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from .domain import Floats, floats, keep, power_of_ten, quiet


@quiet
def bicarbonate(ph: ArrayLike, pco2: ArrayLike) -> Floats:
    """Bicarbonate of plasma by Henderson and Hasselbalch: 0.0307 PCO2 10^(pH - 6.105) [2]_.

    Parameters
    ----------
    ph : array_like
        pH at 37 °C [1].
    pco2 : array_like
        Carbon dioxide partial pressure at 37 °C [mmHg].

    Returns
    -------
    ndarray
        Bicarbonate [mmol/L], NaN where any input is NaN or PCO2 negative.
    """
    ph, pco2 = floats(ph, pco2)
    return keep(pco2 >= 0.0, 0.0307 * pco2 * power_of_ten(ph - 6.105))


@quiet
def base_excess_blood(ph: ArrayLike, pco2: ArrayLike, hb: ArrayLike) -> Floats:
    """Base excess of blood by the Van Slyke equation [1]_, constants of [2]_.

    ``(1 - 0.014 Hb) [(HCO3 - 24.8) + (1.43 Hb + 7.7)(pH - 7.40)]``.

    Parameters
    ----------
    ph : array_like
        pH at 37 °C [1].
    pco2 : array_like
        Carbon dioxide partial pressure at 37 °C [mmHg].
    hb : array_like
        Haemoglobin [g/dL].

    Returns
    -------
    ndarray
        Base excess [mmol/L], NaN where any input is NaN or out of domain.
    """
    ph, hb = floats(ph, hb)
    hco3 = bicarbonate(ph, pco2)
    return keep(hb >= 0.0, (1.0 - 0.014 * hb) * (hco3 - 24.8 + (1.43 * hb + 7.7) * (ph - 7.40)))


@quiet
def standard_base_excess(ph: ArrayLike, pco2: ArrayLike) -> Floats:
    """Base excess of the extracellular fluid: HCO3 - 24.8 + 16.2 (pH - 7.40) [2]_.

    Parameters
    ----------
    ph : array_like
        pH at 37 °C [1].
    pco2 : array_like
        Carbon dioxide partial pressure at 37 °C [mmHg].

    Returns
    -------
    ndarray
        Standard base excess [mmol/L], NaN where any input is NaN or out of domain.
    """
    (ph,) = floats(ph)
    return np.asarray(bicarbonate(ph, pco2) - 24.8 + 16.2 * (ph - 7.40))


@quiet
def base_excess_lang_zander(ph: ArrayLike, pco2: ArrayLike, hb: ArrayLike, so2: ArrayLike) -> Floats:
    """Base excess of blood corrected for its saturation, Lang & Zander 2002 [3]_: the cross-check.

    Parameters
    ----------
    ph : array_like
        pH at 37 °C [1].
    pco2 : array_like
        Carbon dioxide partial pressure at 37 °C [mmHg].
    hb : array_like
        Haemoglobin [g/dL].
    so2 : array_like
        Functional saturation [0-1].

    Returns
    -------
    ndarray
        Base excess [mmol/L], NaN where any input is NaN or out of domain. Published mean error 0.86 mmol/L.
    """
    ph, pco2, hb, so2 = floats(ph, pco2, hb, so2)
    plasma = 0.0304 * pco2 * power_of_ten(ph - 6.1) - 24.26 + (9.5 + 1.63 * hb) * (ph - 7.4)
    valid = (pco2 >= 0.0) & (hb >= 0.0) & (so2 >= 0.0) & (so2 <= 1.0)
    return keep(valid, (1.0 - 0.0143 * hb) * plasma - 0.2 * hb * (1.0 - so2))


@quiet
def ph_at(ph: ArrayLike, temperature: ArrayLike) -> Floats:
    """Blood pH at body temperature: pH + (T - 37)(-0.0147 + 0.0065 (7.40 - pH)) [2]_.

    Parameters
    ----------
    ph : array_like
        pH at 37 °C [1].
    temperature : array_like
        Body temperature [°C].

    Returns
    -------
    ndarray
        pH at that temperature [1], NaN where any input is NaN.
    """
    ph, temperature = floats(ph, temperature)
    return np.asarray(ph + (temperature - 37.0) * (-0.0147 + 0.0065 * (7.40 - ph)))


@quiet
def ph_at_37(ph: ArrayLike, temperature: ArrayLike) -> Floats:
    """Blood pH at 37 °C from one reported at body temperature: the inverse of :func:`ph_at`.

    Parameters
    ----------
    ph : array_like
        pH at body temperature [1].
    temperature : array_like
        Body temperature [°C].

    Returns
    -------
    ndarray
        pH at 37 °C [1], NaN where any input is NaN.
    """
    ph, temperature = floats(ph, temperature)
    warmer = temperature - 37.0
    return np.asarray((ph - warmer * (-0.0147 + 0.0065 * 7.40)) / (1.0 - 0.0065 * warmer))


@quiet
def pco2_at(pco2: ArrayLike, temperature: ArrayLike) -> Floats:
    """PCO2 at body temperature: PCO2 10^(0.019 (T - 37)) [2]_.

    Parameters
    ----------
    pco2 : array_like
        Carbon dioxide partial pressure at 37 °C [mmHg].
    temperature : array_like
        Body temperature [°C].

    Returns
    -------
    ndarray
        Carbon dioxide partial pressure at that temperature [mmHg], NaN where any input is NaN or PCO2 negative.
    """
    pco2, temperature = floats(pco2, temperature)
    return keep(pco2 >= 0.0, pco2 * power_of_ten(0.019 * (temperature - 37.0)))


@quiet
def pco2_at_37(pco2: ArrayLike, temperature: ArrayLike) -> Floats:
    """PCO2 at 37 °C from one reported at body temperature: the inverse of :func:`pco2_at`.

    Parameters
    ----------
    pco2 : array_like
        Carbon dioxide partial pressure at body temperature [mmHg].
    temperature : array_like
        Body temperature [°C].

    Returns
    -------
    ndarray
        Carbon dioxide partial pressure at 37 °C [mmHg], NaN where any input is NaN or PCO2 negative.
    """
    pco2, temperature = floats(pco2, temperature)
    return keep(pco2 >= 0.0, pco2 * power_of_ten(-0.019 * (temperature - 37.0)))


def _po2_exponent(po2: Floats) -> tuple[Floats, Floats]:
    """Slope d log10 PO2 / dT of blood that keeps its content, and its derivative by ln PO2."""
    bound = np.exp(3.88 * np.log(po2))
    top, bottom = 5.49e-11 * bound + 0.071, 9.72e-9 * bound + 2.30
    slope = 3.88 * bound * (5.49e-11 * bottom - 9.72e-9 * top) / (bottom * bottom)
    return top / bottom, slope


@quiet
def po2_at(po2: ArrayLike, temperature: ArrayLike) -> Floats:
    """PO2 at body temperature of blood that keeps its oxygen [2]_ (the same function as eq 3 of Severinghaus 1979).

    ``PO2 10^((T - 37) (5.49e-11 PO2^3.88 + 0.071) / (9.72e-9 PO2^3.88 + 2.30))``.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure at 37 °C [mmHg].
    temperature : array_like
        Body temperature [°C].

    Returns
    -------
    ndarray
        Oxygen partial pressure at that temperature [mmHg], NaN where any input is NaN or PO2 negative.
    """
    po2, temperature = floats(po2, temperature)
    exponent, _ = _po2_exponent(po2)
    return keep(po2 >= 0.0, po2 * power_of_ten((temperature - 37.0) * exponent))


@quiet
def po2_at_37(po2: ArrayLike, temperature: ArrayLike) -> Floats:
    """PO2 at 37 °C from one reported at body temperature: the inverse of :func:`po2_at`, by Newton on ln PO2.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure at body temperature [mmHg].
    temperature : array_like
        Body temperature [°C].

    Returns
    -------
    ndarray
        Oxygen partial pressure at 37 °C [mmHg], NaN where any input is NaN or PO2 not positive.
    """
    po2, temperature = floats(po2, temperature)
    target, warmer = np.log(po2), (temperature - 37.0) * np.log(10.0)
    x = target - warmer * _po2_exponent(po2)[0]
    for _ in range(20):
        exponent, slope = _po2_exponent(np.exp(x))
        x = x - (x + warmer * exponent - target) / (1.0 + warmer * slope)
    return keep(po2 > 0.0, np.exp(x))
