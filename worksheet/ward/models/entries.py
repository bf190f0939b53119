"""Entries: everything measured on one sample, or read at the bedside, at one time. Never changed, never deleted."""

from __future__ import annotations

from typing import TYPE_CHECKING, Self

from django.conf import settings
from django.db import models

from worksheet.oxygen.readings import Device, Event, FlowMethod, Site

from .accounts import Role
from .places import Stay

if TYPE_CHECKING:
    from django.contrib.auth.models import AnonymousUser

    from .accounts import User


def _choices(codes: type[Site] | type[Device] | type[FlowMethod] | type[Event]) -> list[tuple[int, str]]:
    return [(code.value, code.name.lower().replace("_", " ")) for code in codes]


class EntryQuerySet(models.QuerySet["Entry"]):
    """Entries, seen by somebody."""

    def visible_to(self, user: User | AnonymousUser, role: Role = Role.READER) -> Self:
        """Entries of units in which the user has at least this role: the only way to entries from a view."""
        if not user.is_authenticated:
            return self.none()
        if user.is_superuser:
            return self
        return self.filter(stay__unit__memberships__user=user, stay__unit__memberships__role__gte=role)

    def current(self) -> Self:
        """Entries that nobody corrected and nobody struck out."""
        # Not a join: over a long history SQLite would build an index for it at every call (measured: 7 times slower).
        return self.filter(~models.Exists(Entry.objects.filter(replaces=models.OuterRef("pk"))), struck=False)


class Entry(models.Model):
    """One sample or bedside reading. A correction is a new entry that names the one it replaces, and why.

    A struck-out entry is replaced by one with ``struck`` set and no values. Value columns hold canonical units of
    the catalogue (one column for each measured quantity); ``typed`` keeps what was typed or received:
    ``{quantity: {"text": "12,4", "unit": "kPa", "comparator": ">"}}``.
    """

    stay = models.ForeignKey(Stay, on_delete=models.PROTECT, related_name="entries")
    time = models.DateTimeField()
    site = models.PositiveSmallIntegerField(choices=_choices(Site), default=Site.NONE)
    device = models.PositiveSmallIntegerField(choices=_choices(Device), default=Device.UNKNOWN)
    flow_method = models.PositiveSmallIntegerField(choices=_choices(FlowMethod), default=FlowMethod.UNKNOWN)
    event = models.PositiveSmallIntegerField(choices=_choices(Event), default=Event.NONE)
    event_amount = models.FloatField(null=True, blank=True)  # red-cell units, or mL lost
    sample = models.CharField(max_length=64, blank=True)  # the sample's own number

    ph = models.FloatField(null=True, blank=True)
    pco2 = models.FloatField(null=True, blank=True)
    po2 = models.FloatField(null=True, blank=True)
    hb = models.FloatField(null=True, blank=True)
    so2 = models.FloatField(null=True, blank=True)
    so2_calculated = models.FloatField(null=True, blank=True)
    o2hb = models.FloatField(null=True, blank=True)
    cohb = models.FloatField(null=True, blank=True)
    methb = models.FloatField(null=True, blank=True)
    sulfhb = models.FloatField(null=True, blank=True)
    lactate = models.FloatField(null=True, blank=True)
    bicarbonate = models.FloatField(null=True, blank=True)
    spo2 = models.FloatField(null=True, blank=True)
    fio2 = models.FloatField(null=True, blank=True)
    oxygen_flow = models.FloatField(null=True, blank=True)
    peep = models.FloatField(null=True, blank=True)
    mean_airway_pressure = models.FloatField(null=True, blank=True)
    respiratory_rate = models.FloatField(null=True, blank=True)
    cardiac_output = models.FloatField(null=True, blank=True)
    cardiac_index = models.FloatField(null=True, blank=True)
    vo2_measured = models.FloatField(null=True, blank=True)
    heart_rate = models.FloatField(null=True, blank=True)
    mean_arterial_pressure = models.FloatField(null=True, blank=True)
    temperature = models.FloatField(null=True, blank=True)
    height = models.FloatField(null=True, blank=True)
    weight = models.FloatField(null=True, blank=True)
    age = models.FloatField(null=True, blank=True)
    barometric_pressure = models.FloatField(null=True, blank=True)
    typed = models.JSONField(default=dict, blank=True)
    note = models.TextField(blank=True)

    key = models.CharField(max_length=80, unique=True)  # sending the same form or message again stores nothing twice
    source = models.CharField(max_length=20, default="form")  # form, csv, xlsx, fhir, hl7v2, demo
    recorded_by = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.PROTECT, related_name="+")
    recorded_at = models.DateTimeField(auto_now_add=True)
    replaces = models.OneToOneField(
        "self", null=True, blank=True, on_delete=models.PROTECT, related_name="replaced_by"
    )  # one to one: of two people who correct the same entry at once, one is told
    reason = models.TextField(blank=True)
    struck = models.BooleanField(default=False)

    objects = EntryQuerySet.as_manager()

    class Meta:
        indexes = [models.Index(fields=["stay", "time"], name="entry_stay_time")]
        constraints = [
            models.CheckConstraint(
                condition=models.Q(replaces__isnull=True) | ~models.Q(reason=""), name="correction_has_a_reason"
            ),
            models.CheckConstraint(
                condition=models.Q(struck=False) | models.Q(replaces__isnull=False), name="strike_out_names_its_entry"
            ),
        ]

    def __str__(self) -> str:
        return f"{self.stay} {self.time:%Y-%m-%d %H:%M} {self.get_site_display()}"


class ReviewMark(models.Model):
    """Somebody looked at a stay and said so."""

    stay = models.ForeignKey(Stay, on_delete=models.PROTECT, related_name="review_marks")
    user = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.PROTECT, related_name="+")
    at = models.DateTimeField()

    class Meta:
        indexes = [models.Index(fields=["stay", "at"], name="review_stay_at")]

    def __str__(self) -> str:
        return f"{self.stay} reviewed {self.at:%Y-%m-%d %H:%M} by {self.user}"


class Draft(models.Model):
    """What somebody typed on a form and has not sent yet: survives a lost connection, session or tab."""

    user = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.CASCADE, related_name="drafts")
    stay = models.ForeignKey(Stay, on_delete=models.CASCADE, related_name="drafts")
    form = models.CharField(max_length=40, default="entry")  # entry, event, correct-<id>
    data = models.JSONField(default=dict)
    updated_at = models.DateTimeField(auto_now=True)

    class Meta:
        constraints = [models.UniqueConstraint(fields=["user", "stay", "form"], name="one_draft_per_form")]

    def __str__(self) -> str:
        return f"draft of {self.user} for {self.stay}"
