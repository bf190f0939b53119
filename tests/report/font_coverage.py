"""What the shipped fonts can draw, read from the fonts: ``python -m tests.report.font_coverage`` renews the list."""

from pathlib import Path

from fontTools.ttLib import TTFont

FONTS = Path(__file__).resolve().parents[2] / "worksheet" / "report" / "fonts"
# In the order of fallback; the cuts of one family must all hold a character for the family to count as holding it.
FAMILIES = {
    "SourceSans3": ["SourceSans3-Regular.ttf", "SourceSans3-It.ttf", "SourceSans3-Semibold.ttf"],
    "DejaVuSans": ["DejaVuSans.ttf"],
    "NotoEmoji": ["NotoEmoji-Regular.ttf"],
}


def coverage_text() -> str:
    """The list as it is stored."""
    lines = ["# What each font can draw, in the order of fallback. Made by tests/report/font_coverage.py."]
    for family, files in FAMILIES.items():
        held = set.intersection(*(set(TTFont(FONTS / name).getBestCmap()) for name in files))
        lines.append(" ".join([family, *_spans(sorted(held))]))
    return "\n".join(lines) + "\n"


def _spans(codes: list[int]) -> list[str]:
    spans, start = [], None
    for i, code in enumerate(codes):
        start = code if start is None else start
        if i + 1 == len(codes) or codes[i + 1] != code + 1:
            spans.append(f"{start:X}" if start == code else f"{start:X}-{code:X}")
            start = None
    return spans


if __name__ == "__main__":
    (FONTS / "coverage.txt").write_text(coverage_text())
