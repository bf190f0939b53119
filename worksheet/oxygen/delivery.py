"""Oxygen delivery, consumption and extraction; body surface; the carbon dioxide gap.

References
----------
.. [1] Fick A. Über die Messung des Blutquantums in den Herzventrikeln. Sitzungsber Phys-Med Ges Würzburg 1870;2:16.
.. [2] Mosteller RD. Simplified calculation of body-surface area. N Engl J Med 1987;317:1098.
   https://doi.org/10.1056/NEJM198710223171717
.. [3] Du Bois D, Du Bois EF. A formula to estimate the approximate surface area if height and weight be known.
   Arch Intern Med 1916;17:863-871.
.. [4] Ospina-Tascón GA et al. Can venous-to-arterial carbon dioxide differences reflect microcirculatory alterations
   in patients with septic shock? Intensive Care Med 2016;42:211-221.
.. [5] Mekontso-Dessap A et al. Combination of venoarterial PCO2 difference with arteriovenous O2 content difference to
   detect anaerobic metabolism in patients. Intensive Care Med 2002;28:272-277.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from .constants import Constants
from .domain import Floats, floats, keep, quiet

_DL_PER_L = 10.0


@quiet
def oxygen_delivery(flow: ArrayLike, cao2: ArrayLike) -> Floats:
    """Oxygen delivery: 10 Q CaO2 (common practice).

    Parameters
    ----------
    flow : array_like
        Cardiac output [L/min], or cardiac index [L/min/m²] for the indexed value.
    cao2 : array_like
        Arterial oxygen content [mL/dL].

    Returns
    -------
    ndarray
        DO2 [mL/min] or DO2I [mL/min/m²], NaN where any input is NaN or negative.
    """
    flow, cao2 = floats(flow, cao2)
    return keep((flow >= 0.0) & (cao2 >= 0.0), _DL_PER_L * flow * cao2)


@quiet
def oxygen_consumption(flow: ArrayLike, cao2: ArrayLike, cvo2: ArrayLike) -> Floats:
    """Oxygen consumption by Fick's principle [1]_: 10 Q (CaO2 - CvO2); leaves out what the lung itself uses.

    Parameters
    ----------
    flow : array_like
        Cardiac output [L/min], or cardiac index [L/min/m²] for the indexed value.
    cao2, cvo2 : array_like
        Arterial and mixed-venous oxygen content [mL/dL].

    Returns
    -------
    ndarray
        VO2 [mL/min] or VO2I [mL/min/m²], NaN where any input is NaN, negative, or the venous content is the higher.
    """
    flow, cao2, cvo2 = floats(flow, cao2, cvo2)
    valid = (flow >= 0.0) & (cvo2 >= 0.0) & (cvo2 <= cao2)
    return keep(valid, _DL_PER_L * flow * (cao2 - cvo2))


@quiet
def extraction_ratio(cao2: ArrayLike, cvo2: ArrayLike) -> Floats:
    """Oxygen extraction ratio: (CaO2 - CvO2)/CaO2 (common practice); an estimate with a central-venous sample.

    Parameters
    ----------
    cao2, cvo2 : array_like
        Arterial and venous oxygen content [mL/dL].

    Returns
    -------
    ndarray
        O2ER [0-1], NaN where any input is NaN, negative, or the venous content is the higher.
    """
    cao2, cvo2 = floats(cao2, cvo2)
    return keep((cao2 > 0.0) & (cvo2 >= 0.0) & (cvo2 <= cao2), (cao2 - cvo2) / cao2)


@quiet
def bsa_mosteller(height: ArrayLike, weight: ArrayLike) -> Floats:
    """Body surface area, Mosteller 1987 [2]_: sqrt(height weight / 3600).

    Parameters
    ----------
    height : array_like
        Height [cm].
    weight : array_like
        Weight [kg].

    Returns
    -------
    ndarray
        Body surface area [m²], NaN where any input is NaN or not positive.
    """
    height, weight = floats(height, weight)
    return keep((height > 0.0) & (weight > 0.0), np.sqrt(height * weight / 3600.0))


@quiet
def bsa_dubois(height: ArrayLike, weight: ArrayLike) -> Floats:
    """Body surface area, Du Bois & Du Bois 1916 [3]_: 0.007184 height^0.725 weight^0.425.

    Parameters
    ----------
    height : array_like
        Height [cm].
    weight : array_like
        Weight [kg].

    Returns
    -------
    ndarray
        Body surface area [m²], NaN where any input is NaN or not positive.
    """
    height, weight = floats(height, weight)
    return keep((height > 0.0) & (weight > 0.0), 0.007184 * np.power(height, 0.725) * np.power(weight, 0.425))


def body_surface(height: ArrayLike, weight: ArrayLike, constants: Constants) -> Floats:
    """Body surface area by the formula that the site chose.

    Parameters
    ----------
    height : array_like
        Height [cm].
    weight : array_like
        Weight [kg].
    constants : Constants
        Of which ``bsa_formula`` chooses.

    Returns
    -------
    ndarray
        Body surface area [m²], NaN where any input is NaN or not positive.
    """
    if constants.bsa_formula == "dubois":
        return bsa_dubois(height, weight)
    return bsa_mosteller(height, weight)


@quiet
def co2_gap(pvco2: ArrayLike, paco2: ArrayLike) -> Floats:
    """Venous less arterial PCO2; above 6 mmHg suggests a flow too low for CO2 production [4]_.

    Parameters
    ----------
    pvco2, paco2 : array_like
        Venous and arterial carbon dioxide partial pressure [mmHg].

    Returns
    -------
    ndarray
        PCO2 gap [mmHg], NaN where any input is NaN or negative; may be negative itself.
    """
    pvco2, paco2 = floats(pvco2, paco2)
    return keep((pvco2 >= 0.0) & (paco2 >= 0.0), pvco2 - paco2)


@quiet
def co2_o2_ratio(gap: ArrayLike, cao2: ArrayLike, cvo2: ArrayLike) -> Floats:
    """PCO2 gap over the oxygen content difference; above 1.4 with raised lactate suggests anaerobic metabolism [5]_.

    It rises with haemodilution alone (Dubin 2017, Ann Intensive Care 7:65).

    Parameters
    ----------
    gap : array_like
        Venous less arterial PCO2 [mmHg], or CO2 content [mL/dL] for the ratio of contents.
    cao2, cvo2 : array_like
        Arterial and venous oxygen content [mL/dL].

    Returns
    -------
    ndarray
        Ratio [mmHg dL/mL, or 1 for contents], NaN where any input is NaN or the content difference is not positive.
    """
    gap, cao2, cvo2 = floats(gap, cao2, cvo2)
    return keep((cvo2 >= 0.0) & (cao2 > cvo2), gap / (cao2 - cvo2))
