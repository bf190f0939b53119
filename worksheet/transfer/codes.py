"""From LOINC codes to the catalogue's quantities, and from unit texts to its units: never a guess.

This material contains content from LOINC (http://loinc.org). LOINC is copyright © Regenstrief Institute, Inc. and the
LOINC Committee and is available at no cost under the license at http://loinc.org/license.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from functools import cache

from worksheet.oxygen.quantities import CATALOGUE, Quantity, UnitOfMeasure
from worksheet.oxygen.readings import FlowMethod, Site

from .names import contradicts, quantities_in

OWN = "urn:oxygen-delivery-worksheet:"  # code systems of our own begin so
LOINC = "http://loinc.org"
_LOINC_SYSTEMS = {LOINC, "ln", "loinc", "l", "", "urn:oid:2.16.840.1.113883.6.1", "2.16.840.1.113883.6.1"}
_FINGER = {"59408-5", "59417-6"}  # by pulse oximetry, in words of the code itself
_EITHER = {"2708-6", "20564-1"}  # seen for the pulse oximeter and for the sample alike
_IEEE_FINGER = {"150456"}  # MDC_PULS_OXIM_SAT_O2, ISO/IEEE 11073-10101
_BY_DILUTION = {"8737-9", "8751-0"}
# Known codes of things the worksheet does not keep: their rows say so in words. Verified in public code lists.
_NOT_KEPT = {
    "11555-0": "base excess", "1925-7": "base excess", "1927-3": "base excess", "60840-6": "base excess",
    "20570-8": "haematocrit", "32354-3": "haematocrit", "48703-3": "haematocrit (estimated)",
    "34728-6": "total carbon dioxide", "20112-9": "tidal volume", "20562-5": "stroke volume",
    "60825-7": "carbon dioxide production", "76269-0": "respiratory quotient", "60985-9": "central venous pressure",
    "8591-0": "central venous pressure", "8414-5": "pulmonary artery pressure", "75994-4": "wedge pressure",
    "50064-5": "ideal body weight", "60822-4": "shunt fraction", "57800-5": "oxygen content",
    "33254-4": "pH at the patient's temperature", "32771-8": "PCO2 at the patient's temperature",
    "34705-4": "PCO2 at the patient's temperature", "19255-9": "PO2 at the patient's temperature",
    "19254-2": "PO2 at the patient's temperature", "19258-3": "PO2 at the patient's temperature",
    "2020-6": "capillary PCO2", "2704-5": "capillary PO2", "30352-9": "capillary haemoglobin",
    "19239-3": "capillary lactate", "2709-4": "capillary saturation",
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class Coding:
    """One code as received."""

    code: str
    system: str = ""
    display: str = ""

    @property
    def loinc(self) -> str:
        """The code, if its system can be LOINC."""
        return self.code.strip() if self.system.strip().casefold() in _LOINC_SYSTEMS else ""


@dataclass(frozen=True, slots=True)
class Meaning:
    """What codes and names together say: a quantity and site, or why not."""

    quantity: Quantity | None = None
    site: Site = Site.NONE
    flow_method: FlowMethod = FlowMethod.UNKNOWN
    problem: str = ""
    conflict: bool = False
    quiet: bool = False  # a known quantity that the worksheet does not keep


@cache
def table() -> dict[str, tuple[tuple[str, Site], ...]]:
    """LOINC code → quantities and sites, read off the catalogue."""
    found: dict[str, list[tuple[str, Site]]] = {}
    for quantity in CATALOGUE.values():
        for site, codes in quantity.loinc.items():
            for code in codes:
                found.setdefault(code, []).append((quantity.name, Site[site.upper()] if site else Site.NONE))
    return {code: tuple(meanings) for code, meanings in found.items()}


def meaning(codings: Iterable[Coding], text: str = "", *, method: str = "", on_sample: bool | None = None) -> Meaning:
    """What an observation measures.

    ``on_sample`` says whether it is known to come from a blood sample (True) or from the bedside (False); it decides
    between measured saturation and pulse oximeter where the code leaves that open.
    """
    given = list(codings)
    words = " ".join([*(c.display for c in given), text, method]).strip()
    known = [m for c in given for m in table().get(c.loinc, ())]
    if any(c.code in _FINGER or c.code in _IEEE_FINGER for c in given):
        known = [("spo2", Site.NONE)]
    elif any(c.loinc in _EITHER for c in given):
        return _saturation(known, words, on_sample)
    if not known:
        problem, quiet = _unknown(given, words)
        return Meaning(problem=problem, quiet=quiet)
    name, site = known[0]
    other = next((n for n, _ in known if n != name), "") or _contradiction(name, given, text)
    if other:
        label = CATALOGUE[other].label if other in CATALOGUE else other
        return Meaning(problem=f"The code {_first(given)} means {CATALOGUE[name].label}, but it is labelled {label}.",
                       conflict=True)  # fmt: skip
    quantity = CATALOGUE[name]
    if quantity.derived:
        return Meaning(problem=f"{quantity.label} is computed by the worksheet and not imported", quiet=True)
    sites = {s for n, s in known if n == name}
    if {Site.CENTRAL_VENOUS, Site.VENOUS} <= sites:
        site = Site.VENOUS  # "venous" alone does not say central: never paired unless the sample says so
    dilution = FlowMethod.THERMODILUTION if any(c.code in _BY_DILUTION for c in given) else FlowMethod.UNKNOWN
    return Meaning(quantity, site, dilution)


def _contradiction(name: str, given: list[Coding], text: str) -> str:
    return next((found for words in (*(c.display for c in given), text) if (found := contradicts(name, words))), "")


def _saturation(known: list[tuple[str, Site]], words: str, on_sample: bool | None) -> Meaning:
    """2708-6 and 20564-1 are used for the finger and for the sample: name, method and sample decide, else nobody."""
    named = quantities_in(words)
    other = contradicts("so2", words)
    site = next((s for n, s in known if n == "so2" and s), Site.NONE)
    if other:
        return Meaning(
            problem=f"The code means oxygen saturation, but it is labelled {CATALOGUE[other].label}.", conflict=True
        )
    if "so2_calculated" in named:
        return Meaning(CATALOGUE["so2_calculated"], site)
    if "spo2" in named:
        return Meaning(CATALOGUE["spo2"])
    if on_sample is True:
        return Meaning(CATALOGUE["so2"], site)
    if on_sample is False:
        return Meaning(CATALOGUE["spo2"])
    return Meaning(
        problem="The saturation can be the sample's or the pulse oximeter's: neither sample nor method says which.",
        conflict=True,
    )


def _first(given: list[Coding]) -> str:
    return next((c.code for c in given if c.code), "?")


def _unknown(given: list[Coding], words: str) -> tuple[str, bool]:
    for coding in given:
        if coding.loinc in _NOT_KEPT:
            return f"{_NOT_KEPT[coding.loinc]} ({coding.loinc}) is not a quantity of the worksheet", True
    label = " ".join(words.split())[:60]
    codes = ", ".join(c.code for c in given if c.code)[:60]
    return f"The code {codes or '(none)'} ({label or 'no name'}) is not in the catalogue", False


def unit_of(quantity: Quantity, texts: Iterable[str]) -> tuple[UnitOfMeasure | None, str]:
    """The unit that the texts (UCUM code, printed unit) spell, or why it stays unknown."""
    spelled = [t.strip() for t in texts if t and t.strip()]
    units = [u for u in (quantity.unit_named(t) for t in spelled) if u is not None]
    if units:
        if any(u.factor != units[0].factor or u.offset != units[0].offset for u in units):
            return None, f"the units {' and '.join(dict.fromkeys(spelled))} contradict each other"
        return units[0], ""
    if not spelled:
        bare = quantity.unit_named("") if quantity.unit.label == "" else None
        if bare is not None:
            return bare, ""
        choices = " or ".join(u.label or u.ucum for u in quantity.units)
        return None, f"the unit is missing ({choices}?)"
    return None, f"the unit '{spelled[0][:20]}' is not known for {quantity.label}"
