"""What somebody typed and has not sent: kept on the server for that person and stay, never in the browser."""

from __future__ import annotations

import json
import re
from collections.abc import Mapping

from django.http import HttpRequest, HttpResponse, JsonResponse
from django.middleware.csrf import get_token
from django.shortcuts import redirect
from django.urls import reverse
from django.utils import timezone
from django.views.decorators.http import require_http_methods, require_safe

from worksheet.ward.access import person
from worksheet.ward.display import Display
from worksheet.ward.models import Draft, Entry, Role, Stay, User

from .people import stay_for
from .texts import plain, posted

LARGEST = 20_000  # characters of one draft
_FORM = re.compile(r"entry|event|correct-\d{1,18}", re.ASCII)
_NOT_KEPT = {"csrfmiddlewaretoken", "form_name", "action"}


@require_safe
def form_token(request: HttpRequest) -> HttpResponse:
    """Who is logged in, and a fresh form token: a form that outlived its session goes on with it."""
    return JsonResponse({"user": person(request).get_username(), "token": get_token(request)})


@require_http_methods(["POST"])
def draft_save(request: HttpRequest, slug: str, ref: str) -> HttpResponse:
    """Keep what is typed; answers with the time on the reader's clock, or with a sentence."""
    user, stay = person(request), stay_for(request, slug, ref, Role.RECORDER)
    name, data = request.POST.get("form_name", ""), _kept(request)
    if not _FORM.fullmatch(name) or len(json.dumps(data)) > LARGEST:
        return _refused(400, "This draft cannot be kept: the form is unknown or the text too long.")
    if request.POST.get("action") == "discard":
        drop(user, stay, name)
        return redirect(_form_address(stay, name))
    if request.POST.get("begun_by", user.get_username()) != user.get_username():
        return _refused(409, f"This form was begun by {request.POST['begun_by']}; you are {user.get_username()}.")
    if Entry.objects.visible_to(user).filter(key=plain(request.POST.get("key", ""))).exists():
        return _refused(409, "This form was already recorded.")
    Draft.objects.update_or_create(user=user, stay=stay, form=name, defaults={"data": data})
    return JsonResponse({"saved": Display.of(user, stay.unit).clock(timezone.now())})


def _kept(request: HttpRequest) -> dict[str, str | list[str]]:
    kept: dict[str, str | list[str]] = {k: v for k, v in posted(request.POST).items() if k not in _NOT_KEPT}
    if "confirm" in kept:
        kept["confirm"] = [plain(token) for token in request.POST.getlist("confirm")]
    return kept


def _refused(status: int, words: str) -> HttpResponse:
    return JsonResponse({"problem": words}, status=status)


def _form_address(stay: Stay, name: str) -> str:
    where = [stay.unit.slug, stay.reference]
    if name.startswith("correct-"):
        return reverse("entry_correct", args=[*where, int(name.removeprefix("correct-"))])
    return reverse("event_new" if name == "event" else "entry_new", args=where)


def find(user: User, stay: Stay, name: str) -> Draft | None:
    """The draft of this person for this form, if there is one."""
    return Draft.objects.filter(user=user, stay=stay, form=name).first()


def drop(user: User, stay: Stay, name: str) -> None:
    """Forget a draft: it was recorded, or its owner started again."""
    Draft.objects.filter(user=user, stay=stay, form=name).delete()


def texts(draft: Draft) -> tuple[Mapping[str, str], list[str]]:
    """The draft's inputs, and the confirmations in it."""
    data = dict(draft.data)
    confirmed = data.pop("confirm", [])
    return {k: str(v) for k, v in data.items()}, [str(c) for c in confirmed] if isinstance(confirmed, list) else []
