"""Passwords that are long but easy: patterns and the words of this place, which common-password lists do not hold."""

from __future__ import annotations

import re
from functools import cache
from pathlib import Path
from typing import Any

from django.conf import settings
from django.core.exceptions import ValidationError

_CONTEXT = (
    "worksheet",
    "oxygen",
    "delivery",
    "intensive",
    "password",
    "passwort",
    "hospital",
    "bloodgas",
    "qwertz",
    "qwerty",
)
_RUNS = ("abcdefghijklmnopqrstuvwxyz", "01234567890123456789", "qwertyuiop", "qwertzuiop", "asdfghjkl", "zxcvbnm")


class EasyPatternValidator:
    """Refuses a password of which little is left without repeats, runs and words of this place."""

    def validate(self, password: str, user: Any = None) -> None:
        """Raise where fewer than eight characters of the password are hard to guess."""
        rest = password.casefold()
        for word in _CONTEXT:
            rest = rest.replace(word, "")
        for run in _RUNS:
            for size in range(len(run), 3, -1):
                for start in range(len(run) - size + 1):
                    rest = rest.replace(run[start : start + size], "").replace(run[start : start + size][::-1], "")
        rest = re.sub(r"(.+?)\1+", r"\1", rest)
        if len(rest) < 8:
            raise ValidationError("This password is long but easy to guess: too many repeats, runs or usual words.")

    def get_help_text(self) -> str:
        """What the rule asks."""
        return "Several unrelated words make a good password; repeats and keyboard runs do not count."


@cache
def _site_list(file: str) -> frozenset[str]:
    lines = Path(file).read_text(encoding="utf-8", errors="replace").splitlines()
    return frozenset(line.strip().casefold() for line in lines)


class SiteListValidator:
    """Refuses passwords of the list that the site gave, if it gave one: those known from breaches elsewhere."""

    def validate(self, password: str, user: Any = None) -> None:
        """Raise where the password is in the list."""
        if settings.PASSWORD_LIST and password.strip().casefold() in _site_list(settings.PASSWORD_LIST):
            raise ValidationError("This password is known from a breach; choose another one.")

    def get_help_text(self) -> str:
        """What the rule asks."""
        return "A password that was used elsewhere is a bad one here."
