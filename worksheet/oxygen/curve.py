"""The oxyhaemoglobin dissociation curve, as the rest of the program uses it.

Default: the tanh model of Siggaard-Andersen, with the displacement as a sum of named terms and carbon monoxide by
Haldane's law. Site choice and cross-check: Severinghaus 1979 with Kelman's shifts. Saturation is functional,
O2Hb/(O2Hb + HHb), everywhere here. The parts are in their own modules and offered here under one name.

References
----------
.. [1] Siggaard-Andersen O, Wimberley PD, Göthgen I, Siggaard-Andersen M. A mathematical model of the
   hemoglobin-oxygen dissociation curve of human blood and of the oxygen partial pressure as a function of
   temperature. Clin Chem 1984;30:1646-1651.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from .carbon_monoxide import carbon_monoxide_pressure, co_share, po2_with_co, saturation_with_co
from .constants import Constants
from .domain import Floats, floats, keep, quiet
from .half_saturation import (
    P50_FULL,
    P50_WITH_INTERVAL,
    displacement_from_pair,
    p50_grade,
    p50_in_vivo,
    p50_of_displacement,
    p50_standard,
)
from .severinghaus import (
    kelman_equivalent_po2,
    po2_ellis,
    saturation_severinghaus,
    saturation_severinghaus_kelman,
    severinghaus_ph_coefficient,
)
from .tanh_model import DPG_STANDARD, displacement, displacement_terms, saturation_from_displacement

__all__ = [
    "P50_FULL",
    "P50_WITH_INTERVAL",
    "carbon_monoxide_pressure",
    "co_share",
    "displacement",
    "displacement_from_pair",
    "displacement_terms",
    "kelman_equivalent_po2",
    "p50_grade",
    "p50_in_vivo",
    "p50_of_displacement",
    "p50_standard",
    "po2_ellis",
    "po2_tanh",
    "po2_with_co",
    "saturation",
    "saturation_from_displacement",
    "saturation_severinghaus",
    "saturation_severinghaus_kelman",
    "saturation_tanh",
    "saturation_with_co",
    "severinghaus_ph_coefficient",
]


@quiet
def saturation_tanh(
    po2: ArrayLike,
    ph: ArrayLike = 7.4,
    pco2: ArrayLike = 40.0,
    temperature: ArrayLike = 37.0,
    cohb: ArrayLike = 0.0,
    methb: ArrayLike = 0.0,
    hbf: ArrayLike = 0.0,
    dpg: ArrayLike = DPG_STANDARD,
) -> Floats:
    """Saturation from PO2, Siggaard-Andersen's tanh model [1]_ with Haldane's law for carbon monoxide.

    Carbon monoxide and oxygen share the curve: the saturation with either, ``u``, is the curve at
    ``PO2 u / O2 share``. With COHb measured the Haldane constant cancels (see :func:`carbon_monoxide_pressure`).

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    temperature : array_like
        Temperature all pressures hold at; 37 for what an analyser reports [°C].
    cohb, methb, hbf : array_like
        Carboxy-, met- and fetal haemoglobin, share of total; small negative readings count as 0 [0-1].
    dpg : array_like
        2,3-diphosphoglycerate in red cells [mmol/L].

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN where any input is NaN or out of domain.
    """
    po2, temperature, cohb, methb = floats(po2, temperature, cohb, methb)
    methb = np.maximum(methb, 0.0)
    a = displacement(ph, pco2, methb, hbf, dpg)
    return saturation_with_co(po2, a, temperature, co_share(cohb, methb))


@quiet
def po2_tanh(
    so2: ArrayLike,
    ph: ArrayLike = 7.4,
    pco2: ArrayLike = 40.0,
    temperature: ArrayLike = 37.0,
    cohb: ArrayLike = 0.0,
    methb: ArrayLike = 0.0,
    hbf: ArrayLike = 0.0,
    dpg: ArrayLike = DPG_STANDARD,
) -> Floats:
    """PO2 from saturation: the inverse of :func:`saturation_tanh`.

    Parameters
    ----------
    so2 : array_like
        Functional saturation, 0 to below 1 [0-1].
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    temperature : array_like
        Temperature all pressures hold at [°C].
    cohb, methb, hbf : array_like
        Carboxy-, met- and fetal haemoglobin, share of total [0-1].
    dpg : array_like
        2,3-diphosphoglycerate in red cells [mmol/L].

    Returns
    -------
    ndarray
        Oxygen partial pressure [mmHg], NaN where any input is NaN or out of domain.
    """
    so2, temperature, cohb, methb = floats(so2, temperature, cohb, methb)
    methb = np.maximum(methb, 0.0)
    a = displacement(ph, pco2, methb, hbf, dpg)
    return po2_with_co(so2, a, temperature, co_share(cohb, methb))


def saturation(
    po2: ArrayLike,
    ph: ArrayLike,
    pco2: ArrayLike,
    temperature: ArrayLike,
    cohb: ArrayLike,
    methb: ArrayLike,
    constants: Constants,
) -> Floats:
    """Saturation by the curve that the site chose.

    Parameters
    ----------
    po2 : array_like
        Oxygen partial pressure [mmHg].
    ph : array_like
        pH [1].
    pco2 : array_like
        Carbon dioxide partial pressure [mmHg].
    temperature : array_like
        Temperature all pressures hold at; 37 for what an analyser reports [°C].
    cohb, methb : array_like
        Carboxy- and methaemoglobin, share of total; 0 where not known. Severinghaus's curve has no term for them [0-1].
    constants : Constants
        Of which ``curve`` chooses.

    Returns
    -------
    ndarray
        Functional saturation [0-1], NaN where any input is NaN or out of domain.
    """
    if constants.curve == "severinghaus":
        result = saturation_severinghaus_kelman(po2, ph, pco2, temperature)
        return keep(~np.isnan(np.add(cohb, methb)), result)
    return saturation_tanh(po2, ph, pco2, temperature, cohb, methb)
