"""A login warns before it ends; then the page is covered, and comes back with what was typed."""

import pytest
from playwright.sync_api import expect

NEW = "/u/north/stay/T-1/entry/new"


@pytest.fixture
def short(settings):
    """A login that ends after nine seconds without use."""
    settings.SESSION_IDLE_SECONDS = 9


def test_the_page_is_covered_and_comes_back_with_what_was_typed(ward, visitor, short):
    nurse = visitor("nurse")
    page = nurse.go(NEW)
    page.locator("#hb").fill("9.9")
    box = page.locator("#session")
    expect(box.get_by_role("heading", name="Still here?")).to_be_visible(timeout=8000)
    expect(box.get_by_role("button", name="Stay logged in")).to_be_focused()
    expect(box.get_by_role("heading", name="Your login has ended")).to_be_visible(timeout=15000)
    expect(page.locator("#hb")).to_be_hidden()
    page.keyboard.press("Escape")
    expect(page.locator("#hb")).to_be_hidden()
    other = page.context.new_page()
    other.goto(page.url)
    assert "/login/" in other.url
    nurse.log_in("nurse", other)
    box.get_by_role("button", name="I have logged in").click()
    expect(page.locator("#content")).to_be_visible()
    assert page.locator("#hb").input_value() == "9.9"


def test_whoever_is_still_here_stays_logged_in(ward, visitor, short):
    page = visitor("nurse").go("/u/north/")
    page.locator("#session").get_by_role("button", name="Stay logged in").click(timeout=8000)
    page.wait_for_timeout(4000)
    answer = page.evaluate("fetch(document.getElementById('session').dataset.address).then(a => a.json())")
    assert answer["name"] == "nurse"
    assert answer["seconds"] > 0
