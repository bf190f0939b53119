"""The audit trail: each event carries the hash of the one before it."""

from __future__ import annotations

from django.db import models


class AuditEvent(models.Model):
    """Who did what to what, when. Written only through ``worksheet.ward.audit.write``; never changed."""

    at = models.DateTimeField()
    actor = models.CharField(max_length=150)  # user name, or the command that acted
    unit = models.CharField(max_length=80, blank=True)
    subject = models.CharField(max_length=120, blank=True)  # stay reference, user name, file
    action = models.CharField(max_length=40)
    detail = models.JSONField(default=dict)
    salt = models.CharField(max_length=32, blank=True, default="")  # empty once the content was erased on lawful order
    content_hash = models.CharField(max_length=64, blank=True, default="")  # of salt, subject and detail
    previous_hash = models.CharField(max_length=64, blank=True)
    hash = models.CharField(max_length=64)

    class Meta:
        ordering = ["id"]

    def __str__(self) -> str:
        return f"{self.at:%Y-%m-%d %H:%M} {self.actor} {self.action} {self.subject}"
