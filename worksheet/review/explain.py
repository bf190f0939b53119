"""Any derived number opened: its equation with the numbers put in, where each came from, and how sure it is."""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from django.http import Http404, HttpRequest, HttpResponse
from django.shortcuts import render

from worksheet.oxygen.measurement import parts
from worksheet.oxygen.quantities import CATALOGUE, DERIVED
from worksheet.oxygen.readings import Site
from worksheet.oxygen.uncertainty import Budget, MonteCarlo, budget, first_order_doubtful, monte_carlo
from worksheet.ward.access import person, unit_or_404
from worksheet.ward.display import Display, age_words
from worksheet.ward.models import Entry, Stay
from worksheet.ward.sheet import Sheet, open_sheet

from . import words
from .basis import basis_words
from .constants_table import CONSTANTS
from .equations import TERMS, Equation, equation_at, numbers_put_in, terms_of
from .reach import entries_in_reach
from .stays_here import find
from .window import Window

_CONSTANT = {"k": "hufner", "alpha": "o2_solubility", "ph2o": "water_vapour", "r": "respiratory_quotient",
             "end_capillary": "end_capillary_po2"}  # fmt: skip
_MADE = {"saturation": "the saturation in use", "inactive": "the share of haemoglobin that cannot carry oxygen",
         "cco2": "content of end-capillary blood, by the curve at PAO2", "measured": "measured saturation"}  # fmt: skip
_VENOUS_WORDS = {"venous_measured": "measured venous saturation"}
_BY = {
    "index": "cardiac_index",
    "output": "cardiac_output",
    "pb": "barometric_pressure",
    "calculated": "so2_calculated",
}
INPUTS = {
    "hb": "haemoglobin", "so2": "saturation in use", "dyshaemoglobins": "dyshaemoglobins", "po2": "PaO2", "ph": "pH",
    "pco2": "PaCO2", "curve": "the patient's curve about the modelled one", "flow": "cardiac output or index",
    "fio2": "FiO2", "barometric_pressure": "barometric pressure", "hb_venous": "haemoglobin, venous",
    "so2_venous": "venous saturation", "po2_venous": "venous PO2", "bsa": "body surface (height, weight)",
    "height": "height", "weight": "weight",
}  # fmt: skip


@dataclass(frozen=True)
class Input:
    """One number that went in: what it is and where it comes from."""

    symbol: str
    words: str
    value: str
    origin: str
    sd: str = ""
    derived: str = ""  # name of the quantity, where it opens further


@dataclass(frozen=True)
class Share:
    """What one input adds to the uncertainty."""

    words: str
    percent: str
    width: int  # of a small bar, 0-100


@dataclass(frozen=True)
class Explanation:
    """One derived number of one entry, opened."""

    sheet: Sheet
    stay: Stay
    row: int
    name: str
    display: Display

    @property
    def quantity(self) -> object:
        """The catalogue's entry."""
        return CATALOGUE[self.name]

    @property
    def when(self) -> str:
        """Time of the entry."""
        return self.display.stamp(float(self.sheet.readings.time[self.row]))

    @property
    def entry_id(self) -> int:
        """The entry it belongs to."""
        return int(self.sheet.entry_ids[self.row])

    @property
    def value(self) -> float:
        """The number, canonical."""
        return float(self.sheet.derived[self.name][self.row])

    @property
    def sd(self) -> float:
        """Its standard uncertainty, NaN where it has none."""
        return float(self.sheet.sds[self.name][self.row]) if self.name in self.sheet.sds else math.nan

    @property
    def text(self) -> str:
        """The number with its 95 % half width and unit."""
        return words.plus_minus(self.display, self.name, self.value, self.sd, unit=True)

    @property
    def sd_text(self) -> str:
        """Its standard uncertainty in the reader's unit."""
        sd = self.sd / self.display.unit(self.name).factor
        return self.display.number(sd, max(0, words.supported(sd, 4))) if math.isfinite(sd) else ""

    @cached_property
    def equation(self) -> Equation:
        """The equation in force."""
        return equation_at(self.name, self.sheet, self.row)

    @property
    def put_in(self) -> str:
        """The equation with its numbers and its result, in the units in which it counts."""
        put = numbers_put_in(self.equation, terms_of(self.equation, self.sheet, self.row), self.display)
        if not put or not math.isfinite(self.value):
            return ""
        quantity = CATALOGUE[self.name]
        edge = float(quantity.unit.from_canonical(self.value))
        percent = f" = {self.display.number(self.value, 3)}" if quantity.unit.ucum == "%" else ""
        return f"{put}{percent} = {self.display.number(edge, quantity.decimals)} {quantity.unit.label}".rstrip()

    @property
    def inputs(self) -> Iterator[Input]:
        """Every term with its origin."""
        for name, value in terms_of(self.equation, self.sheet, self.row).items():
            symbol, decimals, unit = TERMS[name]
            if name in _CONSTANT:
                label, _, _, source = CONSTANTS[_CONSTANT[name]]
                yield Input(
                    symbol,
                    label,
                    f"{self.display.number(value, decimals)} {unit}".rstrip(),
                    f"constant in force; {source}",
                )
            elif math.isfinite(value):
                yield self._input(name, value, symbol, decimals, unit)
            else:
                yield Input(symbol, "", "not known", "")

    def _input(self, name: str, value: float, symbol: str, decimals: int, unit: str) -> Input:
        plain = f"{self.display.number(value, decimals)} {unit}".rstrip()
        if name in _MADE:
            origin = "; ".join(basis_words(int(self.sheet.derived.flags[self.row]), name)) or "of this sample"
            return Input(symbol, _MADE[name], plain, origin)
        if name.startswith("venous_"):
            return Input(symbol, _VENOUS_WORDS.get(name) or f"venous {CATALOGUE[name.removeprefix('venous_')].label}",
                         plain, self._venous_origin(name))  # fmt: skip
        known = _BY.get(name, name)
        if CATALOGUE[known].derived:
            shown = self.display.value(known, value, with_unit=True)
            return Input(symbol, CATALOGUE[known].label, shown, "derived", derived=known)
        return Input(symbol, CATALOGUE[known].label, self.display.value(known, value, with_unit=True),
                     self._origin(name, known), self._input_sd(known))  # fmt: skip

    def _origin(self, name: str, known: str) -> str:
        source, age = (
            int(self.sheet.snapshots.source[known][self.row]),
            float(self.sheet.snapshots.age[known][self.row]),
        )
        if source < 0:
            return self._made_origin(name, known)
        if source == self.row:
            facts = {"height", "weight", "age"}
            return "of the stay" if known in facts else "measured in this entry"
        when = self.display.stamp(float(self.sheet.readings.time[source]))
        return f"carried from {when}, {age_words(age)} old" if age >= 0 else f"read at {when}, {age_words(age)} later"

    def _made_origin(self, name: str, known: str) -> str:
        if name in ("index", "output"):
            other = "cardiac_output" if name == "index" else "cardiac_index"
            sign = "over" if name == "index" else "times"
            shown = self.display.value(other, float(self.sheet.snapshots[other][self.row]), with_unit=True)
            return f"from {shown} {sign} body surface, {self._origin(other, other)}"
        assumed = {"pb": "the unit's constant: not measured", "temperature": "37 °C assumed: not measured",
                   "calculated": "by the curve: the analyser gave none"}  # fmt: skip
        return assumed.get(name, "not measured")

    def _venous_origin(self, name: str) -> str:
        other = int(self.sheet.snapshots.venous_row[self.row])
        if other < 0:
            return "no paired sample"
        column = name.removeprefix("venous_")
        own = column == "measured" or math.isfinite(float(self.sheet.snapshots.venous[column][self.row]))
        site = words.SITE_WORDS[Site(int(self.sheet.readings.site[other]))]
        when = self.display.stamp(float(self.sheet.readings.time[other]))
        return f"{site} sample of {when}" if own else "of the arterial sample: the venous one has none"

    def _input_sd(self, known: str) -> str:
        sd = float(parts(self.sheet.snapshots, known, self.sheet.settings).total[self.row])
        shown = sd / self.display.unit(known).factor
        if not math.isfinite(shown) or shown <= 0:
            return ""
        return self.display.number(shown, max(0, words.supported(shown, 3)))

    @cached_property
    def _budget(self) -> Budget:
        return budget(self.sheet.snapshots, self.sheet.derived, self.sheet.constants, self.sheet.settings)

    @property
    def shares(self) -> list[Share]:
        """What each input adds to the variance, largest first; what adds less than half a percent is left out."""
        if self.name not in self._budget.partials or not math.isfinite(self.value):
            return []
        variance = {n: float(np.nan_to_num(v[self.row])) for n, v in self._budget.variance(self.name).items()}
        whole = sum(variance.values())
        ranked = sorted(variance.items(), key=lambda item: -item[1])
        return [
            Share(INPUTS.get(n, n), words.percent(self.display, v / whole, signed=False), round(100 * v / whole))
            for n, v in ranked
            if whole > 0 and v / whole >= 0.005
        ]

    @cached_property
    def drawn(self) -> MonteCarlo | None:
        """The interval by Monte Carlo, where first order is not enough."""
        doubtful = first_order_doubtful(self.sheet.snapshots, self.sheet.derived, self.sheet.sds)
        if self.name not in doubtful or not bool(doubtful[self.name][self.row]):
            return None
        return monte_carlo(self.sheet.snapshots, self.row, self.sheet.constants, self.sheet.settings).get(self.name)

    @property
    def drawn_text(self) -> str:
        """That interval in words."""
        if self.drawn is None:
            return ""
        low, high = (self.display.value(self.name, limit) for limit in (self.drawn.low, self.drawn.high))
        return f"{low} to {high} {self.display.unit(self.name).label}".rstrip()

    @property
    def rests_on(self) -> list[str]:
        """What is assumed or carried, in words."""
        return basis_words(int(self.sheet.derived.flags[self.row]), self.name)


def explain(request: HttpRequest, slug: str, ref: str, entry_id: int, quantity: str) -> HttpResponse:
    """The explanation as a page of its own, or for the dialog of another page."""
    unit, user = unit_or_404(request, slug), person(request)
    if quantity not in DERIVED:
        raise Http404("No such derived quantity.")
    stay = find(request, unit, ref)
    entry = Entry.objects.visible_to(user).filter(stay=stay, pk=entry_id).current().first()
    if entry is None:
        raise Http404("No such entry in this stay, or it was corrected or struck out.")
    at = Window("free", entry.time, entry.time, "", entry.time)
    sheet = open_sheet(unit, [stay], entries_in_reach(unit, [stay.pk], at))
    opened = Explanation(sheet, stay, sheet.row_of_entry[entry.pk], quantity, Display.of(user, unit))
    template = "review/_explain.html" if getattr(request, "htmx", False) else "review/explain.html"
    return render(request, template, {"unit": unit, "stay": stay, "it": opened, "entry": entry})
