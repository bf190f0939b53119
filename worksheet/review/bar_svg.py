"""The small bar of the four steps as an inline SVG: numbers only, colours and hatches by class."""

from __future__ import annotations

from django.utils.safestring import SafeString, mark_safe

from worksheet.charts.bar import LedgerBar

_FRAME = (
    '<svg class="bar" viewBox="0 0 {width:g} {height:g}" preserveAspectRatio="none" aria-hidden="true" '
    'focusable="false"><line class="bar-zero" x1="{zero:g}" x2="{zero:g}" y1="0" y2="{height:g}"/>{pieces}</svg>'
)
_PIECE = (
    '<rect class="fill-{name}" x="{x:g}" y="3" width="{width:g}" height="12"/>'
    '<rect class="hatch" fill="url(#hatch-{name})" x="{x:g}" y="3" width="{width:g}" height="12"/>'
)


def bar_svg(bar: LedgerBar) -> SafeString:
    """Draw a bar. Written here, not in a template: a template would take most of the page's time for its numbers."""
    pieces = "".join(_PIECE.format(name=p.step.name, x=p.x, width=p.width) for p in bar.pieces)
    svg = _FRAME.format(width=bar.width, height=bar.height, zero=bar.zero, pieces=pieces)
    return mark_safe(svg)  # noqa: S308  numbers and the names of the four steps
