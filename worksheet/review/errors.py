"""Pages for what went wrong, in words."""

from __future__ import annotations

from django.http import HttpRequest, HttpResponse
from django.shortcuts import render


def csrf_failure(request: HttpRequest, reason: str = "") -> HttpResponse:
    """A form whose token is too old: what was typed is still in the browser's form."""
    words = (
        "This form belongs to a login that has ended. Go back: what you typed is still there. "
        "Log in again in another tab, then send it once more."
    )
    return render(request, "error.html", {"title": "Not sent yet", "words": words}, status=403)


def bad_request(request: HttpRequest, exception: Exception) -> HttpResponse:
    """400."""
    return render(
        request, "error.html", {"title": "Not understood", "words": "The request was not understood."}, status=400
    )


def forbidden(request: HttpRequest, exception: Exception) -> HttpResponse:
    """403, with the reason that the view gave."""
    words = str(exception) or "Your role does not allow this."
    return render(request, "error.html", {"title": "Not allowed", "words": words}, status=403)


def not_found(request: HttpRequest, exception: Exception) -> HttpResponse:
    """404: there is no such page, or it is not one of yours; the page does not say which."""
    words = "There is nothing at this address, or it belongs to a unit that is not one of yours."
    return render(request, "error.html", {"title": "Not found", "words": words}, status=404)


def failed(request: HttpRequest) -> HttpResponse:
    """500: no detail of any patient."""
    words = (
        "The program failed here. Nothing of this request was stored; what was stored before is untouched. Try again."
    )
    return render(request, "error.html", {"title": "Something failed", "words": words}, status=500)
