"""Constants a site may choose, as one frozen object; every function that needs one takes it as an argument."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType


@dataclass(frozen=True)
class CarryLimits:
    """For how long a value stands in for one that was not measured [h].

    Defaults are common practice; a site may change them. ``before``: how old a value may be; ``after``: how much
    later it may have been read.
    """

    venous: float = 0.5  # either side
    hb: float = 12.0  # and never across a recorded transfusion or bleed
    settings: float = 6.0  # FiO2, device, PEEP, mean airway pressure: until changed
    flow_before: float = 1.0
    flow_after: float = 0.5
    temperature: float = 4.0
    spo2: float = 10 / 60  # either side
    vo2_before: float = 1.0
    vo2_after: float = 0.5
    dyshaemoglobins: float = 4.0


@dataclass(frozen=True)
class Constants:
    """Physiological constants in force at a site.

    Attributes
    ----------
    hufner : float
        Oxygen bound per gram of active haemoglobin [mL/g]. 4 x 22,394 / 64,458 = 1.39; measured 1.392 +- 0.007,
        Dominguez de Villota 1981, Br J Anaesth 53:1325.
    usual_inactive : float
        Inactive share of haemoglobin taken where dyshaemoglobins were never measured [0-1]; 1.39 x (1 - 0.036) is the
        bedside figure 1.34 (Hüfner 1894).
    o2_solubility : float
        Oxygen solubility of blood at 37 °C [mL/dL/mmHg]. Christoforides & Hedley-Whyte 1969.
    barometric_pressure : float
        Station pressure where none was measured [mmHg].
    water_vapour : float
        Water vapour pressure at 37 °C [mmHg].
    respiratory_quotient : float
        Respiratory exchange ratio R for the alveolar gas equation. Common practice.
    end_capillary_po2 : float
        Pressure down to which oxygen counts as extractable [mmHg]; 5.0 kPa, Siggaard-Andersen & Gøthgen 1995.
    haldane : float
        Relative affinity M of haemoglobin for CO over O2 [1]; median 218 (191-257) of a systematic review, Hum Physiol
        2020;46, doi 10.1134/S0362119720020048. Only for the pressure of carbon monoxide: where COHb is measured it
        cancels.
    curve : str
        ``"tanh"`` (Siggaard-Andersen 1984/1990) or ``"severinghaus"`` (1979, with Kelman's shifts).
    bsa_formula : str
        ``"mosteller"`` (1987) or ``"dubois"`` (1916).
    """

    hufner: float = 1.39
    usual_inactive: float = 0.036
    o2_solubility: float = 0.0031
    barometric_pressure: float = 760.0
    water_vapour: float = 47.0
    respiratory_quotient: float = 0.8
    end_capillary_po2: float = 38.0
    haldane: float = 218.0
    curve: str = "tanh"
    bsa_formula: str = "mosteller"
    carry: CarryLimits = field(default_factory=CarryLimits)

    def problems(self) -> list[str]:
        """What a site must not choose, in words: one sentence for each constant outside :data:`POSSIBLE`.

        Returns
        -------
        list of str
            Empty where every constant can be in force.
        """
        found = [
            f"{name}: {getattr(self, name):g} is outside {low:g} to {high:g}"
            for name, (low, high) in POSSIBLE.items()
            if not low <= getattr(self, name) <= high
        ]
        for name, words in CHOICES.items():
            if getattr(self, name) not in words:
                found.append(f"{name}: {getattr(self, name)!r} is not one of {', '.join(words)}")
        return found


# Outside these no published value lies (hufner: 1.31 to 1.39 in textbooks, 1.368 to 1.392 measured; R of living adults;
# pressures where people live and work). Common practice.
POSSIBLE: Mapping[str, tuple[float, float]] = MappingProxyType(
    {
        "hufner": (1.30, 1.40),
        "usual_inactive": (0.0, 0.10),
        "o2_solubility": (0.0025, 0.0035),
        "barometric_pressure": (250.0, 820.0),
        "water_vapour": (30.0, 65.0),
        "respiratory_quotient": (0.6, 1.3),
        "end_capillary_po2": (15.0, 60.0),
        "haldane": (150.0, 300.0),
    }
)
CHOICES: Mapping[str, tuple[str, ...]] = MappingProxyType(
    {"curve": ("tanh", "severinghaus"), "bsa_formula": ("mosteller", "dubois")}
)

DEFAULT = Constants()
