"""Texts that stand in a CSV file without becoming a formula when a spreadsheet opens it."""

from __future__ import annotations

_FORMULA = ("=", "+", "-", "@", "\t", "\r", "|", "%")


def safe(text: str) -> str:
    """A text that no spreadsheet runs as a formula; the apostrophe is taken off again on import."""
    flat = " ".join(text.split())
    return f"'{flat}" if flat.startswith(_FORMULA) or (flat.startswith("'") and flat[1:2] in _FORMULA) else flat


def unsafe(text: str) -> str:
    """The text that :func:`safe` was given."""
    return text[1:] if text.startswith("'") and text[1:].startswith((*_FORMULA, "'")) else text
