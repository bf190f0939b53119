"""The screens in a browser: by eye and by keyboard, accessible in light and dark, alive without losing a place."""

import re
import time
from pathlib import Path

import pytest
from django.urls import reverse
from django.utils import timezone
from playwright.sync_api import expect

from tests.browser.conftest import PASSWORD
from worksheet.oxygen.readings import Device, FlowMethod, Site
from worksheet.ward import demo, record
from worksheet.ward.models import Entry, ReviewMark, Stay, User

AXE = (Path(__file__).parent / "axe" / "axe.min.js").read_text(encoding="utf-8")  # axe-core 4.10.3, MPL 2.0
RULES = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa"]
UNIT, BLEEDING = "/u/demo/?window=12", "/u/demo/stay/K-2041/?window=12"


@pytest.fixture
def demo_unit(transactional_db):
    """The demo unit of invented patients."""
    return demo.make(timezone.now(), PASSWORD)


def newest_gas(reference):
    return Entry.objects.filter(stay__reference=reference, site=Site.ARTERIAL).order_by("-time").first()


def addresses():
    explain = reverse("explain", args=["demo", "K-2041", newest_gas("K-2041").pk, "do2i"])
    return (
        UNIT, "/u/demo/?window=free&from=2020-01-01T00:00&to=2020-01-02T00:00", BLEEDING,
        "/u/demo/stay/K-2077/?window=24&history=1", "/u/demo/stay/K-2062/", explain, "/methods/", "/u/demo/methods/",
    )  # fmt: skip


def violations(page):
    page.evaluate(AXE)
    found = page.evaluate("rules => axe.run(document, {runOnly: rules})", RULES)
    assert len(found["passes"]) >= 15  # it looked
    return [(v["id"], v["nodes"][0]["target"], v["nodes"][0]["html"][:200]) for v in found["violations"]]


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_no_page_breaks_a_rule_of_wcag_aa(demo_unit, visitor, theme):
    person = visitor("nurse", theme=theme)
    for address in addresses():
        page = person.go(address)
        for chart in page.locator("[data-chart]").all():
            expect(chart).to_have_attribute("data-drawn", "yes")
        assert violations(page) == [], (address, theme)


def test_login_and_the_open_dialogs_break_no_rule(demo_unit, visitor):
    stranger = visitor()
    assert violations(stranger.go("/login/")) == []
    page = visitor("nurse").go(BLEEDING)
    page.locator(".verdict-now a").click()
    expect(page.locator("#explain")).to_be_visible()
    expect(page.locator("#explain")).to_contain_text("DO2I = 10 · CI · CaO2")
    assert violations(page) == []
    page.keyboard.press("Escape")
    page.keyboard.press("?")
    expect(page.locator("#keys")).to_be_visible()
    assert violations(page) == []


@pytest.mark.parametrize("width", [820, 1280])
def test_no_page_scrolls_sideways(demo_unit, visitor, width):
    person = visitor("nurse", width=width)
    for address in addresses():
        page = person.go(address)
        assert page.evaluate("document.documentElement.scrollWidth") <= width, address


def test_at_200_percent_zoom_the_text_still_fits(demo_unit, visitor):
    """1280 px at 200 % are 640 CSS px."""
    person = visitor("nurse", width=640)
    for address in (UNIT, BLEEDING, "/methods/"):
        page = person.go(address)
        assert page.evaluate("document.documentElement.scrollWidth") <= 640, address


def test_a_charge_nurse_finds_the_worst_bed_and_what_failed(demo_unit, visitor):
    page = visitor("nurse").go(UNIT)
    expect(page.locator("#counts")).to_contain_text("worse beyond noise")
    first = page.locator("tbody.bed").first
    assert "fell" in first.get_attribute("class")
    bleeding = page.locator("tbody.bed", has_text="K-2041")
    expect(bleeding.locator(".failed")).to_have_text("haemoglobin")
    stale = page.locator("tbody.bed", has_text="K-2062")
    expect(stale).to_contain_text("stale")
    expect(stale).to_contain_text("Missing")
    bleeding.locator("th a").click()
    expect(page.locator("#verdict-title + .verdict-figure")).to_be_visible()
    expect(page.locator(".verdict-words")).to_contain_text("haemoglobin")


def test_the_bed_list_goes_by_keyboard(demo_unit, visitor):
    page = visitor("nurse").go(UNIT)
    page.keyboard.press("j")
    page.keyboard.press("j")
    second = page.locator("tbody.bed").nth(1).locator("th a")
    expect(second).to_be_focused()
    page.keyboard.press("Enter")
    page.wait_for_url(re.compile(r"/u/demo/stay/K-\d+/\?window=12"))
    page.keyboard.press("n")
    page.wait_for_load_state()
    page.keyboard.press("u")
    page.wait_for_url(re.compile(r"/u/demo/\?window=12"))


def test_keys_do_nothing_while_a_field_is_typed_in(demo_unit, visitor):
    page = visitor("nurse").go("/u/demo/stay/K-2041/entry/new")
    page.locator("#note").focus()
    page.keyboard.type("never u n e j ?")
    expect(page.locator("#note")).to_have_value("never u n e j ?")
    assert page.url.endswith("/entry/new")


def test_an_intensivist_opens_an_explanation_and_follows_an_input(demo_unit, visitor):
    page = visitor("nurse").go(BLEEDING)
    page.locator("#entries td.derived a").first.click()
    dialog = page.locator("#explain")
    expect(dialog).to_be_visible()
    expect(dialog).to_contain_text("CaO2 = k · Hb")
    expect(dialog).to_contain_text("Dominguez de Villota 1981")
    page.keyboard.press("Escape")
    page.locator(".numbers a", has_text="DO2I").first.click()
    dialog.locator("a", has_text="mL/dL").first.click()
    expect(dialog).to_contain_text("CaO2 = k · Hb")
    assert page.url.endswith("?window=12")


def test_marking_reviewed_by_key(demo_unit, visitor):
    page = visitor("nurse").go(BLEEDING)
    page.keyboard.press("r")
    expect(page.locator("main")).to_contain_text("K-2041 marked as reviewed")
    mark = ReviewMark.objects.get()
    assert (mark.stay.reference, mark.user.username) == ("K-2041", "nurse")


def gas_now(reference, **more):
    """A new arterial gas of a steady patient, seen by no screen yet."""
    values = {"ph": 7.35, "pco2": 41.0, "po2": 90.0, "hb": 10.5, "so2": 0.965, "cohb": 0.01, "methb": 0.007,
              "lactate": 1.4, "cardiac_output": 4.9, **more}  # fmt: skip
    new = record.NewEntry(timezone.now(), Site.ARTERIAL, values, device=Device.VENTILATOR,
                          flow_method=FlowMethod.THERMODILUTION)  # fmt: skip
    record.record(Stay.objects.get(reference=reference), User.objects.get(username="nurse"), new)


def test_the_unit_updates_itself_and_keeps_scroll_focus_and_what_is_open(demo_unit, visitor):
    """The last bed becomes the worst: it moves to the top, and the bed that is read stays where it is on the screen."""
    page = visitor("nurse").go(UNIT)
    page.set_viewport_size({"width": 1280, "height": 420})
    contradictory = page.locator("tbody.bed", has_text="K-2077")
    contradictory.locator("summary").click()
    read = contradictory.locator("th a")
    read.focus()
    page.evaluate("window.scrollBy(0, 40)")
    before = read.bounding_box()["y"]
    last = page.locator("tbody.bed").last.locator("th a").inner_text().split()[-1]
    gas_now(last, hb=4.9, lactate=4.0)
    moved = page.locator("tbody.bed", has_text=last)
    expect(moved).to_have_class(re.compile("fell"), timeout=12000)
    expect(moved.locator(".failed")).to_have_text("haemoglobin")
    assert page.locator("tbody.bed").first.locator("th a").inner_text().endswith(last)
    expect(read).to_be_focused()
    assert abs(read.bounding_box()["y"] - before) < 3
    assert contradictory.locator("details").get_attribute("open") is not None


def test_what_did_not_change_is_not_touched_by_an_update(demo_unit, visitor):
    page = visitor("nurse").go(UNIT)
    page.evaluate("document.querySelector('tbody.bed').marked = true")
    with page.expect_response(lambda r: "/u/demo/" in r.url and r.status in (200, 304), timeout=9000):
        pass
    page.wait_for_timeout(300)
    assert page.evaluate("[...document.querySelectorAll('tbody.bed')].some(b => b.marked)")


def test_a_lost_connection_is_said_and_mends_itself(demo_unit, visitor):
    person = visitor("nurse")
    page = person.go(UNIT)
    person.context.set_offline(True)
    said = page.locator("[data-live-said]")
    expect(said).to_contain_text("no answer from the server", timeout=9000)
    person.context.set_offline(False)
    expect(said).to_be_empty(timeout=9000)
    person.problems.clear()  # the browser itself reports the lost requests on the console


def test_light_and_dark_can_be_set_and_stay(demo_unit, visitor):
    page = visitor("nurse").go(BLEEDING)

    def paper():
        return page.evaluate("getComputedStyle(document.body).backgroundColor")

    light = paper()
    with page.expect_response(lambda r: r.url.endswith("/theme")):
        page.get_by_role("button", name="Light or dark").click()
    assert paper() != light
    page.reload()
    assert page.evaluate("document.documentElement.dataset.theme") == "dark"
    assert paper() != light


def test_nothing_moves_when_the_charts_arrive_and_the_first_is_there_within_a_second(demo_unit, visitor):
    person = visitor("nurse")
    person.go(BLEEDING)  # warm caches, as in a round
    page = person.page
    page.add_init_script(
        "window.shift = 0; new PerformanceObserver(l => { for (const e of l.getEntries()) if (!e.hadRecentInput)"
        " window.shift += e.value; }).observe({type: 'layout-shift', buffered: true});"
    )
    start = time.perf_counter()
    page.goto(person.server + BLEEDING, wait_until="commit")
    page.wait_for_selector("[data-chart][data-drawn=yes]", state="attached")
    first = time.perf_counter() - start
    expect(page.locator("[data-chart][data-drawn=yes]")).to_have_count(5)
    page.wait_for_timeout(200)
    assert page.evaluate("window.shift") < 0.1  # "good" by Core Web Vitals (web.dev/articles/cls)
    print(f"first chart after {first:.2f} s")
    assert first < 6.0  # the goal is 1 s on an idle machine; this fails on a regression, not on a busy machine


def test_each_chart_has_words_and_a_table(demo_unit, visitor):
    page = visitor("nurse").go(BLEEDING)
    figures = page.locator(".chart-figure")
    expect(figures).to_have_count(5)
    for figure in figures.all():
        assert len(figure.locator(".chart-summary").inner_text()) > 20
        figure.locator("summary").click()
        assert figure.locator("tbody tr").count() >= 1


def test_forty_beds_print_on_one_page(demo_unit, visitor, tmp_path):
    from tests.review.wards import fill

    for stay in Stay.objects.filter(unit=demo_unit):
        stay.discharged_at = timezone.now()
        stay.bed = None
        stay.save()
    demo_unit.beds.all().delete()
    fill(demo_unit, User.objects.get(username="nurse"), 40, hours=16)
    page = visitor("nurse").go("/u/demo/?window=12")
    expect(page.locator("tbody.bed")).to_have_count(40)
    pdf = page.pdf(format="A4", prefer_css_page_size=False)
    assert pdf.count(b"/Type /Page\n") + pdf.count(b"/Type /Page ") + pdf.count(b"/Type /Page/") == 1
