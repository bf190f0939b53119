"""Each derived quantity as an equation that people can check: in symbols, and with the numbers of one row put in.

The numbers are those of :mod:`worksheet.oxygen.derive`; ``right`` works an equation out again from its terms, and a
test holds the two to each other.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np

from worksheet.oxygen.chain import chain_inputs, either
from worksheet.oxygen.constants import Constants
from worksheet.oxygen.derive import p50_is_venous
from worksheet.oxygen.pairs import measured_saturation
from worksheet.oxygen.quantities import CATALOGUE
from worksheet.ward.display import Display
from worksheet.ward.sheet import Sheet

Terms = Mapping[str, float]

# Term: symbol, decimals shown in an equation, unit of the equation (percent never: fractions, as the equation counts)
TERMS: Mapping[str, tuple[str, int, str]] = {
    "k": ("k", 2, "mL/g"), "alpha": ("α", 4, "mL/dL/mmHg"), "saturation": ("S", 3, ""), "inactive": ("d", 3, ""),
    "cv_saturation": ("Sv", 3, ""), "venous_hb": ("Hb", 1, "g/dL"), "venous_po2": ("PvO2", 0, "mmHg"),
    "venous_pco2": ("PvCO2", 0, "mmHg"), "index": ("CI", 2, "L/min/m²"), "output": ("CO", 2, "L/min"),
    "pb": ("PB", 0, "mmHg"), "ph2o": ("PH2O", 0, "mmHg"), "r": ("R", 2, ""), "cco2": ("Cc'O2", 2, "mL/dL"),
    "calculated": ("sO2 calculated", 3, ""), "measured": ("sO2", 3, ""), "venous_measured": ("SvO2", 3, ""),
    "fio2": ("FiO2", 2, ""),
    "spo2": ("SpO2", 2, ""), "po2": ("PaO2", 0, "mmHg"), "pco2": ("PaCO2", 0, "mmHg"), "hb": ("Hb", 1, "g/dL"),
    "ph": ("pH", 2, ""), "mean_airway_pressure": ("Paw", 0, "cmH2O"), "respiratory_rate": ("RR", 0, "1/min"),
    "height": ("height", 0, "cm"), "weight": ("weight", 1, "kg"), "cao2": ("CaO2", 2, "mL/dL"),
    "cvo2": ("CvO2", 2, "mL/dL"), "avdo2": ("Ca–vO2", 2, "mL/dL"), "pao2_alveolar": ("PAO2", 0, "mmHg"),
    "co2_gap": ("PCO2 gap", 1, "mmHg"), "temperature": ("T", 1, "°C"), "cohb": ("COHb", 3, ""),
    "methb": ("MetHb", 3, ""), "end_capillary": ("PcO2", 0, "mmHg"), "cardiac_output": ("CO", 2, "L/min"),
    "cardiac_index": ("CI", 2, "L/min/m²"), "bsa": ("BSA", 2, "m²"), "vo2_measured": ("VO2", 0, "mL/min"),
}  # fmt: skip


@dataclass(frozen=True)
class Equation:
    """One published equation; ``put`` is the same with a place for each number, empty where it needs a model."""

    text: str
    put: str
    terms: tuple[str, ...]
    right: Callable[[Terms], float] | None
    note: str = ""


def _content(t: Terms, hb: str, share: str, po2: str) -> float:
    return t["k"] * t[hb] * (1 - t["inactive"]) * t[share] + t["alpha"] * t[po2]


_FICK = "By Fick; a measured VO2 stands in where it cannot be had."
EQUATIONS: Mapping[str, Equation] = {
    "cao2": Equation(
        "CaO2 = k · Hb · (1 − d) · S + α · PaO2", "{k} × {hb} × (1 − {inactive}) × {saturation} + {alpha} × {po2}",
        ("k", "hb", "inactive", "saturation", "alpha", "po2"), lambda t: _content(t, "hb", "saturation", "po2"),
        "S is the saturation of the haemoglobin that can carry oxygen, d the share that cannot (COHb, MetHb, SulfHb).",
    ),
    "cvo2": Equation(
        "CvO2 = k · Hb · (1 − d) · Sv + α · PvO2", "",
        ("k", "venous_hb", "inactive", "alpha", "venous_po2"), None,
        "As CaO2, with what the paired venous sample measured; what it did not measure is taken from the arterial one.",
    ),
    "avdo2": Equation("Ca–vO2 = CaO2 − CvO2", "{cao2} − {cvo2}", ("cao2", "cvo2"), lambda t: t["cao2"] - t["cvo2"]),
    "dissolved_share": Equation("dissolved share = α · PaO2 / CaO2", "{alpha} × {po2} / {cao2}",
                                ("alpha", "po2", "cao2"), lambda t: t["alpha"] * t["po2"] / t["cao2"]),
    "do2": Equation("DO2 = 10 · CO · CaO2", "10 × {output} × {cao2}", ("output", "cao2"),
                    lambda t: 10 * t["output"] * t["cao2"], "10 turns dL into L."),
    "do2i": Equation("DO2I = 10 · CI · CaO2", "10 × {index} × {cao2}", ("index", "cao2"),
                     lambda t: 10 * t["index"] * t["cao2"], "10 turns dL into L."),
    "vo2": Equation("VO2 = 10 · CO · (CaO2 − CvO2)", "10 × {output} × ({cao2} − {cvo2})", ("output", "cao2", "cvo2"),
                    lambda t: 10 * t["output"] * (t["cao2"] - t["cvo2"]), _FICK),
    "vo2i": Equation("VO2I = 10 · CI · (CaO2 − CvO2)", "10 × {index} × ({cao2} − {cvo2})", ("index", "cao2", "cvo2"),
                     lambda t: 10 * t["index"] * (t["cao2"] - t["cvo2"]), _FICK),
    "o2er": Equation("O2ER = (CaO2 − CvO2) / CaO2", "({cao2} − {cvo2}) / {cao2}", ("cao2", "cvo2"),
                     lambda t: (t["cao2"] - t["cvo2"]) / t["cao2"]),
    "pf_ratio": Equation("P/F = PaO2 / FiO2", "{po2} / {fio2}", ("po2", "fio2"), lambda t: t["po2"] / t["fio2"]),
    "sf_ratio": Equation("S/F = SpO2 (%) / FiO2", "100 × {spo2} / {fio2}", ("spo2", "fio2"),
                         lambda t: 100 * t["spo2"] / t["fio2"],
                         "Reported up to an SpO2 of 97 % only: above, the curve is flat."),
    "pao2_alveolar": Equation(
        "PAO2 = FiO2 · (PB − PH2O) − PaCO2 · (FiO2 + (1 − FiO2) / R)",
        "{fio2} × ({pb} − {ph2o}) − {pco2} × ({fio2} + (1 − {fio2}) / {r})", ("fio2", "pb", "ph2o", "pco2", "r"),
        lambda t: t["fio2"] * (t["pb"] - t["ph2o"]) - t["pco2"] * (t["fio2"] + (1 - t["fio2"]) / t["r"]),
    ),
    "aa_gradient": Equation("A–a = PAO2 − PaO2", "{pao2_alveolar} − {po2}", ("pao2_alveolar", "po2"),
                            lambda t: t["pao2_alveolar"] - t["po2"]),
    "a_a_ratio": Equation("a/A = PaO2 / PAO2", "{po2} / {pao2_alveolar}", ("po2", "pao2_alveolar"),
                          lambda t: t["po2"] / t["pao2_alveolar"]),
    "shunt_fraction": Equation(
        "Qs/Qt = (Cc'O2 − CaO2) / (Cc'O2 − CvO2)", "({cco2} − {cao2}) / ({cco2} − {cvo2})", ("cco2", "cao2", "cvo2"),
        lambda t: (t["cco2"] - t["cao2"]) / (t["cco2"] - t["cvo2"]),
        "Cc'O2 is the content of end-capillary blood at alveolar PO2; 0 is reported where CaO2 is above it.",
    ),
    "oxygenation_index": Equation(
        "OI = 100 · FiO2 · Paw / PaO2", "100 × {fio2} × {mean_airway_pressure} / {po2}",
        ("fio2", "mean_airway_pressure", "po2"), lambda t: 100 * t["fio2"] * t["mean_airway_pressure"] / t["po2"],
    ),
    "rox_index": Equation(
        "ROX = (SpO2 (%) / FiO2) / RR", "100 × {spo2} / {fio2} / {respiratory_rate}",
        ("spo2", "fio2", "respiratory_rate"), lambda t: 100 * t["spo2"] / t["fio2"] / t["respiratory_rate"],
    ),
    "so2_from_po2": Equation(
        "ln(S / (1 − S)) = 1.8747 + x + (3.5 + a) · tanh(0.5343 · x), x = ln(PaO2 / 52.5) − a", "",
        ("po2", "ph", "pco2", "cohb", "methb"), None,
        "a = −0.88 · (pH − 7.40) + 0.048 · ln(PaCO2 / 40) − 0.7 · MetHb is the shift of the curve; COHb enters by "
        "Haldane's law.",
    ),
    "gap_calculated": Equation("gap = calculated saturation − SpO2", "{calculated} − {spo2}", ("calculated", "spo2"),
                               lambda t: t["calculated"] - t["spo2"],
                               "The analyser's own calculated saturation, else the curve's."),
    "gap_measured": Equation("gap = measured saturation − SpO2", "{measured} − {spo2}", ("measured", "spo2"),
                             lambda t: t["measured"] - t["spo2"]),
    "p50": Equation(
        "S(P50) = 0.5 on the curve that goes through the measured PaO2 and sO2", "",
        ("po2", "measured", "cohb", "methb"), None,
        "The displacement of the curve is solved from the measured pair; only for sO2 of 30 to 97 %. COHb enters by "
        "Haldane's law. A paired venous sample, which says more, goes before the arterial one.",
    ),
    "extractable_o2": Equation(
        "extractable O2 = CaO2 − content of the same blood at PcO2 and body temperature", "",
        ("cao2", "end_capillary", "ph", "pco2", "temperature", "inactive"), None,
        "On the patient's own curve, in arterial blood: the shift by CO2 taken up on the way is left out.",
    ),
    "predicted_spo2": Equation("SpO2 = 110 − 25 · R, R = absorbance at 660 nm / at 940 nm of this blood", "",
                               ("saturation", "cohb", "methb"), None,
                               "It explains a gap; it never corrects a reading. Its straight line reads "
                               "without dyshaemoglobins 2 to 3 points high at 97 %, 6 at 85 %."),
    "co2_gap": Equation("PCO2 gap = PvCO2 − PaCO2", "{venous_pco2} − {pco2}", ("venous_pco2", "pco2"),
                        lambda t: t["venous_pco2"] - t["pco2"]),
    "co2_o2_ratio": Equation("PCO2 gap / Ca–vO2", "{co2_gap} / {avdo2}", ("co2_gap", "avdo2"),
                             lambda t: t["co2_gap"] / t["avdo2"]),
    "bsa": Equation("BSA = √(height · weight / 3600)", "√({height} × {weight} / 3600)", ("height", "weight"),
                    lambda t: math.sqrt(t["height"] * t["weight"] / 3600)),
}  # fmt: skip
P50_VENOUS = Equation(
    "S(P50) = 0.5 on the curve that goes through the measured venous PO2 and saturation", "",
    ("venous_po2", "venous_measured", "cohb", "methb"), None,
    "From the paired venous sample, which says more than the arterial one: there the curve is steep. The displacement "
    "of the curve is solved from the pair; only for a saturation of 30 to 97 %. COHb enters by Haldane's law.",
)  # fmt: skip
DUBOIS = Equation("BSA = 0.007184 · weight^0.425 · height^0.725", "0.007184 × {weight}^0.425 × {height}^0.725",
                  ("height", "weight"), lambda t: 0.007184 * t["weight"] ** 0.425 * t["height"] ** 0.725)  # fmt: skip
CURVE_SEVERINGHAUS = Equation(
    "S = 1 / (23400 / (P³ + 150 · P) + 1), P = PaO2 moved by the shifts of pH and PCO2", "",
    ("po2", "ph", "pco2", "cohb", "methb"), None,
    "Severinghaus 1979 with the shifts of Kelman 1966, as this site chose.",
)  # fmt: skip


def equation_of(name: str, constants: Constants) -> Equation:
    """The equation in force for a derived quantity."""
    if name == "bsa" and constants.bsa_formula == "dubois":
        return DUBOIS
    if name == "so2_from_po2" and constants.curve == "severinghaus":
        return CURVE_SEVERINGHAUS
    return EQUATIONS[name]


def equation_at(name: str, sheet: Sheet, row: int) -> Equation:
    """The equation that one row's number came from: P50 has two, by the pair that was used."""
    if name == "p50" and bool(p50_is_venous(sheet.snapshots, np.array([row]), sheet.constants)[0]):
        return P50_VENOUS
    return equation_of(name, sheet.constants)


def terms_of(equation: Equation, sheet: Sheet, row: int) -> dict[str, float]:
    """The numbers of one row that go into an equation, canonical."""
    return {name: _term(name, sheet, row) for name in equation.terms}


def _term(name: str, sheet: Sheet, row: int) -> float:
    constants, snap, derived = sheet.constants, sheet.snapshots, sheet.derived
    fixed = {"k": constants.hufner, "alpha": constants.o2_solubility, "ph2o": constants.water_vapour,
             "r": constants.respiratory_quotient, "end_capillary": constants.end_capillary_po2}  # fmt: skip
    if name in fixed:
        return fixed[name]
    made: dict[str, Callable[[], float]] = {
        "saturation": lambda: float(derived.saturation[row]),
        "inactive": lambda: float(derived.inactive[row]),
        "index": lambda: _flow(sheet, row)[0],
        "output": lambda: _flow(sheet, row)[1],
        "pb": lambda: _or(float(snap["barometric_pressure"][row]), constants.barometric_pressure),
        "cco2": lambda: _end_capillary(sheet, row),
        "calculated": lambda: _or(float(snap["so2_calculated"][row]), float(derived["so2_from_po2"][row])),
        "measured": lambda: _measured(sheet, row, ""),
        "venous_measured": lambda: _measured(sheet, row, "venous_"),
        "venous_hb": lambda: _or(float(snap.venous["hb"][row]), float(snap["hb"][row])),
        "temperature": lambda: _or(float(snap["temperature"][row]), 37.0),
    }
    if name in made:
        return made[name]()
    if name.startswith("venous_"):
        return float(snap.venous[name.removeprefix("venous_")][row])
    return float((derived if CATALOGUE[name].derived else snap)[name][row])


def _measured(sheet: Sheet, row: int, sample: str) -> float:
    """The functional saturation as measured in the sample; dyshaemoglobins not measured in it are the arterial ones."""
    raw = chain_inputs(sheet.snapshots, sheet.constants, np.array([row]))
    dys = (either(raw[sample + name], raw[name]) for name in ("cohb", "methb", "sulfhb"))
    return float(measured_saturation(raw[f"{sample}so2"], raw[f"{sample}o2hb"], *dys)[0])


def _or(value: float, other: float) -> float:
    return value if math.isfinite(value) else other


def _flow(sheet: Sheet, row: int) -> tuple[float, float]:
    """Index and output, each from the other where only one was measured."""
    index, output = (float(sheet.snapshots[n][row]) for n in ("cardiac_index", "cardiac_output"))
    surface = float(sheet.derived["bsa"][row])
    return _or(index, output / surface), _or(output, index * surface)


def _end_capillary(sheet: Sheet, row: int) -> float:
    """The end-capillary content that the shunt was worked out with."""
    shunt, arterial, venous = (float(sheet.derived[n][row]) for n in ("shunt_fraction", "cao2", "cvo2"))
    return (arterial - shunt * venous) / (1 - shunt)


def numbers_put_in(equation: Equation, terms: Terms, display: Display) -> str:
    """The equation with its numbers, in its own units; empty where it needs a model or a number is missing."""
    if not equation.put or not all(math.isfinite(value) for value in terms.values()):
        return ""
    return equation.put.format(**{name: display.number(value, TERMS[name][1]) for name, value in terms.items()})
