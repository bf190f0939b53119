"""How long the login still lasts: asked by the page itself, which never extends it; extended by the person."""

from __future__ import annotations

from django.http import HttpRequest, JsonResponse
from django.views.decorators.http import require_http_methods

from worksheet.ward.access import person
from worksheet.ward.middleware import extend, seconds_left


@require_http_methods(["GET", "HEAD", "POST"])
def session_left(request: HttpRequest) -> JsonResponse:
    """Seconds left and whose login it is; a POST says that the person is still here."""
    if request.method == "POST":
        extend(request)
    return JsonResponse({"seconds": seconds_left(request), "name": person(request).username})
