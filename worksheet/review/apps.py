"""Django application of this room."""

from django.apps import AppConfig


class ReviewConfig(AppConfig):
    """Registers worksheet.review."""

    default_auto_field = "django.db.models.BigAutoField"
    name = "worksheet.review"
