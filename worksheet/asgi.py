"""ASGI entry point, for hosts that offer nothing else; `serve` uses WSGI."""

import os

from django.core.asgi import get_asgi_application

os.environ.setdefault("DJANGO_SETTINGS_MODULE", "worksheet.settings")
application = get_asgi_application()
