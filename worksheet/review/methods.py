"""The methods page: every quantity, equation, limit, uncertainty and constant, read off the program itself."""

from __future__ import annotations

import importlib
import inspect
import math
import re
from collections.abc import Iterator
from dataclasses import dataclass
from functools import lru_cache

from django.http import HttpRequest, HttpResponse
from django.shortcuts import render

from worksheet.oxygen.constants import DEFAULT, Constants
from worksheet.oxygen.finding_kinds import KINDS, Kind
from worksheet.oxygen.levers import CAUTIONS, OXYGEN_AGAINST_CO
from worksheet.oxygen.measurement import DEFAULT as USUAL
from worksheet.oxygen.measurement import Uncertainties
from worksheet.oxygen.quantities import CATALOGUE, Quantity, derived, measured
from worksheet.oxygen.readings import Device, FlowMethod
from worksheet.ward.access import person, unit_or_404
from worksheet.ward.display import Display
from worksheet.ward.models import Unit

from .constants_table import carry_in_force, constants_in_force
from .equations import equation_of
from .words import supported

# What each part is about; the words, equations, ranges and references come from the code itself.
PARTS = (
    ("Oxygen content", "content"), ("Dissociation curve", "curve"), ("Curve: the tanh model", "tanh_model"),
    ("Curve: Severinghaus and Kelman", "severinghaus"), ("Carbon monoxide", "carbon_monoxide"),
    ("Half saturation", "half_saturation"), ("Saturations", "oximetry"), ("Delivery and consumption", "delivery"),
    ("Gas exchange", "exchange"), ("Bands of P/F and S/F", "bands"), ("Acid and base", "acidbase"),
    ("Altitude", "altitude"), ("Pairing and carrying forward", "align"), ("Measurement uncertainty", "measurement"),
    ("Propagation of uncertainty", "uncertainty"), ("Change ledger", "ledger"), ("Ledger: the split", "shapley"),
    ("Real change", "change"), ("Lactate and trends", "trend"), ("Slopes", "slopes"),
    ("Which step failed", "judgement"), ("What to measure next", "next_measurement"), ("Levers", "levers"),
    ("Findings", "plausibility"),
)  # fmt: skip


@dataclass(frozen=True)
class DerivedLine:
    """A derived quantity with its equation."""

    quantity: Quantity
    unit: str
    equation: str
    note: str


@dataclass(frozen=True)
class MeasuredLine:
    """A measured quantity with its limits and uncertainty, in the reader's unit."""

    quantity: Quantity
    unit: str
    likely: str
    possible: str
    sd: str


@dataclass(frozen=True)
class Part:
    """One part of the engine: what it does, its functions and its references."""

    title: str
    name: str
    about: tuple[str, ...]
    functions: tuple[tuple[str, str], ...]
    references: tuple[str, ...]


def methods(request: HttpRequest, slug: str = "") -> HttpResponse:
    """Quantities, equations, constants and sources; those in force where a unit is named."""
    unit = unit_or_404(request, slug) if slug else None
    display = Display.of(person(request), unit or Unit())
    constants = unit.constants_in_force() if unit else DEFAULT
    settings = unit.uncertainties_in_force() if unit else USUAL
    context = {
        "unit": unit, "here": "methods", "derived": list(derived_lines(constants, display)),
        "measured": list(measured_lines(settings, display)), "constants": list(constants_in_force(constants, display)),
        "carry": list(carry_in_force(constants.carry)), "spreads": list(spread_lines(settings, display)),
        "parts": parts(), "kinds": _kinds(), "cautions": (*CAUTIONS, OXYGEN_AGAINST_CO),
    }  # fmt: skip
    return render(request, "review/methods.html", context)


def derived_lines(constants: Constants, display: Display) -> Iterator[DerivedLine]:
    """Every derived quantity of the catalogue."""
    for quantity in derived():
        found = equation_of(quantity.name, constants)
        yield DerivedLine(quantity, display.unit(quantity.name).label, found.text, found.note)


def measured_lines(settings: Uncertainties, display: Display) -> Iterator[MeasuredLine]:
    """Every measured quantity of the catalogue."""
    for quantity in measured():
        yield MeasuredLine(
            quantity, display.unit(quantity.name).label, _range(quantity.name, quantity.unlikely, display),
            _range(quantity.name, quantity.impossible, display), _sd(quantity, settings, display),
        )  # fmt: skip


def _range(name: str, limits: tuple[float, float], display: Display) -> str:
    low, high = (display.value(name, limit) if math.isfinite(limit) else "" for limit in limits)
    if low and high:
        return f"{low} to {high}"
    return f"from {low}" if low else f"up to {high}" if high else "any"


def _sd(quantity: Quantity, settings: Uncertainties, display: Display) -> str:
    absolute, relative = settings.quantities[quantity.name]
    shown = absolute / display.unit(quantity.name).factor
    parts = []
    if absolute:
        parts.append(
            f"{display.number(shown, max(0, supported(shown, 3)))} {display.unit(quantity.name).label}".rstrip()
        )
    if relative:
        parts.append(f"{display.number(100 * relative, 0)} %")
    return " or ".join(parts) + (", the larger" if len(parts) > 1 else "") if parts else "by method"


def spread_lines(settings: Uncertainties, display: Display) -> Iterator[tuple[str, str]]:
    """Standard uncertainties that depend on a device, a method or an age."""
    for code, share in settings.fio2.items():
        yield f"FiO2, {Device(code).name.lower().replace('_', ' ')}", f"{display.number(100 * share, 1)} points"
    for method in FlowMethod:
        precision, accuracy = settings.flow.get(method, settings.flow_other)
        words = f"precision {display.number(100 * precision, 1)} %, accuracy {display.number(100 * accuracy, 1)} %"
        yield f"cardiac output, {method.name.lower().replace('_', ' ')}", words
    yield "haemoglobin by another method", f"{display.number(100 * settings.hb_other_method, 0)} %"
    for name, growth in settings.growth.items():
        text = f"{display.number(growth, 1)} °C" if name == "temperature" else f"{display.number(100 * growth, 0)} %"
        yield f"carried {name.replace('hb', 'haemoglobin', 1) if name == 'hb' else name}, growth", f"{text} per √h"
    yield "usual inactive share, where never measured", f"{display.number(100 * settings.usual_inactive, 1)} points"
    yield "a patient's curve about the modelled one", f"{display.number(settings.curve, 2)} of ln PO2"


@lru_cache(maxsize=1)
def _kinds() -> tuple[Kind, ...]:
    """Findings that are not plain limits of one quantity (those stand with the quantity)."""
    limits = {f"{n.replace('_', '-')}-{kind}" for n in CATALOGUE for kind in ("impossible", "unlikely")}
    return tuple(kind for code, kind in KINDS.items() if code not in limits)


@lru_cache(maxsize=1)
def parts() -> tuple[Part, ...]:
    """Every part of the engine as its docstrings tell it."""
    return tuple(_part(title, name) for title, name in PARTS)


def _part(title: str, name: str) -> Part:
    module = importlib.import_module(f"worksheet.oxygen.{name}")
    about, references = _split(inspect.getdoc(module) or "")
    listed = [
        (function, _sentence(inspect.getdoc(value) or ""))
        for function, value in vars(module).items()
        if inspect.isfunction(value) and value.__module__ == module.__name__ and not function.startswith("_")
    ]
    return Part(title, name, tuple(about), tuple(listed), tuple(references))


def _split(text: str) -> tuple[list[str], list[str]]:
    """Paragraphs before the references, and the references."""
    body, _, tail = text.partition("References\n----------")
    about = [_plain(" ".join(p.split())) for p in body.split("\n\n") if p.strip()]
    references = [" ".join(r.split()) for r in re.split(r"^\.\. \[\d+\]", tail, flags=re.MULTILINE)[1:]]
    return about, [f"[{i}] {r}" for i, r in enumerate(references, 1)]


def _sentence(text: str) -> str:
    return _plain(" ".join(text.split("\n\n")[0].split()))


def _plain(text: str) -> str:
    """Docstring markup as plain words."""
    text = re.sub(r":\w+:`~?\.*([\w.]+)`", lambda m: m.group(1).rsplit(".", 1)[-1], text)
    return re.sub(r"(\[\d+\])_", r"\1", text.replace("``", ""))
