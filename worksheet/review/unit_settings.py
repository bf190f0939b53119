"""What a unit chooses: time zone, handovers, paper, constants, limits of carrying, uncertainties. For its lead."""

from __future__ import annotations

import re
from typing import Any

from django import forms
from django.contrib import messages
from django.core.exceptions import ValidationError
from django.db import transaction
from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect, render

from worksheet.oxygen.constants import CarryLimits, Constants
from worksheet.oxygen.quantities import CATALOGUE, measured
from worksheet.ward import audit, beds
from worksheet.ward.access import person, unit_or_404
from worksheet.ward.models import Role, Unit

from .preferences import choosable
from .unit_new import bed_names

# Published or usual range of each constant that a site may choose; outside it the form refuses.
CONSTANTS: dict[str, tuple[str, float, float, str]] = {
    "hufner": (
        "Oxygen per gram of active haemoglobin (mL/g)",
        1.30,
        1.40,
        "1.39: Dominguez de Villota 1981; 1.34: Hüfner 1894",
    ),
    "usual_inactive": ("Usual inactive share where never measured (0–1)", 0.0, 0.1, "0.036: 1.39 · (1 − 0.036) = 1.34"),
    "o2_solubility": ("Oxygen solubility at 37 °C (mL/dL/mmHg)", 0.0028, 0.0034, "Christoforides & Hedley-Whyte 1969"),
    "barometric_pressure": ("Barometric pressure of the site (mmHg)", 400.0, 800.0, "at the station, not at sea level"),
    "respiratory_quotient": ("Respiratory exchange ratio R", 0.6, 1.2, "0.8: common practice"),
    "end_capillary_po2": (
        "End-capillary PO2 for extractable oxygen (mmHg)",
        25.0,
        45.0,
        "38 mmHg: Siggaard-Andersen & Gøthgen 1995",
    ),
}
CARRY = {
    "venous": "A venous sample is paired, either side",
    "hb": "Haemoglobin is carried for",
    "settings": "FiO2, device, PEEP and mean airway pressure are carried for",
    "flow_before": "Flow may be older by",
    "flow_after": "Flow may be later by",
    "temperature": "Temperature is carried for",
    "spo2": "SpO2 is paired, either side",
    "vo2_before": "Measured VO2 may be older by",
    "vo2_after": "Measured VO2 may be later by",
    "dyshaemoglobins": "Dyshaemoglobins are carried for",
}
_SHIFTS = re.compile(r"^([01]\d|2[0-3]):[0-5]\d$")


class UnitForm(forms.ModelForm):  # type: ignore[type-arg]
    """The unit's choices; constants, limits and uncertainties each as one field."""

    beds = forms.CharField(label="Beds, in the order of the round (1-12, or 1, 2, 3a)", max_length=600, required=False)
    shifts = forms.CharField(label="Handovers (like 07:00, 19:00)", max_length=80)
    curve = forms.ChoiceField(
        label="Dissociation curve",
        choices=[
            ("tanh", "Siggaard-Andersen 1984/1990 (default)"),
            ("severinghaus", "Severinghaus 1979 with Kelman's shifts"),
        ],
    )
    bsa_formula = forms.ChoiceField(
        label="Body surface area", choices=[("mosteller", "Mosteller 1987 (default)"), ("dubois", "Du Bois 1916")]
    )

    class Meta:
        model = Unit
        fields = ("time_zone", "paper", "decimal_comma", "second_factor")

    def __init__(self, *args: Any, **kwargs: Any) -> None:
        super().__init__(*args, **kwargs)
        self.fields["beds"].initial = ", ".join(self.instance.beds.values_list("name", flat=True))
        self.fields["shifts"].initial = ", ".join(self.instance.shift_starts)
        for name in choosable():
            quantity = CATALOGUE[name]
            chosen = self.instance.units.get(name, quantity.unit.ucum)
            kinds = [(unit.ucum, unit.label or unit.ucum) for unit in quantity.units]
            self.fields[f"unit_{name}"] = forms.ChoiceField(label=f"{quantity.label} is shown in", choices=kinds)
            self.fields[f"unit_{name}"].initial = chosen
        now = self.instance.constants_in_force()
        for name, (label, low, high, source) in CONSTANTS.items():
            self._number(f"constant_{name}", label, low, high, getattr(now, name), source)
        for name, words in CARRY.items():
            self._number(
                f"carry_{name}", f"{words} (h)", 0.0, 72.0, round(getattr(now.carry, name), 4), "common practice"
            )
        self.fields["curve"].initial, self.fields["bsa_formula"].initial = now.curve, now.bsa_formula
        quantities = self.instance.uncertainties_in_force().quantities
        for quantity in measured():
            absolute, relative = quantities[quantity.name]
            label, unit, source = f"Uncertainty of {quantity.symbol}, 1 SD", quantity.unit, quantity.sd_source
            shown = f"{label} ({unit.label})" if unit.label else label
            self._number(f"sd_{quantity.name}", shown, 0.0, 1e4, absolute / unit.factor, source)
            self._number(f"rel_{quantity.name}", f"{label}, relative (%)", 0.0, 100.0, 100 * relative, source)

    def _number(self, name: str, label: str, low: float, high: float, value: float, source: str) -> None:
        field = forms.FloatField(label=label, min_value=low, max_value=high, help_text=source)
        field.initial = float(f"{value:.6g}")
        self.fields[name] = field

    def plain_fields(self) -> list[forms.BoundField]:
        """What is not a number in a table."""
        return [field for field in self if not field.name.startswith(("constant_", "carry_", "sd_", "rel_"))]

    def groups(self) -> list[tuple[str, dict[str, Any]]]:
        """The numbers as tables: title, and rows of a field with its relative partner where it has one."""
        titles = (("constant_", "Constants"), ("carry_", "How long a value is carried"), ("sd_", "Uncertainties"))
        made = []
        for prefix, title in titles:
            rows = [{"field": field} for field in self if field.name.startswith(prefix)]
            if prefix == "sd_":
                rows = [{**row, "relative": self["rel_" + row["field"].name[3:]]} for row in rows]
            made.append((title, {"rows": rows, "relative": prefix == "sd_"}))
        return made

    def clean_beds(self) -> list[str]:
        """Names of beds; none with a patient in it may be missing."""
        text = self.cleaned_data["beds"]
        names = bed_names(text) if text.strip() else []
        lost = beds.occupied(self.instance) - set(names)
        if lost:
            raise ValidationError(f"There is a patient in bed {', '.join(sorted(lost))}: move the patient first.")
        return names

    def clean_shifts(self) -> list[str]:
        """Times of handover, in order."""
        shifts = [text.strip() for text in self.cleaned_data["shifts"].split(",") if text.strip()]
        if not shifts or len(shifts) > 6 or not all(_SHIFTS.match(text) for text in shifts):
            raise ValidationError("Write one to six times of the 24 h clock, separated by commas: 07:00, 19:00.")
        return sorted(set(shifts))

    def save(self, commit: bool = True) -> Unit:
        """Store only what differs from the defaults."""
        unit: Unit = super().save(commit=False)
        got, default = self.cleaned_data, Constants()
        unit.shift_starts = got["shifts"]
        picked = {name: got[f"unit_{name}"] for name in choosable()}
        unit.units = {name: ucum for name, ucum in picked.items() if ucum != CATALOGUE[name].unit.ucum}
        chosen = {name: got[f"constant_{name}"] for name in CONSTANTS} | {n: got[n] for n in ("curve", "bsa_formula")}
        unit.constants = {name: value for name, value in chosen.items() if value != getattr(default, name)}
        unit.carry = {n: got[f"carry_{n}"] for n in CARRY if abs(got[f"carry_{n}"] - getattr(CarryLimits(), n)) > 1e-3}
        unit.uncertainties = self._uncertainties()
        if commit:
            with transaction.atomic():
                unit.save()
                beds.set_beds(unit, got["beds"])
        return unit

    def _uncertainties(self) -> dict[str, list[float]]:
        changed = {}
        for quantity in measured():
            pair = [
                self.cleaned_data[f"sd_{quantity.name}"] * quantity.unit.factor,
                self.cleaned_data[f"rel_{quantity.name}"] / 100,
            ]
            if abs(pair[0] - quantity.sd_abs) > 1e-9 or abs(pair[1] - quantity.sd_rel) > 1e-9:
                changed[quantity.name] = pair
        return changed


def unit_settings(request: HttpRequest, slug: str) -> HttpResponse:
    """Show and change what the unit chose; every change is in the trail with its old value."""
    unit = unit_or_404(request, slug, Role.LEAD)
    before = _stored(unit)
    form = UnitForm(request.POST or None, instance=unit)
    if request.method == "POST" and form.is_valid():
        after = _stored(form.save())
        changed = {name: [before[name], after[name]] for name in after if before[name] != after[name]}
        if changed:
            audit.write(
                person(request).username, "changed the unit", unit=unit.name, subject=unit.name, changed=changed
            )
        messages.success(
            request, "Saved. Every page derives with these values from now on." if changed else "Nothing changed."
        )
        return redirect("unit_settings", slug=slug)
    status = 400 if request.method == "POST" else 200
    return render(request, "review/unit_settings.html", {"unit": unit, "form": form, "here": "settings"}, status=status)


def _stored(unit: Unit) -> dict[str, Any]:
    names = (
        "time_zone",
        "paper",
        "decimal_comma",
        "second_factor",
        "units",
        "shift_starts",
        "constants",
        "carry",
        "uncertainties",
    )
    stored = {name: getattr(unit, name) for name in names}
    return stored | {"beds": list(unit.beds.values_list("name", flat=True))}
