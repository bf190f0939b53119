"""Methods, constants in force, and the cautions that stand on every document."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import fields
from typing import Any

from worksheet.oxygen.constants import DEFAULT, CarryLimits, Constants
from worksheet.oxygen.quantities import Quantity
from worksheet.review.methods import derived_lines, measured_lines, spread_lines
from worksheet.ward.display import Display, age_words

from .entry_tables import has_any
from .order import Order

# name: what people read, unit, decimals, source
CONSTANTS = {
    "hufner": ("Oxygen bound by active haemoglobin", "mL/g", 2, "Dominguez de Villota 1981, Br J Anaesth 53:1325"),
    "usual_inactive": ("Inactive haemoglobin where never measured", "", 3, "Hüfner 1894: 1.34 = 1.39 × 0.964"),
    "o2_solubility": ("Oxygen solubility of blood, 37 °C", "mL/dL/mmHg", 4, "Christoforides & Hedley-Whyte 1969"),
    "barometric_pressure": ("Barometric pressure where not measured", "mmHg", 0, "station; common practice"),
    "water_vapour": ("Water vapour pressure, 37 °C", "mmHg", 0, "common practice"),
    "respiratory_quotient": ("Respiratory exchange ratio", "", 2, "common practice"),
    "end_capillary_po2": ("End-capillary PO2 for extractable O2", "mmHg", 0,
                          "Siggaard-Andersen & Gøthgen 1995, Acta Anaesthesiol Scand 39 Suppl 107:41"),
    "haldane": ("Affinity of haemoglobin for CO against O2", "", 0, "systematic review, Hum Physiol 2020;46"),
}  # fmt: skip
CHOICES = {
    "curve": ("Dissociation curve", {"tanh": "tanh model, Siggaard-Andersen 1984, 1990, 1993",
                                     "severinghaus": "Severinghaus 1979 with the shifts of Kelman 1966"}),
    "bsa_formula": ("Body surface area", {"mosteller": "Mosteller 1987", "dubois": "Du Bois & Du Bois 1916"}),
}  # fmt: skip
CARRIES = {
    "venous": "Venous sample pairs within",
    "hb": "Haemoglobin carried (not across a transfusion or bleed)",
    "settings": "FiO2, device, PEEP, mean airway pressure carried",
    "flow_before": "Cardiac output carried",
    "flow_after": "Cardiac output read later",
    "temperature": "Temperature carried",
    "spo2": "SpO2 pairs within",
    "vo2_before": "Measured VO2 carried",
    "vo2_after": "Measured VO2 read later",
    "dyshaemoglobins": "COHb, MetHb, SulfHb carried",
}
METHODS = (
    "Content: CaO2 = k · Hb · O2Hb + α · PO2, O2Hb as a share of all haemoglobin (k Dominguez de Villota 1981, α "
    "Christoforides & Hedley-Whyte 1969). Delivery: DO2I = 10 · CI · CaO2. Consumption and extraction by the Fick "
    "principle (1870). Alveolar gas equation in full form (Fenn, Rahn & Otis 1946). Shunt: Berggren 1942.",
    "Change ledger: exact nested Shapley value (Shapley 1953; Owen 1977; Shorrocks 2013, J Econ Inequal 11:99): the "
    "steps add up to the change. Lung is PaO2, through saturation and dissolved oxygen; haemoglobin its amount; "
    "function its dyshaemoglobins, the shift of its curve and what was measured beyond the curve; flow cardiac output "
    "or index.",
    "Uncertainty: first order (JCGM 100:2008) from the standard uncertainties of each measurement; a carried value "
    "grows more uncertain with its age. Bands and ± are 95 %. Lactate: fitted on its "
    "logarithm, from its last turn on (two joined lines, Hudson 1966). Extraction from central venous blood: ± leaves "
    "out how far it stands from mixed venous blood.",
)
CAUTIONS = (
    "For use by clinicians who check each number against its source; local protocols and licensed practice decide.",
    "Not a certified medical device. It gives no order, dose or alarm and replaces no monitor.",
    "For adults. Extracorporeal support, intracardiac shunts and the newborn are outside its equations.",
    "A carried or assumed value is marked where it is used; what was not measured is left open, never filled in.",
)
FOOTER = (
    "For use by clinicians who check each number against the source; local protocols and licensed practice decide; "
    "not a certified medical device."
)


def constants_table(constants: Constants, display: Display) -> dict[str, Any]:
    """Every constant and limit in force; what a site changed is said."""
    rows = [*_numbers(constants, display), *_choices(constants), *_carries(constants.carry)]
    return {
        "head": ["Constant", "In force", "Source"],
        "rows": rows,
        "widths": ["1.2", "auto", "1.6"],
        "sides": ["l", "l", "l"],
        "empty": "",
    }


def equations_table(order: Order) -> dict[str, Any]:
    """The equation and source of each derived quantity that stands in the document."""
    lines = derived_lines(order.sheet.constants, order.display)
    return {
        "head": ["Derived quantity", "Equation", "Source"],
        "rows": [
            [
                _named(line.quantity, line.unit),
                ". ".join(filter(None, (line.equation, line.note))),
                line.quantity.source,
            ]
            for line in lines
            if has_any(order, line.quantity.name)
        ],
        "widths": ["auto", "1.6", "1"],
        "sides": ["l", "l", "l"],
        "empty": "Nothing was derived in this span.",
    }


def uncertainties_table(order: Order) -> dict[str, Any]:
    """Standard uncertainties in force of what was measured in the span, and those that depend on method or age."""
    settings, display = order.sheet.settings, order.display
    rows = [
        [_named(line.quantity, line.unit), line.sd, line.quantity.sd_source or "common practice"]
        for line in measured_lines(settings, display)
        if has_any(order, line.quantity.name) and line.sd != "by method"
    ]
    for name, text in spread_lines(settings, display):
        rows.append([f"{name[:1].upper()}{name[1:]}", text, _spread_source(name)])
    return {
        "head": ["Standard uncertainty of", "1 SD", "Source"],
        "rows": rows,
        "widths": ["1.2", "1", "1.6"],
        "sides": ["l", "l", "l"],
        "empty": "",
    }


def _spread_source(name: str) -> str:
    """Where an uncertainty that depends on a method comes from."""
    if name == "cardiac output, thermodilution":
        return "Stetz 1982, Am Rev Respir Dis 126:1001"
    if name.startswith("cardiac output"):
        return "Peyton & Chong 2010, Anesthesiology 113:1220"
    return "CLIA, 42 CFR 493.931" if name.startswith("haemoglobin by") else "common practice"


def _named(quantity: Quantity, unit: str) -> str:
    return f"{quantity.symbol} ({unit})" if unit else quantity.symbol


def _numbers(constants: Constants, display: Display) -> Iterator[list[Any]]:
    for name, (words, unit, decimals, source) in CONSTANTS.items():
        value, usual = getattr(constants, name), getattr(DEFAULT, name)
        text = f"{display.number(value, decimals)} {unit}".rstrip()
        if value != usual:
            source = f"chosen by the unit (usual: {display.number(usual, decimals)})"
        yield [words, text, source]


def _choices(constants: Constants) -> Iterator[list[Any]]:
    for name, (words, options) in CHOICES.items():
        value = getattr(constants, name)
        yield [words, options.get(value, value), "default" if value == getattr(DEFAULT, name) else "chosen by the unit"]


def _carries(carry: CarryLimits) -> Iterator[list[Any]]:
    for item in fields(carry):
        value, usual = getattr(carry, item.name), item.default
        source = "common practice" if value == usual else "chosen by the unit"
        yield [CARRIES[item.name], f"{age_words(value)}", source]
