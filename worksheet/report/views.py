"""The PDFs as pages give them."""

from __future__ import annotations

from collections.abc import Callable
from datetime import datetime

from django.http import HttpRequest, HttpResponse
from django.utils import timezone
from django.utils.text import slugify
from django.views.decorators.http import require_GET

from worksheet.review.window import window_of
from worksheet.ward import access
from worksheet.ward.display import Display

from .order import Order
from .printing import NotPrinted
from .timeline import timeline_pdf
from .unit import unit_pdf


@require_GET
def timeline(request: HttpRequest, slug: str, ref: str) -> HttpResponse:
    """The timeline of one stay: all of it, or the review window that the address names."""
    unit = access.unit_or_404(request, slug)
    stay = access.stay_or_404(request, unit, ref)
    user = access.person(request)
    now = timezone.now()
    since: datetime | None = None
    until: datetime | None = None
    if request.GET.get("window"):
        window = window_of(request.GET, unit, user, stay)
        since, until = window.since, window.until
    hidden = request.GET.get("deidentify") == "1"
    order = Order(stay, Display.of(user, unit), now, user.get_username(), since, until, hidden)
    name = "timeline-deidentified" if hidden else f"timeline-{slugify(stay.reference)}"
    return _answer(lambda: timeline_pdf(order), f"{name}.pdf")


def _answer(make: Callable[[], bytes], name: str) -> HttpResponse:
    """The document, or the reason why there is none."""
    try:
        pdf = make()
    except NotPrinted as error:
        return HttpResponse(str(error), status=503, content_type="text/plain; charset=utf-8")
    return HttpResponse(
        pdf, content_type="application/pdf", headers={"Content-Disposition": f'inline; filename="{name}"'}
    )


@require_GET
def unit(request: HttpRequest, slug: str) -> HttpResponse:
    """The unit review on one page, over the window that the address names."""
    found = access.unit_or_404(request, slug)
    user = access.person(request)
    window = window_of(request.GET, found, user)
    told = Display.of(user, found)
    return _answer(lambda: unit_pdf(found, window, told, user.get_username()), f"unit-{found.slug}.pdf")
