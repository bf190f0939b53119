"""The switch between light and dark: kept with the account, never in the browser's storage."""

from __future__ import annotations

from django.http import HttpRequest, HttpResponse
from django.shortcuts import redirect
from django.utils.http import url_has_allowed_host_and_scheme
from django.views.decorators.http import require_POST

from worksheet.ward.access import person


@require_POST
def set_theme(request: HttpRequest) -> HttpResponse:
    """Keep the theme that was chosen; without the page's script each press gives the other one."""
    user = person(request)
    other = "light" if user.preferences.get("theme") == "dark" else "dark"
    chosen = request.POST.get("theme", other)
    if chosen in ("light", "dark"):
        user.preferences = {**user.preferences, "theme": chosen}
        user.save(update_fields=["preferences"])
    if request.headers.get("HX-Request"):
        return HttpResponse(status=204)
    target = request.POST.get("next", "")
    safe = url_has_allowed_host_and_scheme(
        target, allowed_hosts={request.get_host()}, require_https=request.is_secure()
    )
    return redirect(target if safe else "home")
