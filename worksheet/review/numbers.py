"""A number as people type it at the bedside: read strictly, and refused with a sentence that says how to mend it."""

from __future__ import annotations

import re
from dataclasses import dataclass

from worksheet.oxygen.quantities import Quantity, UnitOfMeasure

LONGEST = 40  # characters; a longer text is no number of a gas slip
_PLAIN = str.maketrans({"−": "-", "–": "-", "\u00a0": " ", "\u202f": " ", "\u2009": " "})
_NUMBER = re.compile(r"([<>]=?|≤|≥)?\s*([+-]?(?:\d+(?:[.,]\d+)?|[.,]\d+))\s*(.*)", re.ASCII | re.DOTALL)
_GROUPED = re.compile(r"[<>=≤≥\s]*\d{1,3}(?:[ '’.,]\d{3})+(?:[.,]\d*)?", re.ASCII)
_HALF = re.compile(r"[<>=≤≥\s]*[+-]?\d+[.,]", re.ASCII)  # the key was pressed, the decimals are still to come
_SIGNS = {"≤": "<=", "≥": ">="}


@dataclass(frozen=True)
class Number:
    """What a text says: its value in the unit of the field, a comparator, or why it is no number."""

    value: float | None = None
    comparator: str = ""  # ">" or "<" as an analyser prints it beyond its range
    problem: str = ""
    unit: str = ""  # a unit written behind the number

    @property
    def empty(self) -> bool:
        """Nothing was typed."""
        return self.value is None and not self.problem


def parse(text: str) -> Number:
    """Read a number with decimal point or comma; thousands separators, exponents and words are refused."""
    stripped = text.translate(_PLAIN).strip()
    if not stripped:
        return Number()
    shown = stripped if len(stripped) <= LONGEST else stripped[: LONGEST - 1] + "…"
    match = _NUMBER.fullmatch(stripped) if len(stripped) <= LONGEST else None
    rest = match.group(3) if match else ""
    if match is None or rest[:1].isdigit() or rest[:1] in {".", ",", "'", "’"}:
        if _GROUPED.fullmatch(stripped):
            return Number(problem=f"'{shown}' has a thousands separator; write the number without it.")
        if _HALF.fullmatch(stripped):
            return Number(
                problem=f"'{shown}' ends with the decimal sign; write the decimals, or the number without it."
            )
        return Number(problem=f"'{shown}' is not a number.")
    comparator = match.group(1) or ""
    value = float(match.group(2).replace(",", "."))
    return Number(value, _SIGNS.get(comparator, comparator), unit=rest.strip())


def two_readings(text: str, decimal_comma: bool) -> float | None:
    """The other reading of ``1,234`` for somebody whose decimal sign is the point (and the reverse), else None."""
    foreign = "." if decimal_comma else ","
    digits = text.translate(_PLAIN).strip().lstrip("<>=≤≥ ")
    match = re.fullmatch(rf"([1-9]\d{{0,2}}){re.escape(foreign)}(\d{{3}})\D*", digits, re.ASCII)
    return float(match.group(1) + match.group(2)) if match else None


def read(text: str, quantity: Quantity, unit: UnitOfMeasure, decimal_comma: bool = False) -> Number:
    """A number for a quantity in the unit chosen beside the field; a unit in the text must be that unit."""
    number = parse(text)
    if number.value is None:
        return number
    if number.unit and not _same(quantity.unit_named(number.unit), unit):
        return Number(problem=_other_unit(number.unit, quantity, unit))
    thousands = two_readings(text, decimal_comma)
    low, high = quantity.impossible
    if thousands is not None and low <= float(unit.to_canonical(thousands)) <= high:
        either = f"{thousands:.0f} or {_signed(number.value, decimal_comma)}"
        return Number(problem=f"'{text.strip()}' can be read in two ways; write {either}.")
    return number


def _same(one: UnitOfMeasure | None, other: UnitOfMeasure) -> bool:
    return one is not None and (one.factor, one.offset) == (other.factor, other.offset)


def _other_unit(typed: str, quantity: Quantity, unit: UnitOfMeasure) -> str:
    if quantity.unit_named(typed) is None:
        return f"'{typed}' behind the number is not a unit of {quantity.symbol}; write the number alone."
    return f"'{typed}' is written behind the number, but the field is in {unit.label or 'no unit'}; choose one of them."


def _signed(value: float, decimal_comma: bool) -> str:
    text = f"{value:g}"
    return text.replace(".", ",") if decimal_comma else text
