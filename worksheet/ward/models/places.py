"""Units, beds, patients and their stays."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any, Self
from zoneinfo import ZoneInfo

from django.core.exceptions import ValidationError
from django.db import models

from worksheet.oxygen.constants import CarryLimits, Constants
from worksheet.oxygen.measurement import Uncertainties

from .accounts import Role

if TYPE_CHECKING:
    from django.contrib.auth.models import AnonymousUser

    from .accounts import User


def check_time_zone(name: str) -> None:
    """Refuse a time zone that does not exist."""
    try:
        ZoneInfo(name)
    except (KeyError, ValueError, OSError):
        raise ValidationError(f"'{name}' is not a time zone; write it like Europe/Zurich.") from None


def default_shifts() -> list[str]:
    """Handover times of a unit that has not set its own."""
    return ["07:00", "19:00"]


class UnitQuerySet(models.QuerySet["Unit"]):
    """Units, seen by somebody."""

    def visible_to(self, user: User | AnonymousUser, role: Role = Role.READER) -> Self:
        """Units in which the user has at least this role."""
        if not user.is_authenticated:
            return self.none()
        if user.is_superuser:
            return self
        return self.filter(memberships__user=user, memberships__role__gte=role)


class Unit(models.Model):
    """One intensive-care unit, with what it chose."""

    name = models.CharField(max_length=80, unique=True)
    slug = models.SlugField(max_length=80, unique=True)
    time_zone = models.CharField(max_length=64, default="UTC", validators=[check_time_zone])
    shift_starts = models.JSONField(default=default_shifts)
    units = models.JSONField(default=dict, blank=True)  # quantity name -> UCUM code shown
    decimal_comma = models.BooleanField(default=False)
    paper = models.CharField(max_length=12, choices=[("a4", "A4"), ("us-letter", "Letter")], default="a4")
    constants = models.JSONField(default=dict, blank=True)  # fields of oxygen.constants.Constants that differ
    carry = models.JSONField(default=dict, blank=True)  # fields of CarryLimits that differ [h]
    uncertainties = models.JSONField(default=dict, blank=True)  # quantity or method -> standard uncertainty
    second_factor = models.BooleanField("Members need a second factor", default=False)

    objects = UnitQuerySet.as_manager()

    def __str__(self) -> str:
        return self.name

    @property
    def zone(self) -> ZoneInfo:
        """The unit's time zone."""
        return ZoneInfo(self.time_zone)

    def constants_in_force(self) -> Constants:
        """The defaults with what the unit chose."""
        chosen: dict[str, Any] = dict(self.constants)
        return replace(Constants(**chosen), carry=replace(CarryLimits(), **self.carry))

    def uncertainties_in_force(self) -> Uncertainties:
        """The default standard uncertainties with what the unit chose: ``{"hb": [0.0, 0.03], …}``."""
        default = Uncertainties()
        chosen = {name: (float(pair[0]), float(pair[1])) for name, pair in self.uncertainties.items()}
        return replace(default, quantities={**default.quantities, **chosen}) if chosen else default


class Bed(models.Model):
    """A bed of a unit, in the order of the round."""

    unit = models.ForeignKey(Unit, on_delete=models.CASCADE, related_name="beds")
    name = models.CharField(max_length=20)
    position = models.PositiveSmallIntegerField(default=0)

    class Meta:
        ordering = ["position", "id"]
        constraints = [models.UniqueConstraint(fields=["unit", "name"], name="bed_name_once_in_a_unit")]

    def __str__(self) -> str:
        return f"{self.unit}, bed {self.name}"


class Patient(models.Model):
    """A person under care, known by an identifier of a system that issues it, never by name alone."""

    system = models.CharField(max_length=120, blank=True)  # who issues the identifier
    identifier = models.CharField(max_length=64)
    name = models.CharField(max_length=120, blank=True)
    birth_date = models.DateField(null=True, blank=True)

    class Meta:
        constraints = [models.UniqueConstraint(fields=["system", "identifier"], name="one_patient_per_identifier")]

    def __str__(self) -> str:
        return self.identifier


class StayQuerySet(models.QuerySet["Stay"]):
    """Stays, seen by somebody."""

    def visible_to(self, user: User | AnonymousUser, role: Role = Role.READER) -> Self:
        """Stays of units in which the user has at least this role."""
        if not user.is_authenticated:
            return self.none()
        if user.is_superuser:
            return self
        return self.filter(unit__memberships__user=user, unit__memberships__role__gte=role)

    def present(self) -> Self:
        """Stays that have not ended."""
        return self.filter(discharged_at__isnull=True)

    def in_bed_order(self) -> Self:
        """In the order of the round."""
        return self.select_related("bed", "patient").order_by("bed__position", "bed__id", "id")


class Stay(models.Model):
    """One patient's time in a unit."""

    reference = models.CharField(max_length=64)  # what people and files call it, unique in the unit
    unit = models.ForeignKey(Unit, on_delete=models.PROTECT, related_name="stays")
    patient = models.ForeignKey(Patient, on_delete=models.PROTECT, related_name="stays")
    bed = models.ForeignKey(Bed, null=True, blank=True, on_delete=models.SET_NULL, related_name="stays")
    admitted_at = models.DateTimeField(null=True, blank=True)
    discharged_at = models.DateTimeField(null=True, blank=True)
    height = models.FloatField(null=True, blank=True)  # cm
    weight = models.FloatField(null=True, blank=True)  # kg
    age = models.FloatField(null=True, blank=True)  # years
    note = models.TextField(blank=True)

    objects = StayQuerySet.as_manager()

    class Meta:
        constraints = [models.UniqueConstraint(fields=["unit", "reference"], name="stay_reference_once_in_a_unit")]

    def __str__(self) -> str:
        return self.reference
