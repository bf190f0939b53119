"""Messages as they came in: those that could not be stored can be looked at, tried again, or closed."""

from __future__ import annotations

from django.contrib import messages
from django.core.paginator import Paginator
from django.db.models import Q, QuerySet
from django.http import Http404, HttpRequest, HttpResponse
from django.shortcuts import redirect, render
from django.views.decorators.http import require_GET, require_POST

from worksheet.ward import audit
from worksheet.ward.access import person, unit_or_404
from worksheet.ward.display import Display
from worksheet.ward.models import Role, Unit, User

from .models import MessageState, RawMessage
from .receive import process
from .routes import Route

PAGE = 50


def _messages(user: User, unit: Unit) -> QuerySet[RawMessage]:
    """Messages of the unit; an administrator also sees those that no unit was mapped for."""
    mine = Q(unit=unit) | Q(unit=None) if user.is_superuser else Q(unit=unit)
    return RawMessage.objects.filter(mine).defer("content")


@require_GET
def letters(request: HttpRequest, slug: str) -> HttpResponse:
    """Dead letters first; all messages on demand."""
    unit = unit_or_404(request, slug, Role.LEAD)
    everything = request.GET.get("all") == "1"
    found = _messages(person(request), unit)
    if not everything:
        found = found.filter(state__in=[MessageState.DEAD, MessageState.RECEIVED])
    page = Paginator(found, PAGE).get_page(request.GET.get("page"))
    display = Display.of(person(request), unit)
    shown = [{"message": m, "time": display.stamp(m.received_at)} for m in page]
    return render(
        request, "transfer/letters.html", {"unit": unit, "page": page, "shown": shown, "everything": everything}
    )


def _one(request: HttpRequest, slug: str, pk: int) -> tuple[Unit, RawMessage]:
    unit = unit_or_404(request, slug, Role.LEAD)
    found = _messages(person(request), unit).filter(pk=pk).first()
    if found is None:
        raise Http404("No such message in this unit.")
    return unit, found


@require_GET
def letter(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """One message with its text and what became of it."""
    unit, found = _one(request, slug, pk)
    text = bytes(found.content).decode("utf-8", "replace").replace("\r", "\n")
    context = {
        "unit": unit,
        "message": found,
        "text": text[:20_000],
        "time": Display.of(person(request), unit).stamp(found.received_at),
    }
    return render(request, "transfer/letter.html", context)


@require_POST
def replay(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """Try a dead letter again in this unit; what it stored before is not stored twice."""
    unit, found = _one(request, slug, pk)
    answer = process(found, Route(unit, unit.zone), person(request))
    audit.write(
        person(request).username, "replayed message", unit=unit.name, subject=found.control_id[:120], answer=answer.code
    )
    if answer.code == "AA":
        messages.success(request, f"Message {found.control_id} is stored.")
    else:
        messages.error(request, f"Message {found.control_id} is still not stored: {answer.reason}.")
    return redirect("transfer_letter", slug=slug, pk=pk)


@require_POST
def dismiss(request: HttpRequest, slug: str, pk: int) -> HttpResponse:
    """Close a dead letter; it stays readable."""
    unit, found = _one(request, slug, pk)
    if found.state == MessageState.DEAD:
        RawMessage.objects.filter(pk=found.pk).update(state=MessageState.DISMISSED)
        audit.write(person(request).username, "closed message", unit=unit.name, subject=found.control_id[:120])
    return redirect("transfer_letters", slug=slug)
