"""The catalogue of quantities: each one once, and everything else reads it.

Forms, file headers, interface codes, axis titles, tables, the PDF and the methods page are all read off
:data:`CATALOGUE`. Inside the program a value is always in the quantity's canonical unit (fractions 0-1 for
saturations and FiO2); conversion happens only at the edges. The *edge unit* is the one of files in the batch
contract and the default of screens.

Units carry their UCUM code (Unified Code for Units of Measure, Regenstrief Institute). LOINC codes:
This material contains content from LOINC (http://loinc.org). LOINC is copyright © Regenstrief Institute, Inc.
and the LOINC Committee and is available at no cost under the license at http://loinc.org/license.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

MMHG_PER_KPA = 7.500617  # 760 / 101.325; NIST SP 811 (2008), table B.8
HB_G_PER_MMOL = 1.6114  # monomer 64,458 / 4 g/mol; IFCC/ICSH convention, Zander 1984


@dataclass(frozen=True)
class UnitOfMeasure:
    """One unit: canonical value = value x ``factor`` + ``offset``.

    ``ucum`` is the UCUM code, ``label`` what people read, ``aliases`` other spellings seen in files.
    """

    ucum: str
    label: str
    factor: float = 1.0
    offset: float = 0.0
    aliases: tuple[str, ...] = ()

    def to_canonical(self, value: ArrayLike) -> NDArray[np.float64]:
        """Convert from this unit to the canonical one.

        Parameters
        ----------
        value : array_like
            Values in this unit [this unit].

        Returns
        -------
        ndarray
            Values in the canonical unit of the quantity [canonical unit].
        """
        return np.asarray(value, dtype=np.float64) * self.factor + self.offset

    def from_canonical(self, value: ArrayLike) -> NDArray[np.float64]:
        """Convert from the canonical unit to this one.

        Parameters
        ----------
        value : array_like
            Values in the canonical unit [canonical unit].

        Returns
        -------
        ndarray
            Values in this unit [this unit].
        """
        return (np.asarray(value, dtype=np.float64) - self.offset) / self.factor


@dataclass(frozen=True)
class Quantity:
    """One quantity of the catalogue.

    Attributes
    ----------
    name : str
        Column name in files, models and code.
    symbol, label : str
        Symbol of the trade (``PaO2``) and plain name.
    units : tuple of UnitOfMeasure
        The first is the edge unit: files of the batch contract, default on screens.
    decimals : int
        Decimals shown in the edge unit.
    impossible, unlikely : tuple of float
        Outside ``impossible`` a value is refused; outside ``unlikely`` it is asked about. Canonical units.
    sd_abs, sd_rel : float
        Default standard uncertainty: the larger of the two (absolute in canonical units, relative).
    sd_source : str
        Published basis of that uncertainty.
    loinc : mapping
        LOINC codes by site (``arterial``, ``mixed_venous``, ``central_venous``, ``venous``, ``""`` = any);
        the first of each tuple is used for export, all are understood on import.
    group : str
        Part of a gas slip: ``gas``, ``oximetry``, ``lung``, ``flow``, ``circulation``, ``body``.
    carried : bool
        Whether a later snapshot may use it (see align).
    limits_source : str
        Basis of the limits.
    """

    name: str
    symbol: str
    label: str
    units: tuple[UnitOfMeasure, ...]
    decimals: int
    impossible: tuple[float, float] = (-math.inf, math.inf)
    unlikely: tuple[float, float] = (-math.inf, math.inf)
    sd_abs: float = 0.0
    sd_rel: float = 0.0
    sd_source: str = ""
    loinc: Mapping[str, tuple[str, ...]] = field(default_factory=dict)
    group: str = ""
    limits_source: str = "common practice"
    derived: bool = False
    source: str = ""

    @property
    def unit(self) -> UnitOfMeasure:
        """The edge unit: files of the batch contract and the default on screens."""
        return self.units[0]

    def unit_named(self, text: str) -> UnitOfMeasure | None:
        """The unit spelled ``text`` (UCUM code, label or known alias), or None: never a guess."""
        wanted = text.strip()
        for unit in self.units:
            if wanted in (unit.ucum, unit.label, *unit.aliases):
                return unit
        folded = wanted.casefold()
        for unit in self.units:
            if folded in {name.casefold() for name in (unit.label, *unit.aliases)}:
                return unit
        return None

    def default_sd(self, value: ArrayLike) -> NDArray[np.float64]:
        """Default standard uncertainty at ``value``.

        Parameters
        ----------
        value : array_like
            Values in the canonical unit [canonical unit].

        Returns
        -------
        ndarray
            Standard uncertainty, 1 SD [canonical unit], NaN where the value is NaN.
        """
        array = np.asarray(value, dtype=np.float64)
        return np.where(np.isnan(array), np.nan, np.maximum(self.sd_abs, self.sd_rel * np.abs(array)))


def _unit(ucum: str, label: str, factor: float = 1.0, offset: float = 0.0, *aliases: str) -> UnitOfMeasure:
    return UnitOfMeasure(ucum, label, factor, offset, aliases)


_ONE = _unit("1", "")
_PH = _unit("[pH]", "", 1.0, 0.0, "pH", "1", "")
_PERCENT = _unit("%", "%", 0.01, 0.0, "percent", "pct")
_MMHG = _unit("mm[Hg]", "mmHg", 1.0, 0.0, "mm Hg", "mmHg", "torr")
_KPA = _unit("kPa", "kPa", MMHG_PER_KPA, 0.0, "kpa", "KPA")
_MMOL = _unit("mmol/L", "mmol/L", 1.0, 0.0, "mEq/L", "meq/L", "mmol/l")
_CELSIUS = _unit("Cel", "°C", 1.0, 0.0, "C", "degC", "deg C")
_FAHRENHEIT = _unit("[degF]", "°F", 5 / 9, -160 / 9, "F", "degF", "deg F")
_CMH2O = _unit("cm[H2O]", "cmH2O", 1.0, 0.0, "cm H2O", "cmH20", "mbar")
_PER_MIN = _unit("/min", "/min", 1.0, 0.0, "1/min", "bpm", "{beats}/min", "{breaths}/min", "breaths/min", "insp/min")
_ML_DL = _unit("mL/dL", "mL/dL", 1.0, 0.0, "ml/dl", "vol%", "mL/100 mL")
_MMOL_O2 = _unit("mmol/L", "mmol/L", 2.2394)  # 22.394 mL(STPD)/mmol O2: Siggaard-Andersen 1984
_ML_MIN = _unit("mL/min", "mL/min", 1.0, 0.0, "ml/min")
_ML_MIN_M2 = _unit("mL/min/m2", "mL/min/m²", 1.0, 0.0, "ml/min/m2")
_L_MIN = _unit("L/min", "L/min", 1.0, 0.0, "l/min", "LPM")
_L_MIN_M2 = _unit("L/min/m2", "L/min/m²", 1.0, 0.0, "l/min/m2", "L/(min.m2)")

_MALLAT = "Mallat 2015, Medicine 94(3)"
_CP = "common practice"
_CLIA = "CLIA acceptance limits, 42 CFR 493.931 (2025)"
# Impossible: outside what a living adult's sample or a working analyser can give. Unlikely: asked once. Both common
# practice (analyser reporting ranges), pH extremes after survival reports; see physiology notes.

_MEASURED = (
    Quantity(
        "ph",
        "pH",
        "pH",
        (_PH,),
        2,
        (6.3, 8.2),
        (6.9, 7.7),
        0.008,
        0.0,
        "Harding & Fraser 1987, Clin Chem 33:1416; " + _CLIA,
        {
            "arterial": ("2744-1",),
            "mixed_venous": ("19213-8",),
            "central_venous": ("2746-6",),
            "venous": ("2746-6",),
            "": ("11558-4",),
        },
        "gas",
    ),
    Quantity(
        "pco2",
        "PCO2",
        "carbon dioxide partial pressure",
        (_MMHG, _KPA),
        0,
        (3.0, 300.0),
        (15.0, 120.0),
        1.0,
        0.02,
        _MALLAT,
        {
            "arterial": ("2019-8",),
            "mixed_venous": ("19212-0",),
            "central_venous": ("2021-4",),
            "venous": ("2021-4",),
            "": ("11557-6",),
        },
        "gas",
    ),
    Quantity(
        "po2",
        "PO2",
        "oxygen partial pressure",
        (_MMHG, _KPA),
        0,
        (1.0, 800.0),
        (20.0, 650.0),
        2.5,
        0.03,
        _MALLAT,
        {
            "arterial": ("2703-7",),
            "mixed_venous": ("19211-2",),
            "central_venous": ("2705-2",),
            "venous": ("2705-2",),
            "": ("11556-8",),
        },
        "gas",
    ),
    Quantity(
        "hb",
        "Hb",
        "haemoglobin",
        (
            _unit("g/dL", "g/dL", 1.0, 0.0, "g/dl", "gm/dL", "G/DL"),
            _unit("g/L", "g/L", 0.1, 0.0, "g/l"),
            _unit("mmol/L", "mmol/L", HB_G_PER_MMOL, 0.0, "mmol/l"),
        ),
        1,
        (0.5, 27.0),
        (4.0, 20.0),
        0.0,
        0.02,
        _CLIA,
        {
            "arterial": ("30313-1", "14775-1"),
            "mixed_venous": ("30351-1",),
            "central_venous": ("30350-3", "76769-9"),
            "venous": ("30350-3", "76769-9"),
            "": ("718-7", "55782-7", "20509-6", "59260-0", "75928-2"),
        },
        "oximetry",
    ),
    Quantity(
        "so2",
        "sO2",
        "oxygen saturation, measured (functional)",
        (_PERCENT, _unit("1", "fraction")),
        1,
        (0.01, 1.005),
        (0.20, 1.0),
        0.008,
        0.0,
        _MALLAT,
        {
            "arterial": ("2708-6",),
            "mixed_venous": ("19224-5",),
            "central_venous": ("97549-0",),
            "venous": ("2711-0",),
            "": ("20564-1",),
        },
        "oximetry",
    ),
    Quantity(
        "so2_calculated",
        "sO2 calc.",
        "oxygen saturation as the analyser calculated it",
        (_PERCENT, _unit("1", "fraction")),
        1,
        (0.01, 1.005),
        (0.20, 1.0),
        0.008,
        0.0,
        _CP,
        {"arterial": ("51733-4",), "": ("2713-6",)},
        "oximetry",
    ),
    Quantity(
        "o2hb",
        "O2Hb",
        "oxyhaemoglobin, share of total",
        (_PERCENT, _unit("1", "fraction")),
        1,
        (0.01, 1.005),
        (0.20, 0.995),
        0.008,
        0.0,
        _MALLAT,
        {"arterial": ("2714-4",), "": ("11559-2",)},
        "oximetry",
    ),
    Quantity(
        "cohb",
        "COHb",
        "carboxyhaemoglobin",
        (_PERCENT, _unit("1", "fraction")),
        1,
        (-0.02, 0.90),
        (0.0, 0.40),
        0.004,
        0.0,
        _CP,
        {"arterial": ("2030-5",), "venous": ("2032-1",), "": ("20563-3",)},
        "oximetry",
    ),
    Quantity(
        "methb",
        "MetHb",
        "methaemoglobin",
        (_PERCENT, _unit("1", "fraction")),
        1,
        (-0.02, 0.95),
        (0.0, 0.40),
        0.004,
        0.0,
        _CP,
        {"arterial": ("2615-3",), "": ("2614-6",)},
        "oximetry",
    ),
    Quantity(
        "sulfhb",
        "SulfHb",
        "sulfhaemoglobin",
        (_PERCENT, _unit("1", "fraction")),
        1,
        (-0.02, 0.90),
        (0.0, 0.20),
        0.004,
        0.0,
        _CP,
        {},
        "oximetry",
    ),
    Quantity(
        "lactate",
        "Lactate",
        "lactate",
        (_MMOL, _unit("mg/dL", "mg/dL", 1 / 9.008, 0.0, "mg/dl")),
        1,
        (0.01, 50.0),
        (0.2, 20.0),
        0.15,
        0.05,
        _CP,
        {
            "arterial": ("2518-9", "30242-2"),
            "mixed_venous": ("19240-1",),
            "central_venous": ("2519-7",),
            "venous": ("2519-7",),
            "": ("32693-4", "2524-7", "59032-3", "14118-4"),
        },
        "gas",
    ),
    Quantity(
        "bicarbonate",
        "HCO3",
        "bicarbonate",
        (_MMOL,),
        1,
        (1.0, 80.0),
        (8.0, 50.0),
        1.0,
        0.0,
        _CP,
        {
            "arterial": ("1960-4",),
            "mixed_venous": ("19229-4",),
            "central_venous": ("14627-4",),
            "venous": ("14627-4",),
            "": ("1959-6", "1963-8"),
        },
        "gas",
    ),
    Quantity(
        "spo2",
        "SpO2",
        "oxygen saturation by pulse oximeter",
        (_PERCENT, _unit("1", "fraction")),
        0,
        (0.01, 1.0),
        (0.50, 1.0),
        0.02,
        0.0,
        "ISO 80601-2-61:2017; Ebmeier 2018",
        {"": ("59408-5", "59417-6")},
        "lung",
    ),
    Quantity(
        "fio2",
        "FiO2",
        "inspired oxygen fraction",
        (_PERCENT, _unit("1", "fraction")),
        0,
        (0.15, 1.0),
        (0.21, 1.0),
        0.01,
        0.0,
        _CP,
        {"": ("3150-6", "19994-3", "3150-0", "71835-3")},
        "lung",
    ),
    Quantity(
        "oxygen_flow",
        "O2 flow",
        "oxygen flow of the device",
        (_L_MIN,),
        0,
        (0.0, 100.0),
        (0.0, 70.0),
        0.5,
        0.0,
        _CP,
        {"": ("3151-8",)},
        "lung",
    ),
    Quantity(
        "peep",
        "PEEP",
        "positive end-expiratory pressure",
        (_CMH2O,),
        0,
        (0.0, 60.0),
        (0.0, 25.0),
        0.5,
        0.0,
        _CP,
        {"": ("20077-4", "76248-4")},
        "lung",
    ),
    Quantity(
        "mean_airway_pressure",
        "Pmaw",
        "mean airway pressure",
        (_CMH2O,),
        0,
        (0.0, 80.0),
        (2.0, 45.0),
        0.5,
        0.0,
        _CP,
        {"": ("76530-5", "60949-5")},
        "lung",
    ),
    Quantity(
        "respiratory_rate",
        "RR",
        "respiratory rate",
        (_PER_MIN,),
        0,
        (0.0, 120.0),
        (4.0, 60.0),
        1.0,
        0.0,
        _CP,
        {"": ("9279-1", "19834-1")},
        "lung",
    ),
    Quantity(
        "cardiac_output",
        "CO",
        "cardiac output",
        (_L_MIN,),
        1,
        (0.2, 35.0),
        (1.5, 20.0),
        0.0,
        0.15,
        "Stetz 1982; Critchley & Critchley 1999; Peyton & Chong 2010",
        {"": ("8741-1", "8737-9", "61014-7", "76519-8")},
        "flow",
    ),
    Quantity(
        "cardiac_index",
        "CI",
        "cardiac index",
        (_L_MIN_M2,),
        1,
        (0.1, 20.0),
        (0.8, 10.0),
        0.0,
        0.15,
        "Stetz 1982; Critchley & Critchley 1999; Peyton & Chong 2010",
        {"": ("75919-1", "8751-0", "8752-8")},
        "flow",
    ),
    Quantity(
        "vo2_measured",
        "VO2 measured",
        "oxygen consumption, measured",
        (_ML_MIN,),
        0,
        (20.0, 2000.0),
        (80.0, 700.0),
        0.0,
        0.05,
        _CP,
        {"": ("60842-2",)},
        "flow",
    ),
    Quantity(
        "heart_rate",
        "HR",
        "heart rate",
        (_PER_MIN,),
        0,
        (0.0, 350.0),
        (25.0, 200.0),
        1.0,
        0.0,
        _CP,
        {"": ("8867-4",)},
        "circulation",
    ),
    Quantity(
        "mean_arterial_pressure",
        "MAP",
        "mean arterial pressure",
        (_MMHG, _KPA),
        0,
        (0.0, 300.0),
        (30.0, 160.0),
        3.0,
        0.0,
        _CP,
        {"": ("8478-0", "76214-6", "76536-2")},
        "circulation",
    ),
    Quantity(
        "temperature",
        "T",
        "body temperature",
        (_CELSIUS, _FAHRENHEIT),
        1,
        (12.0, 46.0),
        (30.0, 42.0),
        0.2,
        0.0,
        _CP,
        {"": ("8310-5", "8329-5", "60834-9")},
        "body",
    ),
    Quantity(
        "height",
        "Height",
        "height",
        (_unit("cm", "cm"), _unit("m", "m", 100.0), _unit("[in_i]", "in", 2.54, 0.0, "inch")),
        0,
        (50.0, 260.0),
        (130.0, 215.0),
        0.0,
        0.01,
        _CP,
        {"": ("8302-2",)},
        "body",
    ),
    Quantity(
        "weight",
        "Weight",
        "weight",
        (_unit("kg", "kg"), _unit("[lb_av]", "lb", 0.45359237, 0.0, "lbs")),
        0,
        (15.0, 500.0),
        (35.0, 250.0),
        0.0,
        0.03,
        _CP,
        {"": ("29463-7",)},
        "body",
    ),
    Quantity(
        "age",
        "Age",
        "age",
        (_unit("a", "years", 1.0, 0.0, "years", "y"),),
        0,
        (0.0, 130.0),
        (16.0, 110.0),
        0.0,
        0.0,
        _CP,
        {"": ("30525-0",)},
        "body",
    ),
    Quantity(
        "barometric_pressure",
        "PB",
        "barometric pressure",
        (_MMHG, _KPA, _unit("hPa", "hPa", MMHG_PER_KPA / 10, 0.0, "mbar")),
        0,
        (250.0, 820.0),
        (500.0, 800.0),
        2.0,
        0.0,
        _CP,
        {},
        "body",
    ),
)


def _derived(
    name: str, symbol: str, label: str, units: tuple[UnitOfMeasure, ...], decimals: int, source: str, **more: object
) -> Quantity:
    return Quantity(name, symbol, label, units, decimals, derived=True, source=source, **more)  # type: ignore[arg-type]


_FRACTION_PERCENT = (_PERCENT, _unit("1", "fraction"))
_CONTENT = (_ML_DL, _MMOL_O2)
_PRESSURE = (_MMHG, _KPA)
_POINTS = (_unit("%", "points", 0.01),)

_DERIVED = (
    _derived(
        "cao2",
        "CaO2",
        "arterial oxygen content",
        _CONTENT,
        1,
        "Dominguez de Villota 1981; Hüfner 1894",
        loinc={"": ("59274-1", "19218-7")},
    ),
    _derived("cvo2", "CvO2", "venous oxygen content", _CONTENT, 1, "as CaO2", loinc={"": ("60841-4", "19220-3")}),
    _derived(
        "avdo2",
        "Ca–vO2",
        "arterio-venous oxygen content difference",
        _CONTENT,
        1,
        "Fick 1870",
        loinc={"": ("61007-1",)},
    ),
    _derived(
        "dissolved_share",
        "dissolved",
        "dissolved share of CaO2",
        _FRACTION_PERCENT,
        1,
        "Christoforides & Hedley-Whyte 1969",
    ),
    _derived("do2", "DO2", "oxygen delivery", (_ML_MIN,), 0, "common practice: 10·CO·CaO2"),
    _derived("vo2", "VO2", "oxygen consumption", (_ML_MIN,), 0, "Fick 1870"),
    _derived("do2i", "DO2I", "oxygen delivery index", (_ML_MIN_M2,), 0, "common practice: 10·CI·CaO2"),
    _derived("vo2i", "VO2I", "oxygen consumption index", (_ML_MIN_M2,), 0, "Fick 1870", loinc={"": ("60823-2",)}),
    _derived(
        "o2er",
        "O2ER",
        "oxygen extraction ratio",
        _FRACTION_PERCENT,
        0,
        "common practice: (CaO2 − CvO2)/CaO2",
        loinc={"": ("75991-0",)},
    ),
    _derived(
        "pf_ratio",
        "P/F",
        "PaO2/FiO2",
        _PRESSURE,
        0,
        "ARDS Definition Task Force 2012, JAMA 307:2526",
        loinc={"": ("50984-4",)},
    ),
    _derived("sf_ratio", "S/F", "SpO2/FiO2", (_unit("1", ""),), 0, "Rice 2007, Chest 132:410"),
    _derived(
        "pao2_alveolar",
        "PAO2",
        "alveolar oxygen partial pressure",
        _PRESSURE,
        0,
        "Fenn, Rahn & Otis 1946 (alveolar gas equation, full form)",
    ),
    _derived(
        "aa_gradient",
        "A–a",
        "alveolar–arterial oxygen gradient",
        _PRESSURE,
        0,
        "Mellemgaard 1966",
        loinc={"": ("19991-9",)},
    ),
    _derived("a_a_ratio", "a/A", "arterial/alveolar oxygen ratio", (_unit("1", ""),), 2, "Gilbert & Keighley 1974"),
    _derived("shunt_fraction", "Qs/Qt", "shunt fraction", _FRACTION_PERCENT, 0, "Berggren 1942"),
    _derived(
        "oxygenation_index",
        "OI",
        "oxygenation index",
        (_unit("1", ""),),
        1,
        "common practice: 100·FiO2·mean airway pressure/PaO2",
    ),
    _derived("rox_index", "ROX", "ROX index", (_unit("1", ""),), 1, "Roca 2016"),
    _derived(
        "so2_from_po2",
        "sO2 curve",
        "saturation from the curve at the sample's pH and PCO2, 37 °C",
        _FRACTION_PERCENT,
        1,
        "Siggaard-Andersen 1984, Clin Chem 30:1646",
    ),
    _derived("gap_calculated", "gap calc.", "calculated saturation − SpO2", _POINTS, 1, "common practice"),
    _derived("gap_measured", "gap meas.", "measured saturation − SpO2", _POINTS, 1, "common practice"),
    _derived(
        "p50",
        "P50",
        "in-vivo half-saturation pressure",
        _PRESSURE,
        1,
        "Siggaard-Andersen 1990",
        loinc={"": ("19217-9", "19214-6")},
    ),
    _derived(
        "extractable_o2",
        "extractable O2",
        "oxygen that can be unloaded down to 38 mmHg",
        _CONTENT,
        1,
        "Siggaard-Andersen & Gøthgen 1995, Acta Anaesthesiol Scand 39 Suppl 107:41",
    ),
    _derived(
        "predicted_spo2",
        "SpO2 predicted",
        "what a two-wavelength oximeter would show",
        _FRACTION_PERCENT,
        0,
        "Zijlstra, Buursma & van Assendelft 2000",
    ),
    _derived("co2_gap", "PCO2 gap", "venous − arterial PCO2", _PRESSURE, 0, "Ospina-Tascón 2016"),
    _derived(
        "co2_o2_ratio",
        "PCO2 gap/Ca–vO2",
        "PCO2 gap over oxygen content difference",
        (_unit("mm[Hg].dL/mL", "mmHg·dL/mL"),),
        1,
        "Mekontso-Dessap 2002, Intensive Care Med 28:272",
    ),
    _derived(
        "bsa",
        "BSA",
        "body surface area",
        (_unit("m2", "m²"),),
        2,
        "Mosteller 1987; Du Bois 1916",
        loinc={"": ("3140-1",)},
    ),
)

CATALOGUE: Mapping[str, Quantity] = MappingProxyType({q.name: q for q in (*_MEASURED, *_DERIVED)})
MEASURED: tuple[str, ...] = tuple(q.name for q in _MEASURED)
DERIVED: tuple[str, ...] = tuple(q.name for q in _DERIVED)
WITH_SD: tuple[str, ...] = ("cao2", "do2", "do2i", "o2er", "pf_ratio", "shunt_fraction")


def measured() -> Iterator[Quantity]:
    """The measured quantities in the order of a gas slip.

    Returns
    -------
    iterator of Quantity
        Catalogue rows of what is measured [each its canonical unit].
    """
    return iter(_MEASURED)


def derived() -> Iterator[Quantity]:
    """The derived quantities in the order of the batch contract.

    Returns
    -------
    iterator of Quantity
        Catalogue rows of what is derived [each its canonical unit].
    """
    return iter(_DERIVED)
