"""People and what they may do, unit by unit."""

from __future__ import annotations

from django.contrib.auth.models import AbstractUser
from django.db import models


class User(AbstractUser):
    """A person with a login. ``is_superuser`` marks an administrator, who manages units and accounts."""

    preferences = models.JSONField(default=dict, blank=True)  # units per quantity, theme, decimal comma, time zone
    wrong_logins = models.PositiveIntegerField(default=0)  # in a row; a right one sets it back


class Role(models.IntegerChoices):
    """What a member of a unit may do; each role includes the ones below it."""

    READER = 1, "reader"
    RECORDER = 2, "recorder"
    LEAD = 3, "unit lead"


class Membership(models.Model):
    """A person's role in one unit."""

    user = models.ForeignKey(User, on_delete=models.CASCADE, related_name="memberships")
    unit = models.ForeignKey("ward.Unit", on_delete=models.CASCADE, related_name="memberships")
    role = models.PositiveSmallIntegerField(choices=Role.choices, default=Role.READER)

    class Meta:
        constraints = [models.UniqueConstraint(fields=["user", "unit"], name="one_role_per_unit")]

    def __str__(self) -> str:
        return f"{self.user} in {self.unit}: {self.get_role_display()}"
