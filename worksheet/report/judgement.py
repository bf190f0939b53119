"""Verdict and findings of a timeline, in words."""

from __future__ import annotations

from typing import Any

from .order import Order


def verdict_words(order: Order) -> list[str]:
    """The verdict on the span."""
    return []


def findings_table(order: Order) -> dict[str, Any]:
    """Every finding of the span."""
    return {"head": ["Time", "Finding", "What would settle it"], "rows": [], "widths": ["auto", "2", "1"],
            "sides": ["l", "l", "l"], "empty": "No findings in this span."}  # fmt: skip
