"""From a payload to a PDF: cleans every text, then has it typeset."""

from __future__ import annotations

import json
import logging
import subprocess
import sys
from pathlib import Path
from typing import Any

from django.conf import settings

from .glyphs import printable

TEMPLATES = Path(settings.BASE_DIR) / "templates" / "report"
_TYPESET = Path(__file__).resolve().parent / "typeset.py"
_LONGEST = 120  # seconds: two thousand entries take a few

log = logging.getLogger(__name__)


class NotPrinted(Exception):
    """The document could not be set; the message says why."""


def cleaned(part: Any) -> Any:
    """The payload with every text made printable."""
    if isinstance(part, str):
        return printable(part)
    if isinstance(part, dict):
        return {key: cleaned(value) for key, value in part.items()}
    if isinstance(part, list | tuple):
        return [cleaned(item) for item in part]
    return part


def pdf_of(template: str, payload: dict[str, Any], at: int) -> bytes:
    """Set a document. ``at`` is its date [s since the epoch]: same payload, same date, same bytes."""
    order = {
        "template": str(TEMPLATES / template),
        "payload": json.dumps(
            cleaned(payload) | {"keywords": payload["keywords"]}, ensure_ascii=False, allow_nan=False
        ),
        "timestamp": at,
    }
    try:
        done = subprocess.run(  # noqa: S603  our own interpreter and script; user text goes in as data
            [sys.executable, "-I", str(_TYPESET)],
            input=json.dumps(order).encode(),
            capture_output=True,
            timeout=_LONGEST,
            check=False,
        )
    except subprocess.TimeoutExpired:
        raise NotPrinted(f"The document took longer than {_LONGEST} s to set; choose a shorter span.") from None
    told = done.stderr.decode(errors="replace").strip()
    if done.returncode != 0:
        log.error("typesetting failed: %s", told)
        raise NotPrinted("The document could not be set; the server's log says why.")
    if told:
        log.warning("typesetting: %s", told)
    return done.stdout
