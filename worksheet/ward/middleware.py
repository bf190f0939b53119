"""What every answer carries: the content policy and the rule that patient pages are not stored."""

from collections.abc import Callable

from django.http import HttpRequest, HttpResponse

# The hash is that of the empty style element that Plotly fills by script.
CONTENT_POLICY = "; ".join(
    [
        "default-src 'self'",
        "script-src 'self'",
        "style-src 'self' 'sha256-47DEQpj8HBSa+/TImW+5JCeuQeRkm5NMpJWZG3hSuFU='",
        "style-src-attr 'none'",
        "img-src 'self' data: blob:",
        "object-src 'none'",
        "base-uri 'none'",
        "frame-ancestors 'none'",
        "form-action 'self'",
    ]
)


def content_policy(get_response: Callable[[HttpRequest], HttpResponse]) -> Callable[[HttpRequest], HttpResponse]:
    """Middleware that sets the content policy, and ``no-store`` unless the view chose otherwise."""

    def middleware(request: HttpRequest) -> HttpResponse:
        response = get_response(request)
        response.headers.setdefault("Content-Security-Policy", CONTENT_POLICY)
        response.headers.setdefault("Cache-Control", "no-store")
        return response

    return middleware
