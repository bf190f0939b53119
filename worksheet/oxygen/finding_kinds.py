"""The catalogue of findings: what can be wrong with a set of values, in words, and what would settle it.

Words hold named numbers in braces; each is filled in with its unit. A kind's severity: ``impossible`` blocks,
``unlikely`` asks, ``note`` informs. None is a diagnosis.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from types import MappingProxyType

from .quantities import CATALOGUE, MEASURED, Quantity

_CP = "common practice"
_CO_OXIMETRY = "send co-oximetry"


class Severity(StrEnum):
    """How a finding is treated: blocks, asks, informs."""

    IMPOSSIBLE = "impossible"
    UNLIKELY = "unlikely"
    NOTE = "note"


@dataclass(frozen=True)
class Kind:
    """One kind of finding.

    Attributes
    ----------
    code : str
        Short code: lower-case words with hyphens.
    severity : Severity
        Blocks, asks or informs.
    words : str
        One sentence with named numbers in braces.
    settle : str
        What would settle it.
    source : str
        Published basis of the limit, or "common practice".
    """

    code: str
    severity: Severity
    words: str
    settle: str
    source: str = _CP


def _kind(code: str, severity: Severity, words: str, settle: str, source: str = _CP) -> Kind:
    return Kind(code, severity, words, settle, source)


_U, _N, _I = Severity.UNLIKELY, Severity.NOTE, Severity.IMPOSSIBLE

_CONTRADICTIONS = (
    _kind("po2-above-alveolar", _U,
          "PaO2 {po2} is above the alveolar {alveolar} that FiO2 {fio2} and PaCO2 {pco2} allow.",
          "Check FiO2 at the time of the sample, the units, and the syringe for an air bubble.",
          "alveolar gas equation, Fenn, Rahn & Otis 1946"),
    _kind("po2-looks-like-kpa", _U, "PO2 {po2} fits the rest only if it was meant in kPa.",
          "Check the unit of PO2."),
    _kind("pco2-looks-like-kpa", _U, "PCO2 {pco2} fits the rest only if it was meant in kPa.",
          "Check the unit of PCO2."),
    _kind("po2-looks-like-mmhg", _U, "PO2 {po2} fits the rest only if mmHg were typed as kPa.",
          "Check the unit of PO2."),
    _kind("pco2-looks-like-mmhg", _U, "PCO2 {pco2} fits the rest only if mmHg were typed as kPa.",
          "Check the unit of PCO2."),
    _kind("fio2-fraction-or-percent", _I, "FiO2 {fio2} looks like a fraction taken for a percentage, or the reverse.",
          "Type FiO2 again in the unit shown."),
    _kind("saturation-like-fraction", _U,
          "A saturation of {saturation} looks like a fraction in a column of percentages; it was not used.",
          "Give saturations in percent."),
    _kind("so2-against-curve", _U,
          "Measured saturation {so2}, but {expected} would go with PO2 {po2}: a shifted curve, venous blood in the "
          "syringe, oxygen used up by a very high white count, or an error.",
          "Repeat the sample; co-oximetry if it was not done.", "Siggaard-Andersen 1984; Mallat 2015"),
    _kind("arterial-looks-venous", _U,
          "Labelled arterial, but saturation {so2} and PO2 {po2} look venous (SpO2 {spo2}).",
          "Check where the sample was drawn; repeat it."),
    _kind("fractions-do-not-add", _U,
          "Oxy-, deoxy-, carboxy- and methaemoglobin add up to {sum} of haemoglobin, not 100 %.",
          "Check whether a functional saturation was typed as O2Hb, or the reverse."),
    _kind("venous-above-arterial", _U, "Venous saturation {venous} is above the arterial {arterial}.",
          "Check the two labels and the times of the samples."),
    _kind("hb-jump", _U,
          "Haemoglobin went from {before} to {hb} within {hours} h without a recorded transfusion or bleed.",
          "Repeat haemoglobin: dilution, a clot, another patient? Record a transfusion or bleed if there was one."),
    _kind("ph-pco2-hco3-disagree", _U,
          "Bicarbonate {bicarbonate} does not go with pH {ph} and PCO2 {pco2}, which give {expected}.",
          "Check the three values against the slip.", "Henderson-Hasselbalch, CLSI C46"),
    _kind("calculated-as-measured", _U,
          "Saturation {so2} equals a calculated one to the last digit: it was probably not measured.",
          "Enter it as calculated; " + _CO_OXIMETRY + " for a measured one."),
    _kind("co-and-ci-disagree", _U,
          "Cardiac output {co} over cardiac index {ci} gives {area}, but height and weight {bsa}.",
          "Check height, weight and which of the two was typed."),
    _kind("p50-out-of-range", _U, "A P50 of {p50} is not that of blood: saturation and PO2 do not belong together.",
          "Repeat the pair by co-oximetry."),
    _kind("o2er-out-of-range", _U, "Oxygen extraction {o2er} is outside what is usually seen (5 to 80 %).",
          "Check the arterial and the venous sample, their labels and times."),
    _kind("room-air-with-oxygen", _U, "Device is room air, but FiO2 is {fio2}.", "Check device and FiO2."),
)  # fmt: skip
_TIMES = (
    _kind("time-in-future", _I, "The time lies {hours} h ahead of now.", "Check date and clock."),
    _kind("before-admission", _U, "The time lies {hours} h before the admission.", "Check date, clock and patient."),
    _kind("duplicate-sample", _U, "The same sample seems to be there twice ({hours} h apart).",
          "Withdraw one of the two if they are one sample."),
    _kind("values-of-another-patient", _U, "The same values are there for another patient within a day.",
          "Check whose sample this is."),
    _kind("site-not-stated", _U, "The site was not stated: taken as arterial.", "State where the sample was drawn."),
    _kind("saturation-without-site", _U, "A saturation of blood without a site and without a gas: kept, not used.",
          "State where the sample was drawn."),
)  # fmt: skip
_GAPS = (
    _kind("gap-reading-false", _N,
          "SpO2 {spo2} is below the saturation of the sample ({so2}) with clean co-oximetry and normal PaO2 {po2}: the "
          "reading is false (poor perfusion, cold, varnish, movement, probe). Delivery is not affected.",
          "Move or change the probe; trust the sample.", "Ebmeier 2018; common practice"),
    _kind("gap-dyshaemoglobin", _U,
          "SpO2 {spo2} is below the calculated {calculated} with MetHb or SulfHb of {share}: the reading is low and "
          "the patient is worse than PaO2 {po2} says.",
          "Repeat co-oximetry; content uses O2Hb.", "Barker, Tremper & Hyatt 1989"),
    _kind("gap-send-co-oximetry", _U,
          "SpO2 {spo2} is below the calculated {calculated} and there is no co-oximetry: a false reading, or for "
          "example a MetHb of about {methb} % would explain it.",
          _CO_OXIMETRY.capitalize() + ".", "Zijlstra 2000; Barker, Tremper & Hyatt 1989"),
    _kind("gap-beyond-methb", _U,
          "SpO2 {spo2} is below the calculated {calculated}, there is no co-oximetry, and no share of MetHb alone "
          "would explain it: a false reading, SulfHb, or a sample that is not of the same blood and time.",
          "Move or change the probe; " + _CO_OXIMETRY + ".", "Zijlstra 2000; Barker, Tremper & Hyatt 1989"),
    _kind("cohb-hidden", _U,
          "COHb {cohb}: SpO2, PaO2 and a calculated saturation all miss it. Content uses O2Hb.",
          "Repeat co-oximetry; look for the source.", "Barker & Tremper 1987"),
    _kind("hypoxaemia-agreed", _N, "SpO2 {spo2}, measured saturation {so2} and PaO2 {po2} agree that oxygen is low.",
          "Nothing to settle: all three agree."),
    _kind("hypoxaemia-occult", _U, "SpO2 {spo2} is above the measured saturation {so2}: low oxygen may be hidden.",
          "Trust the sample; the gap is more frequent in patients with darker skin.", "Sjoding 2020, NEJM 383:2477"),
)  # fmt: skip
_LIMITS_OF_METHOD = (
    _kind("pf-from-estimated-fio2", _N, "P/F {pf_ratio} rests on an estimated FiO2 {fio2}.",
          "A device with a set FiO2 would settle it."),
    _kind("spo2-above-97", _N, "SpO2 {spo2} is above 97 %: S/F is not reported, the curve is flat there.",
          "An arterial gas.", "Rice 2007; Matthay 2024"),
)  # fmt: skip


def _limits(quantity: Quantity) -> tuple[Kind, Kind]:
    code = quantity.name.replace("_", "-")
    symbol, source = quantity.symbol, quantity.limits_source
    check = f"Check {symbol} and its unit."
    return (
        Kind(f"{code}-impossible", _I, f"{symbol} {{value}} is impossible ({{low}} to {{high}}); it was not used.",
             check, source),
        Kind(f"{code}-unlikely", _U, f"{symbol} {{value}} is unlikely (usually {{low}} to {{high}}).", check, source),
    )  # fmt: skip


KINDS: Mapping[str, Kind] = MappingProxyType({
    kind.code: kind
    for kind in (
        *(kind for name in MEASURED for kind in _limits(CATALOGUE[name])),
        *_TIMES, *_CONTRADICTIONS, *_GAPS, *_LIMITS_OF_METHOD,
    )
})  # fmt: skip
"""Every kind of finding by its code, in the order in which codes are listed."""
