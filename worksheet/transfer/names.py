"""Words for quantities, sites and bedside facts, in several languages: read headers, check that names fit codes.

The words are common practice on gas slips and in spreadsheets; none is taken as certain without a unit.
"""

from __future__ import annotations

import re
import unicodedata
from functools import lru_cache

from worksheet.oxygen.readings import Site

# Whole words after folding (no accents, lower case, punctuation to blanks).
_WORDS: dict[str, tuple[str, ...]] = {
    "ph": ("ph", "pha", "phv", "aph"),
    "pco2": ("pco2", "paco2", "pvco2", "apco2", "carbon dioxide partial pressure", "carbon dioxide",
             "co2 partial pressure", "kohlendioxidpartialdruck", "co2 partialdruck", "pression partielle co2"),
    "po2": ("po2", "pao2", "pvo2", "apo2", "oxygen partial pressure", "sauerstoffpartialdruck", "o2 partialdruck",
            "pression partielle o2"),
    "hb": ("hb", "hgb", "thb", "cthb", "haemoglobin", "hemoglobin", "hamoglobin", "hemoglobine", "hemoglobina",
           "hemoglobin total", "total haemoglobin", "total hemoglobin", "haemoglobin mass volume",
           "hemoglobin mass volume"),
    "so2": ("so2", "sao2", "svo2", "scvo2", "o2sat", "o2 sat", "sat o2", "oxygen saturation", "o2 saturation",
            "sauerstoffsattigung",
            "sattigung", "saturation", "saturation o2", "saturazione", "saturacion", "syremetning",
            "syremattnad"),
    "so2_calculated": ("so2 calculated", "so2 calc", "so2c", "calculated saturation", "oxygen saturation calculated",
                       "so2 berechnet", "so2 ber"),
    "o2hb": ("o2hb", "fo2hb", "oxyhaemoglobin", "oxyhemoglobin", "oxyhamoglobin", "oxyhemoglobine"),
    "cohb": ("cohb", "fcohb", "carboxyhaemoglobin", "carboxyhemoglobin", "carboxyhamoglobin", "carboxyhemoglobine"),
    "methb": ("methb", "fmethb", "methaemoglobin", "methemoglobin", "methamoglobin", "methemoglobine"),
    "sulfhb": ("sulfhb", "shb", "sulfhaemoglobin", "sulfhemoglobin"),
    "lactate": ("lactate", "lac", "lact", "laktat", "clac", "lattato", "lactato"),
    "bicarbonate": ("bicarbonate", "hco3", "chco3", "bicarb", "bicarbonat", "bikarbonat", "bicarbonato",
                    "standard bicarbonate"),
    "spo2": ("spo2", "pulse oximetry", "pulse oximeter", "pulsoximetrie", "pulse ox", "sat finger",
             "puls oxim sat o2"),
    "fio2": ("fio2", "fi o2", "inspired oxygen", "inspired oxygen fraction", "inhaled oxygen concentration",
             "inspiratory oxygen", "oxygen total gas setting", "oxygen gas total"),
    "oxygen_flow": ("o2 flow", "oxygen flow", "o2 fluss", "inhaled oxygen flow rate", "debit o2"),
    "peep": ("peep", "positive end expiratory pressure"),
    "mean_airway_pressure": ("pmaw", "mean airway pressure", "paw mean", "pmean",
                             "mean pressure respiratory system airway",
                             "atemwegsmitteldruck"),
    "respiratory_rate": ("rr", "resp rate", "respiratory rate", "breath rate", "atemfrequenz", "af"),
    "cardiac_output": ("co", "cardiac output", "hzv", "herzzeitvolumen", "debit cardiaque", "gasto cardiaco"),
    "cardiac_index": ("ci", "cardiac index", "herzindex", "index cardiaque"),
    "vo2_measured": ("vo2", "oxygen consumption", "vo2 measured"),
    "heart_rate": ("hr", "heart rate", "pulse", "herzfrequenz", "hf", "frequence cardiaque"),
    "mean_arterial_pressure": ("map", "mean arterial pressure", "mean blood pressure", "mad", "pam",
                               "arterieller mitteldruck"),
    "temperature": ("temperature", "temp", "body temperature", "blood temperature", "temperatur", "korpertemperatur"),
    "height": ("height", "body height", "grosse", "korpergrosse", "taille"),
    "weight": ("weight", "body weight", "gewicht", "korpergewicht", "poids"),
    "age": ("age", "alter"),
    "barometric_pressure": ("barometric pressure", "pb", "baro", "luftdruck", "atmospheric pressure"),
}  # fmt: skip
_OTHER: dict[str, tuple[str, ...]] = {
    "stay": ("stay", "stay id", "patient", "patient id", "pid", "mrn", "case", "case number", "fall", "fallnummer",
             "identifier", "id", "patienten id", "patientennummer", "no patient", "encounter"),
    "time": ("time", "datetime", "date time", "date and time", "timestamp", "sampled", "collected", "sample time",
             "collection time", "zeitpunkt", "entnahme",
             "entnahmezeit", "datum zeit", "datum uhrzeit", "charttime"),
    "date": ("date", "datum", "fecha", "day", "sample date", "collection date", "entnahmedatum"),
    "clock": ("clock", "uhrzeit", "zeit", "heure", "hora", "hour"),
    "site": ("site", "specimen", "sample type", "specimen type", "probe", "probenart", "material", "sample site",
             "type"),
    "sample": ("sample", "sample id", "sample no", "sample number", "probennummer", "accession"),
    "note": ("note", "notes", "comment", "comments", "bemerkung", "kommentar", "remarque"),
}  # fmt: skip
_SITES: dict[str, Site] = {
    "arterial": Site.ARTERIAL, "art": Site.ARTERIAL, "artery": Site.ARTERIAL, "a": Site.ARTERIAL, "abg": Site.ARTERIAL,
    "arteriell": Site.ARTERIAL, "arteriel": Site.ARTERIAL, "arterial blood": Site.ARTERIAL, "blda": Site.ARTERIAL,
    "mixed venous": Site.MIXED_VENOUS, "mixed": Site.MIXED_VENOUS, "mv": Site.MIXED_VENOUS, "bldmv": Site.MIXED_VENOUS,
    "gemischtvenos": Site.MIXED_VENOUS, "pulmonary artery": Site.MIXED_VENOUS, "pa": Site.MIXED_VENOUS,
    "central venous": Site.CENTRAL_VENOUS, "cv": Site.CENTRAL_VENOUS, "central": Site.CENTRAL_VENOUS,
    "zentralvenos": Site.CENTRAL_VENOUS, "cvc": Site.CENTRAL_VENOUS, "bldcv": Site.CENTRAL_VENOUS,
    "venous": Site.VENOUS, "ven": Site.VENOUS, "v": Site.VENOUS, "vbg": Site.VENOUS, "venos": Site.VENOUS,
    "peripheral venous": Site.VENOUS, "peripheral": Site.VENOUS, "bldv": Site.VENOUS, "veineux": Site.VENOUS,
}  # fmt: skip
_HEADER_SITES = {
    "pao2": Site.ARTERIAL, "paco2": Site.ARTERIAL, "sao2": Site.ARTERIAL, "pha": Site.ARTERIAL,
    "pvo2": Site.VENOUS, "pvco2": Site.VENOUS, "phv": Site.VENOUS,
    "svo2": Site.MIXED_VENOUS, "scvo2": Site.CENTRAL_VENOUS,
}  # fmt: skip
# Quantities whose names overlap so much in use that one does not contradict the other.
_FAMILIES = (
    {"so2", "so2_calculated", "spo2", "o2hb"},
    {"hb", "o2hb", "cohb", "methb"},
    {"cardiac_output", "cardiac_index"},
)
_BRACKETS = re.compile(r"[(\[{].*?[)\]}]")
_SUBSCRIPTS = str.maketrans("₀₁₂₃₄₅₆₇₈₉", "0123456789")


def fold(text: str) -> str:
    """Lower case, no accents, punctuation and underscores to single blanks."""
    plain = unicodedata.normalize("NFKD", text.translate(_SUBSCRIPTS).replace("ß", "ss"))
    plain = "".join(c for c in plain if not unicodedata.combining(c)).casefold()
    return " ".join(re.sub(r"[^0-9a-z]+", " ", plain).split())


_EXACT = {word: name for name, words in (_WORDS | _OTHER).items() for word in (fold(name), *words)}


@lru_cache(maxsize=2048)
def column_named(header: str) -> tuple[str, Site]:
    """What a header names (a quantity, ``stay``, ``time``, …; empty if unknown) and the site it implies."""
    bare = fold(_BRACKETS.sub(" ", header))
    for text in (bare, fold(header), fold(re.split(r"\s*[/,;]\s*", header)[0])):
        if text in _EXACT:
            return _EXACT[text], _HEADER_SITES.get(text, Site.NONE)
    words = bare.split()
    # A trailing unit or site word: "Hb g/dl", "pO2 arteriell".
    for size in range(len(words) - 1, 0, -1):
        start = " ".join(words[:size])
        if start in _EXACT:
            rest = " ".join(words[size:])
            named = _SITES.get(rest) if len(rest) > 2 else None  # "pa" may be a pressure or an artery
            return _EXACT[start], named or _HEADER_SITES.get(start, Site.NONE)
    return "", Site.NONE


@lru_cache(maxsize=4096)
def quantities_in(text: str) -> frozenset[str]:
    """Every quantity that a free text names as whole words."""
    padded = f" {fold(text)} "
    found = {name for name, words in _WORDS.items() if any(f" {word} " in padded for word in words if len(word) > 2)}
    bare = fold(_BRACKETS.sub(" ", text))
    if bare in _EXACT and _EXACT[bare] in _WORDS:
        found.add(_EXACT[bare])
    return frozenset(found)


def contradicts(name: str, text: str) -> str:
    """The quantity that a text clearly names instead of ``name``; empty if they can be the same."""
    named = quantities_in(text)
    related = {name}.union(*(family for family in _FAMILIES if name in family))
    return "" if not named or named & related else sorted(named)[0]


def site_named(text: str) -> Site | None:
    """The site a word names: ``NONE`` for an empty text, None for an unknown word."""
    folded = fold(text)
    if not folded or folded == "none":
        return Site.NONE
    return _SITES.get(folded)
