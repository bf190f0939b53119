"""Texts as they are posted: what cannot be stored or seen is taken out, everything else stays as it was typed."""

from __future__ import annotations

from collections.abc import Mapping

_UNSEEN = {code: None for code in (*range(32), 127) if chr(code) not in "\t\n"}


def plain(text: str) -> str:
    """The text without control characters (a data base refuses some, nobody can read any); line ends are one."""
    return text.replace("\r\n", "\n").replace("\r", "\n").translate(_UNSEEN)


def posted(fields: Mapping[str, str]) -> dict[str, str]:
    """The last text of every field that was sent."""
    return {plain(name): plain(fields[name]) for name in fields}
