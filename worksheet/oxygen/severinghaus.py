"""Severinghaus's equation of the standard dissociation curve, its inverse, and the shifts that go with it.

References
----------
.. [1] Severinghaus JW. Simple, accurate equations for human blood O2 dissociation computations. J Appl Physiol
   1979;46:599-602. https://doi.org/10.1152/jappl.1979.46.3.599
.. [2] Ellis RK. Determination of PO2 from saturation. J Appl Physiol 1989;67:902.
   https://doi.org/10.1152/jappl.1989.67.2.902
.. [3] Kelman GR. Digital computer subroutine for the conversion of oxygen tension into saturation. J Appl Physiol
   1966;21:1375-1376. https://doi.org/10.1152/jappl.1966.21.4.1375
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from .domain import Floats, floats, keep, power_of_ten, quiet


@quiet
def saturation_severinghaus(po2: ArrayLike) -> Floats:
    """Saturation of standard blood, Severinghaus 1979 [1]_: S = c/(c + 23400), c = P^3 + 150 P.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure at pH 7.40 and 37 °C [mmHg].

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN where PO2 is NaN or negative. Published error bound 0.0055.
    """
    (po2,) = floats(po2)
    c = po2 * (po2 * po2 + 150.0)
    return keep(po2 >= 0.0, 1.0 / (1.0 + 23400.0 / c))


@quiet
def po2_ellis(so2: ArrayLike) -> Floats:
    """PO2 of standard blood from saturation: Ellis 1989 [2]_, the exact inverse of Severinghaus 1979.

    Written without the difference of two cube roots, which cancels at small saturation.

    Parameters
    ----------
    so2 : array_like
        Functional saturation, 0 to below 1 [0-1].

    Returns
    -------
    ndarray
        Oxygen partial pressure at pH 7.40 and 37 °C [mmHg], NaN out of domain.
    """
    (so2,) = floats(so2)
    q = 11700.0 * so2 / (1.0 - so2)
    u = np.cbrt(q + np.sqrt(q * q + 125000.0))
    v = 50.0 / u
    return keep((so2 >= 0.0) & (so2 < 1.0), 2.0 * q / (u * u + 50.0 + v * v))


@quiet
def kelman_equivalent_po2(
    po2: ArrayLike, ph: ArrayLike = 7.4, pco2: ArrayLike = 40.0, temperature: ArrayLike = 37.0
) -> Floats:
    """PO2 of standard blood with the same saturation: Kelman's shifts [3]_.

    ``P 10^(0.024 (37 - T) + 0.40 (pH - 7.40) + 0.06 log10(40 / PCO2))``: pH at constant PCO2.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    temperature : array_like
        Temperature all pressures hold at [°C].

    Returns
    -------
    ndarray
        Equivalent oxygen partial pressure [mmHg], NaN out of domain.
    """
    po2, ph, pco2, temperature = floats(po2, ph, pco2, temperature)
    shift = 0.024 * (37.0 - temperature) + 0.40 * (ph - 7.40) - 0.06 * np.log10(pco2 / 40.0)
    return keep((po2 >= 0.0) & (pco2 > 0.0), po2 * power_of_ten(shift))


def saturation_severinghaus_kelman(
    po2: ArrayLike, ph: ArrayLike = 7.4, pco2: ArrayLike = 40.0, temperature: ArrayLike = 37.0
) -> Floats:
    """Saturation by Severinghaus 1979 at the PO2 that Kelman's shifts make equivalent.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    temperature : array_like
        Temperature all pressures hold at [°C].

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN out of domain.
    """
    return saturation_severinghaus(kelman_equivalent_po2(po2, ph, pco2, temperature))


@quiet
def severinghaus_ph_coefficient(po2: ArrayLike) -> Floats:
    """Severinghaus's own Bohr coefficient [1]_, eq 4: d ln P / d pH = (P/26.6)^0.184 - 2.2.

    It already contains the effect of CO2: never add a PCO2 term to it. For tests and comparison.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].

    Returns
    -------
    ndarray
        Change of ln PO2 for one pH unit at constant saturation [1].
    """
    (po2,) = floats(po2)
    return keep(po2 >= 0.0, np.power(po2 / 26.6, 0.184) - 2.2)
