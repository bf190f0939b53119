"""What must not stand in the program's text: read file by file, so that a later change cannot bring it in unseen."""

import ast
import re
import subprocess
import sys
from pathlib import Path

import pytest
from django.conf import settings

ROOT = Path(__file__).resolve().parents[2]
SOURCES = sorted((ROOT / "worksheet").rglob("*.py"))
TEMPLATES = sorted((ROOT / "templates").rglob("*.html"))
SCRIPTS = sorted((ROOT / "static" / "js").glob("*.js"))
# Where SQL is written by hand: fixed statements, values bound, no text of a person.
OWN_SQL = {
    "audit.py",
    "commit.py",
    "copies.py",
    "forget.py",
    "health.py",
    "migrate_database.py",
    "0002_append_only.py",
    "0004_guards_and_logins.py",
}


def imported(file):
    """Modules that a file imports."""
    for node in ast.walk(ast.parse(file.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and not node.level:
            yield node.module or ""


def lines_with(files, pattern):
    found = re.compile(pattern)
    return [f"{file.name}: {line.strip()}" for file in files
            for line in file.read_text(encoding="utf-8").splitlines() if found.search(line)]  # fmt: skip


def test_there_is_something_to_read():
    assert len(SOURCES) > 100
    assert len(TEMPLATES) > 20
    assert len(SCRIPTS) >= 3


def test_no_unsafe_construct_by_the_linters_security_rules():
    """S102, S301 … S701: eval, pickle, weak hashes, shell, SQL from text, random for secrets, passwords in the text."""
    done = subprocess.run(
        [sys.executable, "-m", "ruff", "check", "--select", "S,DJ", "--no-cache", "worksheet"],
        cwd=ROOT, capture_output=True, text=True,
    )  # fmt: skip
    assert done.returncode == 0, done.stdout


def test_a_program_is_started_where_it_was_looked_at_and_never_by_a_shell():
    starting = {file.name for file in SOURCES if "subprocess" in set(imported(file))}
    assert starting <= {"copies.py", "work.py", "printing.py"}
    assert not lines_with(SOURCES, r"shell\s*=\s*True|os\.system|os\.popen")


def test_nothing_goes_out():
    """No module that could open a connection to another machine is imported; the listener only accepts."""
    outward = {"requests", "httpx", "aiohttp", "urllib.request", "http.client", "smtplib", "ftplib", "socket", "ssl"}
    assert {file.name: set(imported(file)) & outward for file in SOURCES if set(imported(file)) & outward} == {}
    assert "mail" not in {name.rpartition(".")[2] for file in SOURCES for name in imported(file)}


def test_no_cipher_of_our_own():
    ciphers = {"cryptography", "Crypto", "nacl", "Cryptodome"}
    assert not [file for file in SOURCES if {name.partition(".")[0] for name in imported(file)} & ciphers]


def test_own_sql_stands_only_where_it_was_looked_at():
    written = {
        file.name for file in SOURCES if re.search(r"cursor\.execute|\.raw\(|\.extra\(|RunSQL", file.read_text())
    }
    assert written <= OWN_SQL


def test_templates_escape_everything_and_hold_no_script_or_style():
    assert not lines_with(TEMPLATES, r"\|safe\b|autoescape off|\|safeseq")
    assert not lines_with(TEMPLATES, r"<style|\sstyle=|\son[a-z]+=\"")
    inline = [line for line in lines_with(TEMPLATES, r"<script") if "src=" not in line and "json" not in line]
    assert inline == []
    assert not lines_with(TEMPLATES, r"(?:src|href)=\"(?:https?:)?//")


def test_texts_are_no_templates_and_no_formats():
    assert not lines_with(SOURCES, r"(?<!\w)Template\(|from_string\(")
    assert not lines_with(SOURCES, r"csrf_exempt|SafeString\(")
    unescaped = lines_with(SOURCES, r"mark_safe\(")
    assert [line for line in unescaped if not re.search(r"# noqa: S308 +\S+ \S+", line)] == []  # each says why it may


def test_own_scripts_put_data_into_text_only():
    assert not lines_with(SCRIPTS, r"\.innerHTML\s*=|insertAdjacentHTML|document\.write|\beval\(|new Function")
    assert not lines_with(SCRIPTS, r"localStorage|indexedDB|sessionStorage\.setItem|document\.cookie\s*=")
    assert not lines_with(SCRIPTS, r"Object\.assign\(\s*(?:data|told|answer)\b|__proto__")


def test_no_secret_lies_in_the_text():
    assert not lines_with(SOURCES, r"BEGIN [A-Z ]*PRIVATE KEY|AKIA[0-9A-Z]{16}")
    assert "SECRET_KEY = env.text" in (ROOT / "worksheet" / "settings.py").read_text()


def test_settings_that_must_stay():
    assert settings.SESSION_ENGINE == "worksheet.ward.session_store"  # in the database
    assert "pickle" not in settings.SESSION_SERIALIZER.lower()
    assert settings.PASSWORD_RESET_TIMEOUT <= 24 * 3600
    assert not settings.MEDIA_URL.strip("/")
    assert "django.contrib.admin" not in settings.INSTALLED_APPS
    assert 0 < settings.DATA_UPLOAD_MAX_MEMORY_SIZE <= 2**22
    assert 0 < settings.DATA_UPLOAD_MAX_NUMBER_FIELDS <= 2000
    assert settings.X_FRAME_OPTIONS == "DENY"
    assert settings.SESSION_COOKIE_HTTPONLY
    assert settings.SESSION_COOKIE_SAMESITE == settings.CSRF_COOKIE_SAMESITE == "Lax"
    assert settings.SESSION_IDLE_SECONDS <= 3600
    assert settings.SESSION_ABSOLUTE_SECONDS <= 24 * 3600
    assert settings.USE_TZ
    middleware = settings.MIDDLEWARE
    assert middleware.index("django.contrib.auth.middleware.LoginRequiredMiddleware") > middleware.index(
        "worksheet.ward.middleware.session_limits"
    )  # whoever is not named an exception is behind the login


@pytest.mark.parametrize(
    "pattern",
    [p for file in SOURCES for p in re.findall(r"re\.compile\(\s*rf?\"((?:[^\"\\]|\\.)+)\"", file.read_text())
     if p.count("(") == p.count(")") or "\\(" in p],
)  # fmt: skip
def test_no_regular_expression_can_be_made_slow(pattern):
    import time

    begun = time.process_time()
    for text in ("a" * 2000, "1" * 2000, "1," * 1000 + "x", " " * 2000 + "x", "/stay/" * 400, "([" * 1000):
        re.search(pattern, text)
    assert time.process_time() - begun < 2.0
