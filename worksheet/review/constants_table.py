"""The constants in force at a unit, in words: what each is, its value, and its source or that the unit chose it."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, fields

from worksheet.oxygen.constants import DEFAULT, CarryLimits, Constants
from worksheet.ward.display import Display, age_words

# name: what people read, unit, decimals, source
CONSTANTS = {
    "hufner": ("oxygen bound by active haemoglobin", "mL/g", 2, "Dominguez de Villota 1981, Br J Anaesth 53:1325"),
    "usual_inactive": ("inactive haemoglobin where never measured", "", 3, "Hüfner 1894: 1.34 = 1.39 × 0.964"),
    "o2_solubility": ("oxygen solubility of blood, 37 °C", "mL/dL/mmHg", 4, "Christoforides & Hedley-Whyte 1969"),
    "barometric_pressure": ("barometric pressure where not measured", "mmHg", 0, "station; common practice"),
    "water_vapour": ("water vapour pressure, 37 °C", "mmHg", 0, "common practice"),
    "respiratory_quotient": ("respiratory exchange ratio", "", 2, "common practice"),
    "end_capillary_po2": ("end-capillary PO2 for extractable O2", "mmHg", 0,
                          "Siggaard-Andersen & Gøthgen 1995, Acta Anaesthesiol Scand 39 Suppl 107:41"),
    "haldane": ("affinity of haemoglobin for CO against O2", "", 0, "Roughton & Darling 1944 (from memory)"),
}  # fmt: skip
CHOICES = {
    "curve": ("dissociation curve", {"tanh": "tanh model, Siggaard-Andersen 1984, 1990, 1993",
                                     "severinghaus": "Severinghaus 1979 with the shifts of Kelman 1966"}),
    "bsa_formula": ("body surface area", {"mosteller": "Mosteller 1987", "dubois": "Du Bois & Du Bois 1916"}),
}  # fmt: skip
CARRIES = {
    "venous": "venous sample pairs within",
    "hb": "haemoglobin carried (not across a transfusion or bleed)",
    "settings": "FiO2, device, PEEP, mean airway pressure carried",
    "flow_before": "cardiac output carried",
    "flow_after": "cardiac output read later",
    "temperature": "temperature carried",
    "spo2": "SpO2 pairs within",
    "vo2_before": "measured VO2 carried",
    "vo2_after": "measured VO2 read later",
    "dyshaemoglobins": "COHb, MetHb, SulfHb carried",
}


@dataclass(frozen=True)
class InForce:
    """One constant as it is in force."""

    words: str
    value: str
    source: str


def constants_in_force(constants: Constants, display: Display) -> Iterator[InForce]:
    """Every constant; what the unit chose says so, with the usual value beside it."""
    for name, (label, unit, decimals, source) in CONSTANTS.items():
        value, usual = getattr(constants, name), getattr(DEFAULT, name)
        told = source if value == usual else f"chosen by the unit (usual: {display.number(usual, decimals)}; {source})"
        yield InForce(label, f"{display.number(value, decimals)} {unit}".rstrip(), told)
    for name, (label, options) in CHOICES.items():
        value = getattr(constants, name)
        chosen = "usual choice" if value == getattr(DEFAULT, name) else "chosen by the unit"
        yield InForce(label, options.get(value, value), chosen)


def carry_in_force(carry: CarryLimits) -> Iterator[InForce]:
    """How long each value may stand in for one that was not measured."""
    for item in fields(carry):
        value, usual = float(getattr(carry, item.name)), float(getattr(CarryLimits(), item.name))
        told = "common practice" if value == usual else f"chosen by the unit (usual: {age_words(usual)})"
        yield InForce(CARRIES[item.name], age_words(value), told)
