"""One text to one value: decimal sign, comparator, unit, limits; every refusal a sentence in plain words."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass, field

from worksheet.oxygen.quantities import Quantity, UnitOfMeasure

from .limits import MAX_CELL
from .rows import Cell, Status

_MINUS = str.maketrans({"−": "-", "–": "-", "\u00a0": " ", "\u202f": " ", "＞": ">", "＜": "<"})
_NUMBER = re.compile(r"([<>]=?|≤|≥|~)?\s*([+-]?(?:\d+(?:[.,]\d*)?|[.,]\d+)(?:[eE][+-]?\d{1,3})?)\s*(\D*)", re.ASCII)
_ABSENT = frozenset({"", "-", "--", "---", "n/a", "na", "nan", "null", "none", "nd", "."})
_EQUAL = {"≤": "<=", "≥": ">="}


def number(text: str, decimal_comma: bool | None = None) -> tuple[float | None, str, str]:
    """Value, comparator and trailing unit text of a number as people write it; the value is None if it is none.

    ``decimal_comma`` None accepts either sign; with thousands separators nothing is guessed: not a number.
    """
    match = _NUMBER.fullmatch(text.translate(_MINUS).strip()) if len(text) <= MAX_CELL else None
    if match is None:
        return None, "", ""
    sign, digits, rest = match.group(1) or "", match.group(2), match.group(3).strip()
    if ("," in digits and decimal_comma is False) or ("." in digits and decimal_comma is True and "," in text):
        return None, "", ""
    value = float(digits.replace(",", "."))
    return (value if math.isfinite(value) else None), _EQUAL.get(sign, sign), rest


def shortened(text: str, size: int = 40) -> str:
    """A text fit to stand in a sentence: printable and short."""
    plain = "".join(c if c.isprintable() else "�" for c in text)
    return plain if len(plain) <= size else plain[: size - 1] + "…"


def refusal(quantity: Quantity, value: float, unit: UnitOfMeasure) -> tuple[str, str]:
    """Problem and caution of a canonical value: outside what is possible, outside what is likely."""
    low, high = quantity.impossible
    name, shown = quantity.symbol, _plain(float(unit.from_canonical(value)))
    label = f" {unit.label}" if unit.label else ""
    if not low <= value <= high:
        return f"{name} {shown}{label} is impossible ({_span(quantity.impossible, unit)}{label})", ""
    low, high = quantity.unlikely
    if not low <= value <= high:
        return "", f"{name} {shown}{label} is unlikely (usually {_span(quantity.unlikely, unit)}{label})"
    return "", ""


def _plain(value: float) -> str:
    return f"{value:.6g}"


def _span(limits: tuple[float, float], unit: UnitOfMeasure) -> str:
    low, high = (_plain(float(unit.from_canonical(v))) for v in limits)
    return f"{low} to {high}"


def to_cell(quantity: Quantity, text: str, unit: UnitOfMeasure, status: Status = Status.FINAL,
            decimal_comma: bool | None = None, *, received_unit: str | None = None) -> Cell | None:  # fmt: skip
    """A text in a known unit as a cell; None if it says that nothing was measured."""
    spelled = unit.label if received_unit is None else received_unit
    if len(text) > MAX_CELL:
        return Cell(None, shortened(text), spelled, problem=f"{quantity.symbol}: the text has {len(text)} characters")
    stripped = text.strip()
    if stripped.casefold() in _ABSENT:
        return None
    value, comparator, rest = number(stripped, decimal_comma)
    if value is None:
        problem = f"{quantity.symbol}: '{shortened(stripped)}' is not a number"
        return Cell(None, shortened(stripped, 200), spelled, problem=problem, status=status)
    if rest:
        stated = quantity.unit_named(rest)
        if stated is None or (stated.factor, stated.offset) != (unit.factor, unit.offset):
            column = unit.label or "none"
            problem = f"{quantity.symbol}: '{shortened(stripped)}' names another unit than its column ({column})"
            return Cell(None, stripped, spelled, problem=problem, status=status)
    canonical = float(unit.to_canonical(value))
    if quantity.name == "fio2" and unit.ucum == "%" and value <= 1.0:
        canonical = value  # the batch contract: 0.21-1.0 in a percent column is a fraction
    problem, caution = refusal(quantity, canonical, unit)
    return Cell(None if problem else canonical, stripped, spelled, comparator, problem, caution, status)


@dataclass
class ColumnReader:
    """Reads the cells of one column; equal texts are read once (gas values repeat)."""

    quantity: Quantity
    unit: UnitOfMeasure
    decimal_comma: bool | None = None
    received_unit: str | None = None
    _seen: dict[str, Cell | None] = field(default_factory=dict)

    def __call__(self, text: str) -> Cell | None:
        """The cell of a text."""
        try:
            return self._seen[text]
        except KeyError:
            cell = to_cell(
                self.quantity, text, self.unit, decimal_comma=self.decimal_comma, received_unit=self.received_unit
            )
            if len(self._seen) < 50_000:
                self._seen[text] = cell
            return cell
