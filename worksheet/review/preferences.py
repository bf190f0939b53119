"""What one person chose: units, decimal sign, time zone, theme; it holds on every page, chart and file."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any
from zoneinfo import available_timezones

from django.contrib import messages
from django.core.exceptions import ValidationError
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render
from django.views.decorators.http import require_http_methods

from worksheet.oxygen.quantities import CATALOGUE, UnitOfMeasure
from worksheet.ward.access import person
from worksheet.ward.display import FOLLOWERS
from worksheet.ward.models import User
from worksheet.ward.models.places import check_time_zone

THEMES = (("system", "as the system"), ("light", "light"), ("dark", "dark"))
COMMAS = (("", "as set for everybody here"), ("point", "point: 7.31"), ("comma", "comma: 7,31"))
WORDS = {
    "po2": "Gas pressures (PO2, PCO2, P/F, A–a …)",
    "mean_arterial_pressure": "Mean arterial pressure",
    "cao2": "Oxygen content (CaO2, CvO2 …)",
    "fio2": "FiO2",
}


@dataclass(frozen=True)
class Choice:
    """One quantity with its units, the chosen one, and what it is called on the page."""

    name: str
    label: str
    units: tuple[UnitOfMeasure, ...]
    chosen: str


def choosable() -> list[str]:
    """Quantities whose unit can be chosen: those with several, without the ones that follow another."""
    several = (q.name for q in CATALOGUE.values() if len(q.units) > 1 and q.name not in FOLLOWERS)
    percent_only = {"dissolved_share", "o2er", "shunt_fraction", "so2_from_po2", "predicted_spo2"}
    return [n for n in several if n not in percent_only and (CATALOGUE[n].unit.ucum != "%" or n == "fio2")]


@require_http_methods(["GET", "HEAD", "POST"])
def preferences(request: HttpRequest) -> HttpResponse:
    """Show and change one's own choices."""
    user, problems = person(request), dict[str, str]()
    if request.method == "POST":
        problems = _store(user, request.POST)
        if not problems:
            messages.success(request, "Your choices are saved.")
            return redirect("preferences")
    return render(
        request, "review/preferences.html", _context(user, request.POST, problems), status=422 if problems else 200
    )


def _store(user: User, posted: Any) -> dict[str, str]:
    """Save the choices; problems by field if anything cannot be."""
    problems = {}
    units = {name: posted.get(f"unit_{name}", "") for name in choosable()}
    for name, code in units.items():
        if code and code not in {u.ucum for u in CATALOGUE[name].units}:
            problems[f"unit_{name}"] = f"'{code[:20]}' is not a unit of {CATALOGUE[name].symbol}."
    zone = posted.get("time_zone", "").strip()
    try:
        if zone:
            check_time_zone(zone)
    except ValidationError as error:
        problems["time_zone"] = error.messages[0]
    for field, allowed in (("theme", THEMES), ("decimal", COMMAS)):
        if posted.get(field, allowed[0][0]) not in dict(allowed):
            problems[field] = "Choose one of the list."
    if not problems:
        _save(
            user, {n: c for n, c in units.items() if c}, zone, posted.get("theme", "system"), posted.get("decimal", "")
        )
    return problems


def _save(user: User, units: dict[str, str], zone: str, theme: str, decimal: str) -> None:
    """Keep only what was chosen; the rest stays as the unit has it."""
    before = user.preferences.get("units", {})
    changed = {name for name in {*before, *units} if before.get(name) != units.get(name)}
    # A new choice for the eyes also holds for the keyboard: what was typed in before no longer decides.
    forget = {n for n in CATALOGUE if n in changed or FOLLOWERS.get(n) in changed}
    typing = {n: c for n, c in user.preferences.get("entry_units", {}).items() if n not in forget}
    kept: dict[str, Any] = {"units": units, "entry_units": typing, "theme": theme}
    if zone:
        kept["time_zone"] = zone
    if decimal:
        kept["decimal_comma"] = decimal == "comma"
    others = {k: v for k, v in user.preferences.items() if k not in {*kept, "time_zone", "decimal_comma"}}
    user.preferences = {**others, **kept}
    user.save(update_fields=["preferences"])


def _context(user: User, posted: Any, problems: dict[str, str]) -> dict[str, Any]:
    """What the page shows: what was just typed if it was refused, else what is stored."""
    stored, typed = user.preferences, bool(problems)
    units = {n: posted.get(f"unit_{n}", "") if typed else stored.get("units", {}).get(n, "") for n in choosable()}
    comma = stored.get("decimal_comma")
    decimal = "" if comma is None else ("comma" if comma else "point")
    return {
        "choices": [
            Choice(n, WORDS.get(n, CATALOGUE[n].label.capitalize()), CATALOGUE[n].units, c) for n, c in units.items()
        ],
        "themes": THEMES,
        "theme": posted.get("theme", "system") if typed else stored.get("theme", "system"),
        "decimals": COMMAS,
        "decimal": posted.get("decimal", "") if typed else decimal,
        "time_zone": posted.get("time_zone", "") if typed else stored.get("time_zone", ""),
        "zones": sorted(
            z for z in available_timezones() if "/" in z and not z.startswith(("Etc/", "SystemV/", "posix/", "right/"))
        ),
        "problems": problems,
    }
