"""Setting a document: trouble is told in words, the log says more, and user text cannot reach files or the network."""

import json
import logging
import subprocess

import pytest
import typst

from worksheet.report import printing
from worksheet.report.printing import NotPrinted, cleaned, pdf_of
from worksheet.report.typeset import compile_document


@pytest.fixture
def template(tmp_path, monkeypatch):
    monkeypatch.setattr(printing, "TEMPLATES", tmp_path)
    file = tmp_path / "t.typ"

    def write(text):
        file.write_text('#set document(title: "t")\n#set text(font: "Source Sans 3", lang: "en")\n' + text)
        return file

    return write


def test_trouble_is_told_in_words_and_logged(template, caplog):
    template("#panic(42)")
    with caplog.at_level(logging.ERROR), pytest.raises(NotPrinted, match="could not be set"):
        pdf_of("t.typ", {"keywords": []}, 0)
    assert "panicked" in caplog.text


def test_a_hang_ends(template, monkeypatch):
    template("text")

    def hangs(*args, timeout, **options):
        raise subprocess.TimeoutExpired(args, timeout)

    monkeypatch.setattr(subprocess, "run", hangs)
    with pytest.raises(NotPrinted, match="choose a shorter span"):
        pdf_of("t.typ", {"keywords": []}, 0)


def test_warnings_are_logged(template, caplog):
    template('#text(font: "No Such Font", "words")')
    with caplog.at_level(logging.WARNING):
        assert pdf_of("t.typ", {"keywords": []}, 0).startswith(b"%PDF-")
    assert "unknown font" in caplog.text


def test_template_reads_nothing_outside_its_folder(template, tmp_path):
    file = template('#read("/../../../../../../etc/hostname")')
    with pytest.raises(typst.TypstError):
        compile_document(str(file), json.dumps({}), 0)


def test_payload_is_cleaned_all_through():
    given = {"a": ["x\u0000y", {"b": ("\u202eabc", 1, None, 2.5)}], "n": 3}
    assert cleaned(given) == {"a": ["xy", {"b": ["abc", 1, None, 2.5]}], "n": 3}
