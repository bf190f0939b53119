"""What waits in this room: mappings people confirmed, uploads, raw messages, rows without a place."""

from __future__ import annotations

from typing import TYPE_CHECKING, Self

from django.conf import settings
from django.db import models

from worksheet.ward.display import Display
from worksheet.ward.models import Role, Unit

if TYPE_CHECKING:
    from django.contrib.auth.models import AnonymousUser

    from worksheet.ward.models import User


class UnitScopedQuerySet(models.QuerySet):  # type: ignore[type-arg]
    """Things of a unit, seen by somebody."""

    def visible_to(self, user: User | AnonymousUser, role: Role = Role.RECORDER) -> Self:
        """Things of units in which the user has at least this role."""
        if not user.is_authenticated:
            return self.none()
        if user.is_superuser:
            return self
        return self.filter(unit__memberships__user=user, unit__memberships__role__gte=role)


class ColumnMapping(models.Model):
    """How a unit reads the columns of one kind of table, as somebody confirmed it."""

    unit = models.ForeignKey(Unit, on_delete=models.CASCADE, related_name="column_mappings")
    name = models.CharField(max_length=80)
    headers = models.CharField(max_length=64, db_index=True)  # digest of the header row it belongs to
    plan = models.JSONField(default=dict)
    zone = models.CharField(max_length=64, blank=True)
    created_by = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.PROTECT, related_name="+")
    updated_at = models.DateTimeField(auto_now=True)

    objects = UnitScopedQuerySet.as_manager()

    class Meta:
        constraints = [models.UniqueConstraint(fields=["unit", "headers"], name="one_mapping_per_header_row")]

    def __str__(self) -> str:
        return self.name


class UploadState(models.TextChoices):
    """Where an upload stands."""

    RECEIVED = "received", "received"
    READING = "reading", "being read"
    READY = "ready", "waits for confirmation"
    STORING = "storing", "being stored"
    STORED = "stored", "stored"
    REFUSED = "refused", "refused"
    DISCARDED = "discarded", "discarded"


class Upload(models.Model):
    """A file somebody sent, from its arrival to its confirmation. The content goes once it is stored or discarded."""

    unit = models.ForeignKey(Unit, on_delete=models.CASCADE, related_name="uploads")
    user = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.PROTECT, related_name="+")
    name = models.CharField(max_length=160)
    format = models.CharField(max_length=8)
    content = models.BinaryField(null=True)
    digest = models.CharField(max_length=64)
    options = models.JSONField(default=dict)
    state = models.CharField(max_length=12, choices=UploadState.choices, default=UploadState.RECEIVED)
    done = models.PositiveIntegerField(default=0)
    total = models.PositiveIntegerField(default=0)
    message = models.TextField(blank=True)
    report = models.JSONField(default=dict)
    details = models.BinaryField(null=True)  # every row with its fate, compressed
    created_at = models.DateTimeField(auto_now_add=True)
    touched_at = models.DateTimeField(auto_now=True)

    objects = UnitScopedQuerySet.as_manager()

    class Meta:
        ordering = ["-id"]

    def __str__(self) -> str:
        return f"{self.name} ({self.get_state_display()})"

    def unit_display(self) -> Display:
        """How numbers and times are shown to the person who sent the file."""
        return Display.of(self.user, self.unit)


class MessageState(models.TextChoices):
    """What became of a message."""

    RECEIVED = "received", "received"
    STORED = "stored", "stored"
    DEAD = "dead", "not stored"
    DISMISSED = "dismissed", "looked at and closed"


class RawMessage(models.Model):
    """A message as it came in, kept before anything else is done with it."""

    unit = models.ForeignKey(Unit, null=True, blank=True, on_delete=models.PROTECT, related_name="raw_messages")
    sender = models.CharField(max_length=160)
    control_id = models.CharField(max_length=80)
    digest = models.CharField(max_length=64)
    content = models.BinaryField()
    received_at = models.DateTimeField(auto_now_add=True)
    state = models.CharField(max_length=10, choices=MessageState.choices, default=MessageState.RECEIVED)
    reason = models.TextField(blank=True)
    attempts = models.PositiveSmallIntegerField(default=0)
    report = models.JSONField(default=dict)

    objects = UnitScopedQuerySet.as_manager()

    class Meta:
        ordering = ["-id"]
        constraints = [
            models.UniqueConstraint(fields=["sender", "control_id", "digest"], name="one_message_per_sender_and_id")
        ]
        indexes = [models.Index(fields=["unit", "state"], name="message_unit_state")]

    def __str__(self) -> str:
        return f"{self.sender} {self.control_id} ({self.get_state_display()})"


class QueuedRow(models.Model):
    """A row that could not be stored: unmatched, conflicting, invalid or not understood. It waits for a person."""

    unit = models.ForeignKey(Unit, on_delete=models.CASCADE, related_name="queued_rows")
    source = models.CharField(max_length=160)
    place = models.CharField(max_length=120)
    fate = models.CharField(max_length=16)
    reason = models.TextField()
    patient = models.CharField(max_length=64, blank=True)
    system = models.CharField(max_length=120, blank=True)
    time = models.DateTimeField(null=True, blank=True)
    data = models.JSONField(default=dict)
    digest = models.CharField(max_length=64)
    queued_at = models.DateTimeField(auto_now_add=True)
    closed_at = models.DateTimeField(null=True, blank=True)
    closed_by = models.ForeignKey(
        settings.AUTH_USER_MODEL, null=True, blank=True, on_delete=models.PROTECT, related_name="+"
    )
    closed_how = models.CharField(max_length=200, blank=True)

    objects = UnitScopedQuerySet.as_manager()

    class Meta:
        ordering = ["id"]
        constraints = [models.UniqueConstraint(fields=["unit", "digest"], name="a_row_waits_once")]
        indexes = [models.Index(fields=["unit", "closed_at"], name="queue_unit_closed")]

    def __str__(self) -> str:
        return f"{self.source}, {self.place}: {self.reason}"
