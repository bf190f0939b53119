"""A file from the disk to the entries: sent, questioned, settled, stored; accessible throughout."""

from pathlib import Path

import pytest
from playwright.sync_api import expect

from worksheet.transfer.models import MessageState, RawMessage
from worksheet.ward.models import Entry, Membership, Role

AXE = (Path(__file__).parent / "axe" / "axe.min.js").read_text(encoding="utf-8")  # axe-core 4.10.3, MPL 2.0
RULES = ["wcag2a", "wcag2aa", "wcag21a", "wcag21aa", "wcag22aa"]
SHEET = (
    "Gases of the night\nPatient;Date;Time;Sample;PaO2;Hb (g/L);Na\n"
    "T-1;{day:%d.%m.%Y};05:40;arterial;12,1;69;140\nX-9;{day:%d.%m.%Y};05:40;arterial;12,1;69;140\nTotal;2\n"
)


def violations(page):
    page.evaluate(AXE)
    found = page.evaluate("rules => axe.run(document, {runOnly: rules})", RULES)
    assert len(found["passes"]) >= 12  # it looked
    return [(v["id"], v["nodes"][0]["target"], v["nodes"][0]["html"][:200]) for v in found["violations"]]


@pytest.mark.parametrize("theme", ["light", "dark"])
def test_a_file_from_the_disk_to_the_entries(ward, visitor, tmp_path, theme):
    from datetime import timedelta

    Membership.objects.filter(user__username="nurse").update(role=Role.LEAD)
    file = tmp_path / "night.csv"
    file.write_text(SHEET.format(day=ward.admitted_at + timedelta(days=2)), encoding="utf-8")
    page = visitor("nurse", theme=theme).go("/u/north/transfer/")
    assert violations(page) == []
    page.set_input_files("#file", str(file))
    page.get_by_role("button", name="Read the file").click()
    expect(page.get_by_role("heading", name="To be settled first")).to_be_visible()
    assert violations(page) == []
    expect(page.get_by_label("Time zone of times written without one")).to_have_value("Europe/Zurich")
    page.get_by_label("Dates such as").select_option("dmy")
    page.get_by_role("button", name="Apply and look again").click()
    page.get_by_role("button", name="Store 1 row").click()
    expect(page.get_by_role("status").last).to_contain_text("Stored: 1 new, 1 queued")
    assert violations(page) == []
    entry = Entry.objects.get()
    assert (round(entry.po2, 1), round(entry.hb, 2)) == (90.8, 6.9)
    page.goto(page.url.split("/transfer/")[0] + "/transfer/queue/")
    expect(page.locator("main")).to_contain_text("nobody in this unit has the identifier X-9")
    assert violations(page) == []
    letter = RawMessage.objects.create(
        unit=ward.unit,
        sender="LAB",
        control_id="M1",
        digest="x",
        content=b"MSH|^~\\&|LAB\rPID|1",
        state=MessageState.DEAD,
        reason="version (none) is not taken",
    )
    for address in ("messages/", f"messages/{letter.pk}/"):
        page.goto(page.url.split("/transfer/")[0] + "/transfer/" + address)
        expect(page.locator("main")).to_contain_text("version (none) is not taken")
        assert violations(page) == []


def test_no_transfer_page_scrolls_sideways_on_a_tablet(ward, visitor):
    person = visitor("nurse", width=820)
    for address in ("/u/north/transfer/", "/u/north/transfer/queue/"):
        page = person.go(address)
        assert page.evaluate("document.documentElement.scrollWidth <= document.documentElement.clientWidth")
