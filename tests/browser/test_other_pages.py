"""Pages of accounts, members, choices, the trail and the forms: no rule of WCAG 2.2 AA broken, nothing sideways."""

import pytest

from tests.browser.test_screens import demo_unit, violations  # noqa: F401  the fixture is used by name

LEAD = (
    "/account/", "/account/second-factor/new/", "/u/demo/members/", "/u/demo/settings/", "/u/demo/trail/",
    "/preferences/", "/u/demo/stay/K-2041/entry/new", "/u/demo/stay/K-2041/event/new", "/u/demo/stay/K-2041/facts",
    "/u/demo/stay/new", "/u/demo/transfer/", "/u/demo/transfer/queue/", "/u/demo/transfer/messages/",
)  # fmt: skip


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_no_other_page_breaks_a_rule(demo_unit, visitor, theme):  # noqa: F811
    person = visitor("lead", theme=theme)
    for address in LEAD:
        assert violations(person.go(address)) == [], (address, theme)
    admin = visitor("admin", theme=theme)
    for address in ("/", "/units/new/"):
        assert violations(admin.go(address)) == [], (address, theme)


@pytest.mark.parametrize("width", [820, 1280])
def test_no_other_page_scrolls_sideways(demo_unit, visitor, width):  # noqa: F811
    person = visitor("lead", width=width)
    for address in LEAD:
        page = person.go(address)
        assert page.evaluate("document.documentElement.scrollWidth") <= width, address
