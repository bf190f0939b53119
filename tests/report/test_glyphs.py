"""Any text a person can type prints: what the fonts hold as it is, the rest spelled out; nothing fails the document."""

import json
import random
import subprocess
import unicodedata
from pathlib import Path

import pytest

from tests.report.font_coverage import FONTS, coverage_text
from worksheet.report.glyphs import coverage, printable
from worksheet.report.typeset import compile_document

TEMPLATE = """#set document(title: "t")
#set text(font: ("Source Sans 3", "DejaVu Sans", "Noto Emoji"), lang: "en", size: 7pt)
#let d = json(bytes(sys.inputs.payload))
#for (style, words) in d [#{
  if style == "em" { emph(words) } else if style == "strong" { strong(words) } else { words }
}

]"""


def set_text(tmp_path: Path, *texts: tuple[str, str]) -> bytes:
    template = tmp_path / "t.typ"
    template.write_text(TEMPLATE)
    pdf, warnings = compile_document(str(template), json.dumps(texts), 1_700_000_000)
    assert warnings == []
    return pdf


def text_of(pdf: bytes, pdftotext: str) -> str:
    done = subprocess.run([pdftotext, "-enc", "UTF-8", "-raw", "-", "-"], input=pdf, capture_output=True, check=True)
    return done.stdout.decode()


def test_list_of_glyphs_is_that_of_the_fonts():
    assert (FONTS / "coverage.txt").read_text() == coverage_text(), "run python -m tests.report.font_coverage"


def test_licences_lie_beside_the_fonts():
    for font in FONTS.glob("*.ttf"):
        family = font.stem.split("-")[0]
        licence = next(FONTS.glob(f"{family}.LICENSE*"))
        assert licence.stat().st_size > 1000


@pytest.mark.parametrize("style", ["plain", "em", "strong"])
def test_every_covered_character_prints(tmp_path, style):
    """One by one in one document: none may fail it. Marks are tried upon a base letter."""
    codes = sorted(set().union(*coverage()))
    assert len(codes) > 6000
    kept = [c for c in codes if unicodedata.category(chr(c)) not in ("Cc", "Cs", "Co")]
    words = " ".join(printable(chr(c)) for c in kept)
    assert set_text(tmp_path, (style, printable(words)))[:5] == b"%PDF-"


def test_hostile_mixtures_print(tmp_path):
    """Random strings over the whole of Unicode, with marks, joiners and controls in senseless places."""
    rng = random.Random(6)
    odd = [0x200D, 0xFE0F, 0xFE0E, 0x202E, 0x1F3FB, 0x4E00, 0x0E33, 0x1100, 0xFFFD, 0xFFFF, 0x10FFFF, 0xE000, 0x94D]
    letters = [*range(0x20, 0x250), *range(0x300, 0x370), *range(0x590, 0x6FF), *range(0x1F600, 0x1F650)]
    alphabet = [*letters, *odd * 20]
    texts = [("em", printable("".join(chr(rng.choice(alphabet)) for _ in range(60)))) for _ in range(300)]
    assert set_text(tmp_path, *texts)[:5] == b"%PDF-"


@pytest.mark.parametrize(
    "typed",
    [
        '#import "@preview/x:1.0.0": *',
        '#read("/etc/passwd") #{sys.inputs} <label> @ref',
        "*bold* _emph_ `raw` $x^2$ \\ ~ -- --- ... 1/2 // comment /* c */",
        "\"double\" 'single' “curly” «guillemets» = heading - item + enum",
        "https://example.org/a?b=c&d=<e>",
        "CaO₂ 12·5 µmol × 10⁻³ ≤ ≥ ± − – — … °C Δ α",
        "👍 🩸",
        "Žluťoučký kůň, Ünïcödé, Ελληνικά, Русский",
    ],
)
def test_prints_as_typed(tmp_path, pdftotext, typed):
    assert printable(typed) == typed
    got = text_of(set_text(tmp_path, ("plain", typed)), pdftotext)
    assert typed in " ".join(got.split())


@pytest.mark.parametrize("word", ["שלום", "مرحبا"])
def test_right_to_left_text_keeps_its_letters(tmp_path, pdftotext, word):
    got = text_of(set_text(tmp_path, ("plain", f"note {word} end")), pdftotext)
    assert sorted(c for c in unicodedata.normalize("NFKC", got) if c in word) == sorted(word)


def test_what_no_font_holds_is_spelled_out():
    assert printable("日 ok") == "[U+65E5] ok"
    assert printable("\ud800") == "[U+D800]"
    assert printable("日\u0301") == "[U+65E5][U+0301]"


def test_controls_and_overrides_are_dropped():
    assert printable("a\u202eb\u0000c\u2066d") == "abcd"
    assert printable("one\r\ntwo\tx") == "one\ntwo x"


def test_long_runs_can_break():
    text = printable("x" * 5000)
    assert text.replace("\u200b", "") == "x" * 5000
    assert max(map(len, text.split("\u200b"))) <= 48
