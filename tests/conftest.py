"""What every test shares: faster hashing, static files without a collected manifest, and honest skipping."""

import importlib
import os
import shutil

import pytest
from django.conf import settings

REQUIRE_ALL = os.environ.get("WORKSHEET_REQUIRE_ALL") == "1"


def pytest_configure():
    """Test settings: nothing here weakens what is tested; account tests set the real hasher themselves."""
    settings.PASSWORD_HASHERS = ["django.contrib.auth.hashers.MD5PasswordHasher"]
    settings.STORAGES = {
        **settings.STORAGES,
        "staticfiles": {"BACKEND": "django.contrib.staticfiles.storage.StaticFilesStorage"},
    }
    settings.WHITENOISE_AUTOREFRESH = True
    settings.WHITENOISE_USE_FINDERS = True


def need(program: str) -> str:
    """Path of a system program; without it the test is skipped, or fails where everything is required (CI)."""
    path = shutil.which(program)
    if path is None:
        if REQUIRE_ALL:
            pytest.fail(f"{program} is required here and not installed")
        pytest.skip(f"{program} is not installed")
    return path


@pytest.fixture(scope="session")
def chromium() -> str:
    """Path of Debian's Chromium."""
    return need("chromium")


@pytest.fixture(scope="session")
def pdftotext() -> str:
    """Path of poppler's pdftotext."""
    return need("pdftotext")


@pytest.fixture(scope="session", autouse=True)
def _emptying_between_tests():
    """Tests with a live server empty the database afterwards, which its triggers refuse: lift them for that moment.

    Only the tests' own emptying is patched; the program has no such way.
    """
    from django.db import connection

    triggers = importlib.import_module("worksheet.ward.migrations.0002_append_only")
    patch = pytest.MonkeyPatch()
    operations = type(connection.ops)
    original = operations.execute_sql_flush

    def emptied(self, statements):
        if not statements:
            return
        with self.connection.schema_editor() as editor:
            triggers.backwards(None, editor)
        original(self, statements)
        with self.connection.schema_editor() as editor:
            triggers.forwards(None, editor)

    patch.setattr(operations, "execute_sql_flush", emptied)
    yield
    patch.undo()


@pytest.fixture(autouse=True)
def _nothing_drawn_for_another_test():
    """Rows are kept under a mark of numbers that a rolled-back database gives again to the next test."""
    from worksheet.review import live

    live._drawn.clear()
