"""Pages for what went wrong, in words."""

from __future__ import annotations

import logging
import secrets
import sys

from django.db import InterfaceError, OperationalError
from django.http import HttpRequest, HttpResponse
from django.shortcuts import render
from django.template.loader import render_to_string

log = logging.getLogger(__name__)


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
    """500, or 503 where the database could not take or give anything: no detail of any patient.

    The page is made without the request: who is logged in could only be asked of the database that just failed.
    """
    if isinstance(sys.exc_info()[1], (OperationalError, InterfaceError)):
        words = (
            "The database does not answer, or its disk is full. Nothing of this request was stored; what was stored "
            "before is untouched. Go back: what you typed is still in the form. Tell whoever runs this program."
        )
        return _bare("Not possible just now", words, 503)
    words = (
        "The program failed here. Nothing of this request was stored; what was stored before is untouched. Try again."
    )
    number = secrets.token_hex(4)
    log.error("failure %s", number, exc_info=True)
    return _bare(
        "Something failed", f"{words} If it fails again, tell whoever runs this program: failure {number}.", 500
    )


def _bare(title: str, words: str, status: int) -> HttpResponse:
    return HttpResponse(render_to_string("error.html", {"title": title, "words": words}), status=status)
