"""Django application of this room."""

from django.apps import AppConfig


class ReportConfig(AppConfig):
    """Registers worksheet.report."""

    default_auto_field = "django.db.models.BigAutoField"
    name = "worksheet.report"
