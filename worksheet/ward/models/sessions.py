"""Login sessions and invitations."""

from __future__ import annotations

import hashlib
import secrets
from datetime import timedelta

from django.conf import settings
from django.contrib.sessions.base_session import AbstractBaseSession
from django.db import models
from django.utils import timezone

from .accounts import Role
from .places import Unit

INVITATION_DAYS = 3


class LoginSession(AbstractBaseSession):
    """A session that knows whose it is."""

    user = models.ForeignKey(
        settings.AUTH_USER_MODEL, null=True, blank=True, on_delete=models.CASCADE, related_name="login_sessions"
    )
    agent = models.CharField(max_length=200, blank=True)  # what the browser says of itself
    began_at = models.DateTimeField(default=timezone.now)

    @classmethod
    def get_session_store_class(cls) -> type:
        """The store over this model."""
        from worksheet.ward.session_store import SessionStore

        return SessionStore


class Invitation(models.Model):
    """A link that makes one account, or one membership, and then is used up. Only its hash is stored."""

    unit = models.ForeignKey(Unit, on_delete=models.CASCADE, related_name="invitations")
    role = models.PositiveSmallIntegerField(choices=Role.choices)
    token_hash = models.CharField(max_length=64, unique=True)
    invited_by = models.ForeignKey(settings.AUTH_USER_MODEL, on_delete=models.CASCADE, related_name="+")
    expires_at = models.DateTimeField()
    used_at = models.DateTimeField(null=True, blank=True)

    def __str__(self) -> str:
        return f"invitation to {self.unit} as {self.get_role_display()}"

    @classmethod
    def make(cls, unit: Unit, role: Role, by: models.Model) -> tuple[Invitation, str]:
        """A new invitation and its token, which is shown once."""
        token = secrets.token_urlsafe(32)
        made = cls.objects.create(
            unit=unit, role=role, invited_by=by, token_hash=cls.hashed(token),
            expires_at=timezone.now() + timedelta(days=INVITATION_DAYS),
        )  # fmt: skip
        return made, token

    @staticmethod
    def hashed(token: str) -> str:
        """What is stored of a token."""
        return hashlib.sha256(token.encode()).hexdigest()

    @classmethod
    def open_with(cls, token: str) -> Invitation | None:
        """The invitation of a token, if it is still open."""
        return cls.objects.filter(
            token_hash=cls.hashed(token), used_at__isnull=True, expires_at__gt=timezone.now()
        ).first()
