"""Sessions in the database, each with its person, so that a person can see and end theirs."""

from __future__ import annotations

from typing import Any

from django.contrib.sessions.backends.db import SessionStore as DBStore


class SessionStore(DBStore):
    """Django's database sessions over our own model."""

    @classmethod
    def get_model_class(cls) -> Any:
        """The model that holds them."""
        from .models import LoginSession

        return LoginSession

    def create_model_instance(self, data: dict[str, Any]) -> Any:
        """The row to store: with the person it belongs to, where somebody is logged in."""
        row: Any = super().create_model_instance(data)
        row.user_id = int(data["_auth_user_id"]) if data.get("_auth_user_id") else None
        row.agent = str(data.get("agent", ""))[:200]
        return row
