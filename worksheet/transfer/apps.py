"""Django application of this room."""

from django.apps import AppConfig


class TransferConfig(AppConfig):
    """Registers worksheet.transfer."""

    default_auto_field = "django.db.models.BigAutoField"
    name = "worksheet.transfer"

    def ready(self) -> None:
        """Delete with the patient what waits here."""
        from . import forget  # noqa: F401
