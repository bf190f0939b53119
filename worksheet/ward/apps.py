"""Django application of this room."""

from django.apps import AppConfig


class WardConfig(AppConfig):
    """Registers worksheet.ward."""

    default_auto_field = "django.db.models.BigAutoField"
    name = "worksheet.ward"

    def ready(self) -> None:
        """Listen to logins."""
        from . import logins  # noqa: F401
