"""Text that the shipped fonts can print. A missing glyph would fail the whole document, so it is spelled out instead.

``fonts/coverage.txt`` lists what each font holds; a test holds it to the fonts themselves.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterator
from functools import lru_cache
from pathlib import Path

_COVERAGE = Path(__file__).resolve().parent / "fonts" / "coverage.txt"
_DROPPED = re.compile("[\u0000-\u0008\u000b-\u001f\u007f-\u009f\u200e\u200f\u202a-\u202e\u2066-\u2069\ufeff\u00ad]")
_RUN = re.compile(r"\S{48}(?=\S)")
_IGNORABLE = frozenset([0x200C, 0x200D, *range(0xFE00, 0xFE10)])  # joiners and variation selectors draw nothing


@lru_cache(maxsize=1)
def coverage() -> tuple[frozenset[int], ...]:
    """What each font of the fallback order can draw."""
    return tuple(
        frozenset(code for span in line.split()[1:] for code in _span(span))
        for line in _COVERAGE.read_text().splitlines()
        if line and not line.startswith("#")
    )


def _span(text: str) -> range:
    first, _, last = text.partition("-")
    return range(int(first, 16), int(last or first, 16) + 1)


def printable(text: str) -> str:
    """The text with line ends unified, invisible controls dropped and characters without a glyph spelled as [U+…].

    A very long run without a space gets invisible places to break, so that nothing leaves the page.
    """
    if text.isascii() and text.isprintable() and len(text) < 48:
        return text
    text = unicodedata.normalize("NFC", text).replace("\r\n", "\n").replace("\r", "\n").expandtabs(4)
    text = _DROPPED.sub("", text)
    if not text.isascii():
        text = "".join(_drawn(cluster) for cluster in _clusters(text))
    return _RUN.sub(lambda run: run.group() + "\u200b", text)


def _clusters(text: str) -> Iterator[str]:
    """A character with the marks and joiners that are drawn upon it: one font has to hold all of it."""
    start, joined = 0, False
    for i, char in enumerate(text):
        extends = unicodedata.category(char) in ("Mn", "Me", "Mc") or ord(char) in _IGNORABLE
        extends = extends or 0x1F3FB <= ord(char) <= 0x1F3FF  # skin tones
        if i > start and not extends and not joined:
            yield text[start:i]
            start = i
        joined = ord(char) == 0x200D
    if start < len(text):
        yield text[start:]


@lru_cache(maxsize=4096)
def _drawn(cluster: str) -> str:
    codes = {ord(char) for char in cluster if char not in "\n"} - _IGNORABLE
    if any(codes <= font for font in coverage()):
        return cluster
    return "".join(_alone(char) for char in cluster)


def _alone(char: str) -> str:
    if unicodedata.combining(char) or ord(char) in _IGNORABLE or not any(ord(char) in font for font in coverage()):
        return f"[U+{ord(char):04X}]"
    return char
