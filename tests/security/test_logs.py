"""Log lines: one JSON object each, UTC, nothing of a patient, no letter that could forge a line."""

import json
import logging
import sys
from datetime import datetime

import pytest

from worksheet.ward.logs import JsonLines


def line(message, *args, exc_info=None):
    record = logging.LogRecord("worksheet", logging.WARNING, __file__, 1, message, args, exc_info)
    return JsonLines().format(record)


def test_a_line_has_when_level_where_and_what_and_a_time_with_offset():
    told = json.loads(line("Not Found: %s", "/u/unit-7/stay/K-2041/?x=Hb7.1"))
    assert set(told) == {"at", "level", "from", "says"}
    assert datetime.fromisoformat(told["at"]).utcoffset().total_seconds() == 0
    assert told["says"] == "Not Found: /u/unit-7/stay/…/"


@pytest.mark.parametrize("evil", ["\r\n", "\x1b[31m", "\u2028", "\u0085", "\x00", '"}\n{"level": "fake"'])
def test_nobody_can_forge_a_line(evil):
    text = line("agent %s", f"before{evil}after")
    assert len(text.splitlines()) == 1
    assert text.isascii()
    assert "\x1b" not in text
    assert json.loads(text)["level"] == "warning"


@pytest.mark.parametrize(
    ("address", "secret"),
    [
        ("/invitation/abcDEF123/", "abcDEF123"),
        ("/password/MQ/cx-0a1b/", "cx-0a1b"),
        ("/u/x/stay/K-1/pdf?since=1", "K-1"),
    ],
)
def test_tokens_and_references_are_left_out(address, secret):
    assert secret not in line("Not Found: %s", address)


def test_an_exception_is_told_by_kind_and_place_without_its_text():
    try:
        raise ValueError("K-2041 haemoglobin 7.1")
    except ValueError:
        text = line("failure 0a1b", exc_info=sys.exc_info())
    told = json.loads(text)
    assert told["exception"] == "ValueError"
    assert told["where"][-1].startswith("test_logs.py:")
    assert "7.1" not in text
