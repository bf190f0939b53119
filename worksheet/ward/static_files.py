"""Static files as `serve` needs them: collected, hashed and compressed, and not again where nothing changed."""

from __future__ import annotations

from pathlib import Path

from django.conf import settings
from django.core.management import call_command


def collect() -> bool:
    """Collect the static files unless those collected are newer than all sources; whether it was done."""
    manifest = Path(settings.STATIC_ROOT) / "staticfiles.json"
    made = manifest.stat().st_mtime if manifest.exists() else 0.0
    sources = (file for folder in settings.STATICFILES_DIRS for file in Path(folder).rglob("*") if file.is_file())
    if any(file.stat().st_mtime > made for file in sources):
        call_command("collectstatic", verbosity=0, interactive=False)
        return True
    return False
