"""Whether the program can do its work: for the service manager and the reverse proxy."""

from __future__ import annotations

from django.contrib.auth.decorators import login_not_required
from django.db import DatabaseError, connection
from django.http import HttpRequest, HttpResponse
from django.views.decorators.http import require_safe


@require_safe
@login_not_required
def health(request: HttpRequest) -> HttpResponse:
    """``ok`` where the database answers, 503 where it does not. Tells nothing else."""
    try:
        with connection.cursor() as cursor:
            cursor.execute("SELECT 1")
    except DatabaseError:
        return HttpResponse("database does not answer", status=503, content_type="text/plain; charset=utf-8")
    return HttpResponse("ok", content_type="text/plain; charset=utf-8")
