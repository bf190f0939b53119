"""Structured log lines that hold nothing of a patient."""

from __future__ import annotations

import json
import logging
import re
from datetime import UTC, datetime

_STAY = re.compile(r"(/stay/)[^/?\s]+")
_TOKEN = re.compile(r"(/(?:invitation|password)/)[^?\s]+")
_QUERY = re.compile(r"\?\S*")


class JsonLines(logging.Formatter):
    """One JSON object a line: time, level, logger, message without references, and where an exception was raised.

    The text of an exception is left out, since it may quote what somebody typed; its kind and place are enough to find
    the fault.
    """

    def format(self, record: logging.LogRecord) -> str:
        """The line."""
        line: dict[str, object] = {
            "at": datetime.fromtimestamp(record.created, UTC).isoformat(timespec="milliseconds"),
            "level": record.levelname.lower(),
            "from": record.name,
            "says": cleaned(record.getMessage()),
        }
        status = getattr(record, "status_code", None)
        if status is not None:
            line["status"] = status
        if record.exc_info and record.exc_info[0] is not None:
            line["exception"] = record.exc_info[0].__name__
            line["where"] = _place(record.exc_info[2])
        return json.dumps(line)  # ASCII: no letter of a client can end or colour a line


def cleaned(text: str) -> str:
    """The text without references to stays, tokens and queries, and on one line."""
    for pattern, kept in ((_STAY, r"\1…"), (_TOKEN, r"\1…"), (_QUERY, "")):
        text = pattern.sub(kept, text)
    return text.replace("\n", " ").replace("\r", " ")


def _place(trace: object) -> list[str]:
    places = []
    while trace is not None:
        code = trace.tb_frame.f_code  # type: ignore[attr-defined]
        places.append(f"{code.co_filename.rpartition('/')[2]}:{trace.tb_lineno} {code.co_name}")  # type: ignore[attr-defined]
        trace = trace.tb_next  # type: ignore[attr-defined]
    return places[-6:]
