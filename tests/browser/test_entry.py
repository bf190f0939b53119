"""Typing at the bedside: by keyboard alone, with a wrong unit, without connection or session, by two at once."""

import re
from importlib import import_module

import pytest
from django.conf import settings
from playwright.sync_api import expect

from worksheet.ward.models import Draft, Entry

NEW = "/u/north/stay/T-1/entry/new"
# What is typed after the time, value by value; "" is a field passed over with Enter.
SLIP = ("7.36", "38", "88", "10.2", "96.4", "94.9", "0.9", "0.7", "1.8", "", "96", "40")


def type_slip(page, values=SLIP):
    """Time and site by keyboard, then the values: Enter goes on to the next."""
    expect(page.locator("#clock")).to_be_focused()
    page.keyboard.press("Enter")
    page.keyboard.press("Space")  # the first site: arterial
    page.keyboard.press("Enter")
    for text in values:
        if text:
            page.keyboard.type(text)
        page.keyboard.press("Enter")


def end_sessions():
    """Every login ends, as after the time without use."""
    import_module(settings.SESSION_ENGINE).SessionStore.get_model_class().objects.all().delete()


def status(page):
    return page.locator("#form-status")


def test_a_nurse_types_a_full_slip_by_keyboard_and_reads_the_result(ward, visitor):
    page = visitor("nurse").go(NEW)
    type_slip(page)
    page.keyboard.type("v")  # device: ventilator
    page.keyboard.press("Tab")
    for text in ("", "8", "13", "18", "5.2"):
        page.keyboard.type(text)
        page.keyboard.press("Enter")
    follows = page.locator("#entry-live")
    expect(follows).to_contain_text("DO2I")
    row = follows.locator("tr", has_text="CaO2")
    expect(row).to_contain_text("mL/dL")
    cao2, do2i = (
        follows.locator("tr", has=page.locator(f"abbr:text-is('{n}')")).locator("td").first.inner_text()
        for n in ("CaO2", "DO2I")
    )
    page.keyboard.press("Control+Enter")
    page.wait_for_url(re.compile(r"/u/north/stay/T-1/?$"))
    entry = Entry.objects.get()
    assert (entry.ph, entry.peep, entry.cardiac_output, entry.device) == (7.36, 8, 5.2, 7)
    expect(page.locator("main")).to_contain_text("Recorded: arterial")
    expect(page.locator("main")).to_contain_text(cao2)
    expect(page.locator("main")).to_contain_text(do2i)
    assert not Draft.objects.exists()


def test_a_wrong_unit_is_caught_while_typing_and_before_saving(ward, visitor):
    page = visitor("nurse").go(NEW)
    type_slip(page, ("7.36", "38", "11.7", "102"))
    expect(page.locator("#po2-said")).to_contain_text("As kPa it would be usual")
    expect(page.locator("#hb-said")).to_contain_text("Not possible")
    expect(page.locator("#hb")).to_have_attribute("aria-invalid", "true")
    page.keyboard.press("Control+Enter")
    expect(page.locator("#summary")).to_be_focused()
    expect(page.locator("#summary")).to_contain_text("Nothing was saved yet")
    assert not Entry.objects.exists()
    expect(page.locator("#po2")).to_have_value("11.7")
    page.select_option("select[name=po2_unit]", "kPa")
    page.select_option("select[name=hb_unit]", "g/L")
    expect(page.locator("#po2-said")).to_be_empty()
    expect(page.locator("#hb")).not_to_have_attribute("aria-invalid", "true")
    page.locator("#hb").press("Control+Enter")
    page.wait_for_url(re.compile(r"/stay/T-1/?$"))
    assert Entry.objects.get().hb == pytest.approx(10.2)


def test_an_unlikely_value_is_confirmed_by_keyboard(ward, visitor):
    page = visitor("nurse").go(NEW)
    type_slip(page, ("7.36", "38", "88", "10.2"))
    page.fill("#peep", "33")
    box = page.locator("#peep-said input[type=checkbox]")
    box.focus()
    page.keyboard.press("Space")
    page.keyboard.press("Control+Enter")
    page.wait_for_url(re.compile(r"/stay/T-1/?$"))
    assert Entry.objects.get().peep == 33


def test_connection_lost_while_typing(ward, visitor):
    nurse = visitor("nurse")
    page = nurse.go(NEW)
    type_slip(page, ("7.36", "38"))
    expect(status(page)).to_contain_text("Kept on the server")
    nurse.context.set_offline(True)
    page.keyboard.type("88")
    expect(status(page)).to_contain_text("No connection")
    page.keyboard.press("Enter")
    page.keyboard.type("10.2")
    page.keyboard.press("Control+Enter")
    expect(status(page)).to_contain_text("Nothing was saved yet")
    expect(page.locator("#hb")).to_have_value("10.2")
    assert not Entry.objects.exists()
    nurse.context.set_offline(False)
    page.wait_for_url(re.compile(r"/stay/T-1/?$"), timeout=15000)
    entry = Entry.objects.get()
    assert (entry.po2, entry.hb) == (88, 10.2)
    assert all("net::ERR" in problem or problem.startswith("htmx:") for problem in nurse.problems), nurse.problems
    nurse.problems.clear()


def test_the_answer_is_lost_but_the_entry_is_stored_once(ward, visitor):
    nurse = visitor("nurse")
    page = nurse.go(NEW)
    type_slip(page, ("7.36", "38", "88"))
    sent = []

    def lose(route):
        sent.append(route.fetch())  # the server stores it
        route.abort()  # and the answer never arrives

    page.route(re.compile("/entry/new$"), lose, times=1)
    page.keyboard.press("Control+Enter")
    expect(status(page)).to_contain_text("No connection")
    assert Entry.objects.count() == 1
    page.wait_for_url(re.compile(r"/stay/T-1/?$"), timeout=15000)
    assert Entry.objects.count() == 1
    assert sent[0].status == 204
    nurse.problems.clear()  # the aborted request


def test_a_closed_tab_loses_nothing(ward, visitor):
    nurse = visitor("nurse")
    page = nurse.go(NEW)
    type_slip(page, ("7.36", "38"))
    page.keyboard.type("8")
    page.close(run_before_unload=True)
    nurse.page = nurse.tab()
    nurse.page.wait_for_timeout(500)
    page = nurse.go(NEW)
    expect(page.locator("main")).to_contain_text("has not been recorded")
    expect(page.locator("#ph")).to_have_value("7.36")
    expect(page.locator("#po2")).to_have_value("8")
    assert nurse.page.evaluate("localStorage.length + sessionStorage.length") == 0


def test_session_ended_while_typing(ward, visitor):
    nurse = visitor("nurse")
    page = nurse.go(NEW)
    type_slip(page, ("7.36", "38", "88"))
    expect(status(page)).to_contain_text("Kept on the server")
    end_sessions()
    page.keyboard.type("10.2")
    page.keyboard.press("Control+Enter")
    expect(status(page)).to_contain_text("Your session has ended")
    assert not Entry.objects.exists()
    expect(page.locator("#hb")).to_have_value("10.2")
    with nurse.context.expect_page() as opened:
        page.locator("#form-help a").click()
    tab = opened.value
    tab.wait_for_load_state()
    nurse.log_in("nurse", tab)
    expect(tab.locator("#ph")).to_have_value("7.36")  # the login page leads back to the form with the draft
    tab.close()
    page.bring_to_front()
    page.locator("#form-help button").click()
    expect(status(page)).to_contain_text(re.compile("logged in again|Kept on the server"))
    page.locator("#hb").press("Control+Enter")
    page.wait_for_url(re.compile(r"/stay/T-1/?$"))
    entry = Entry.objects.get()
    assert (entry.ph, entry.hb) == (7.36, 10.2)
    nurse.problems[:] = [p for p in nurse.problems if "401" not in p and "403" not in p]


def test_somebody_else_logs_in_meanwhile(ward, visitor):
    nurse = visitor("nurse")
    page = nurse.go(NEW)
    type_slip(page, ("7.36", "38", "88"))
    expect(status(page)).to_contain_text("Kept on the server")
    end_sessions()
    tab = nurse.tab()
    nurse.log_in("other", tab)
    page.locator("#hb").press("Control+Enter")
    expect(page.locator("#begun_by-said")).to_contain_text("begun by nurse, but other is logged in")
    assert not Entry.objects.exists()
    expect(page.locator("#po2")).to_have_value("88")
    nurse.problems[:] = [p for p in nurse.problems if not re.search("40[139]", p)]


def test_two_people_type_the_same_slip_at_once(ward, visitor):
    pages = [visitor(name).go(NEW) for name in ("nurse", "other")]
    for page in pages:
        type_slip(page, ("7.36", "38", "88", "10.2"))
    pages[0].keyboard.press("Control+Enter")
    pages[0].wait_for_url(re.compile(r"/stay/T-1/?$"))
    pages[1].keyboard.press("Control+Enter")
    expect(pages[1].locator("#summary")).to_contain_text("recorded already by nurse")
    expect(pages[1].locator("#hb")).to_have_value("10.2")
    assert Entry.objects.count() == 1


def test_a_row_is_pasted_from_a_spreadsheet(ward, visitor):
    page = visitor("nurse").go(NEW)
    page.locator("#ph").focus()
    page.evaluate(
        """() => {
            const clipboardData = new DataTransfer();
            clipboardData.setData("text/plain", "pH\\tPCO2 (kPa)\\tHb (g/L)\\n7,31\\t5,3\\t102");
            const paste = new ClipboardEvent("paste", {clipboardData, bubbles: true, cancelable: true});
            document.activeElement.dispatchEvent(paste);
        }"""
    )
    expect(page.locator("#filled")).to_contain_text("3 cells put into the fields")
    expect(page.locator("#hb")).to_have_value("102")
    expect(page.locator("select[name=pco2_unit]")).to_have_value("kPa")
    assert not Entry.objects.exists()


def test_a_bed_move_and_a_transfusion_by_keyboard(ward, visitor):
    page = visitor("nurse").go("/u/north/stay/T-1/event/new")
    expect(page.locator("#kind-1")).to_be_focused()
    page.keyboard.press("Space")
    expect(page.locator("#amount")).to_be_visible()
    expect(page.locator("#bed")).to_be_hidden()
    page.keyboard.press("Enter")
    page.keyboard.press("Enter")
    page.keyboard.type("2")
    page.keyboard.press("Control+Enter")
    page.wait_for_url(re.compile(r"/stay/T-1/?$"))
    assert Entry.objects.get().event_amount == 2


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_targets_are_large_enough_and_nothing_scrolls_sideways(ward, visitor, theme):
    nurse = visitor("nurse", width=820, theme=theme)
    for address in (
        NEW,
        "/u/north/stay/T-1/event/new",
        "/u/north/stay/new",
        "/u/north/stay/T-1/facts",
        "/preferences/",
    ):
        page = nurse.go(address)
        for wide in (320, 820):  # 320 is a page of 1280 at 400 %
            page.set_viewport_size({"width": wide, "height": 900})
            assert page.evaluate("document.documentElement.scrollWidth <= innerWidth"), (address, wide)
        small = page.evaluate(
            """() => [...document.querySelectorAll("main :is(button, select, input:not([type=hidden]), summary)")]
            .filter((e) => e.checkVisibility())
            .map((e) => [e.id || e.name || e.textContent, (e.closest("label") ?? e).getBoundingClientRect()])
            .filter(([, box]) => box.width < 24 || box.height < 24).map(([name]) => name)"""
        )
        assert small == []
