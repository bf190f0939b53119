"""Chromium against a real server: pages are read as people see them, and no page may complain on the console."""

import os
import tempfile
from datetime import timedelta
from pathlib import Path

import pytest
from django.conf import settings
from django.utils import timezone

from worksheet.ward.models import Bed, Membership, Patient, Role, Stay, Unit, User

PASSWORD = "a long invented phrase 1"
os.environ.setdefault("DJANGO_ALLOW_ASYNC_UNSAFE", "true")  # playwright's loop runs in the thread of the test


def pytest_configure():
    """Server threads and the test share a data base file; one connection in memory would mix their transactions."""
    if settings.DATABASES["default"]["ENGINE"].endswith("sqlite3"):
        folder = tempfile.mkdtemp(prefix="worksheet-browser-")
        settings.DATABASES["default"].setdefault("TEST", {})["NAME"] = str(Path(folder) / "test.sqlite3")


def pytest_collection_modifyitems(items):
    for item in items:
        if "tests/browser" in str(item.path):
            item.add_marker(pytest.mark.browser)


@pytest.fixture(scope="session")
def browser(chromium):
    """One Chromium for all tests."""
    from playwright.sync_api import sync_playwright

    with sync_playwright() as playwright:
        started = playwright.chromium.launch(executable_path=chromium, args=["--no-sandbox"])
        yield started
        started.close()


@pytest.fixture
def ward(transactional_db):
    """A unit with two recorders and one patient, taken in three days ago."""
    unit = Unit.objects.create(name="North unit", slug="north", time_zone="Europe/Zurich")
    for name in ("nurse", "other"):
        user = User.objects.create_user(name, password=PASSWORD)
        Membership.objects.create(user=user, unit=unit, role=Role.RECORDER)
    bed = Bed.objects.create(unit=unit, name="1", position=1)
    return Stay.objects.create(
        unit=unit, patient=Patient.objects.create(identifier="T-1"), reference="T-1", bed=bed, height=170, weight=70,
        age=60, admitted_at=timezone.now() - timedelta(days=3),
    )  # fmt: skip


class Visitor:
    """A person at a browser; ``problems`` collects what the console says."""

    def __init__(self, context, server):
        self.context, self.server, self.problems = context, server, []
        self.page = self.tab()

    def tab(self):
        page = self.context.new_page()
        page.on("console", lambda m: self.problems.append(m.text) if m.type in {"error", "warning"} else None)
        page.on("pageerror", lambda error: self.problems.append(str(error)))
        return page

    def go(self, address):
        self.page.goto(self.server + address)
        return self.page

    def leave(self):
        """Close the browser after the last requests of its pages (a draft on leaving) were answered."""
        for page in self.context.pages:
            page.goto("about:blank")
            page.wait_for_timeout(150)
        self.context.close()

    def log_in(self, name, page=None):
        page = page or self.page
        if "/login/" not in page.url:
            page.goto(self.server + "/login/")
        page.fill("input[name=username]", name)
        page.fill("input[name=password]", PASSWORD)
        page.keyboard.press("Enter")
        page.wait_for_url(lambda url: "/login/" not in url)
        return self


@pytest.fixture
def visitor(browser, live_server):
    """``visitor(name)`` logs a person in on a browser of their own; at the end the consoles must be silent."""
    opened = []

    def open_(name=None, width=1280, theme="light", **more):
        context = browser.new_context(viewport={"width": width, "height": 900}, color_scheme=theme, **more)
        context.set_default_timeout(8000)
        person = Visitor(context, live_server.url)
        opened.append(person)
        return person.log_in(name) if name else person

    yield open_
    problems = [problem for person in opened for problem in person.problems]
    for person in opened:
        person.leave()
    assert problems == []
