"""The timeline as a document: structure, content, hostile text, hard cases, and the page's edges."""

import io
import json
import re
import subprocess
import tempfile
from dataclasses import replace
from datetime import timedelta
from pathlib import Path

import pikepdf
import pytest
from django.utils import timezone
from PIL import Image

from tests.report import world
from worksheet.oxygen.readings import Event, Site
from worksheet.report.judgement import Judged
from worksheet.report.printing import TEMPLATES, cleaned
from worksheet.report.timeline import timeline, timeline_pdf
from worksheet.report.typeset import compile_document
from worksheet.ward import record
from worksheet.ward.models import AuditEvent, User

pytestmark = pytest.mark.django_db


def words_of(pdf: bytes, pdftotext: str, *options: str) -> str:
    done = subprocess.run([pdftotext, "-enc", "UTF-8", *options, "-", "-"], input=pdf, capture_output=True, check=True)
    return done.stdout.decode()


def flat(text: str) -> str:
    return " ".join(text.replace("\u200b", "").split())


@pytest.fixture
def stay():
    made = world.make_stay()
    world.add_story(made)
    return made


def test_tagged_with_language_title_and_alternative_texts(stay):
    pdf = pikepdf.open(io.BytesIO(timeline_pdf(world.order(stay))))
    assert str(pdf.Root.Lang) == "en"
    assert bool(pdf.Root.MarkInfo.Marked)
    assert pdf.Root.ViewerPreferences.DisplayDocTitle
    with pdf.open_metadata() as meta:
        assert meta["dc:title"] == "Oxygen delivery timeline · T-100"
        assert meta["pdfaid:part"] == "2"
        assert meta["pdfaid:conformance"] == "A"
        assert meta["pdfuaid:part"] == "1"
    kinds, alts = [], []

    def walk(node):
        if isinstance(node, pikepdf.Array):
            for child in node:
                walk(child)
        elif isinstance(node, pikepdf.Dictionary) and "/S" in node:
            kinds.append(str(node.S))
            if str(node.S) == "/Figure":
                alts.append(str(node.get("/Alt", "")))
            if "/K" in node:
                walk(node.K)

    walk(pdf.Root.StructTreeRoot.K)
    assert {"/H1", "/H2", "/H3", "/Table", "/TH", "/TR", "/TD", "/Figure"} <= set(kinds)
    assert len(alts) == 5
    assert all(len(alt) > 40 for alt in alts)


def test_no_compiler_warning(stay):
    payload = json.dumps(cleaned(timeline(world.order(stay), "0" * 64)))
    _, warnings = compile_document(str(TEMPLATES / "timeline.typ"), payload, 0)
    assert warnings == []


def test_only_shipped_fonts_embedded(stay):
    pdf = pikepdf.open(io.BytesIO(timeline_pdf(world.order(stay))))
    names = {
        str(font.BaseFont).split("+")[-1] for page in pdf.pages for font in page.Resources.get("/Font", {}).values()
    }
    assert names
    assert all(name.startswith(("SourceSans3", "DejaVuSans", "NotoEmoji")) for name in names)


def test_every_number_of_the_tables_is_found(stay, pdftotext):
    order = world.order(stay)
    text = flat(words_of(timeline_pdf(order), pdftotext, "-layout"))
    payload = timeline(order, "0" * 64)
    tables = [payload["ledger"], payload["entries"], *payload["other"], payload["constants"],
              payload["uncertainties"],
              payload["saturations"]["table"], payload["corrections"]]  # fmt: skip
    numbers = {
        number
        for table in tables
        for row in table["rows"]
        for cell in row
        for number in re.findall(r"[−+±]?\d+(?:\.\d+)?", cell if isinstance(cell, str) else cell[0])
    }
    assert len(numbers) > 60
    assert not [number for number in numbers if number not in text]


def test_header_on_every_page(stay, pdftotext):
    order = world.order(stay)
    data = timeline_pdf(order)
    count = len(pikepdf.open(io.BytesIO(data)).pages)
    assert count >= 4
    for n in range(1, count + 1):
        page = flat(words_of(data, pdftotext, "-f", str(n), "-l", str(n), "-layout"))
        assert "T-100 · bed N100 · Unit North" in page
        assert f"Page {n} of {count}" in page
        assert "by dr.reader" in page
        assert "local protocols and licensed practice decide" in page


def test_sections_are_all_there_in_order(stay, pdftotext):
    lines = [line.strip() for line in words_of(timeline_pdf(world.order(stay)), pdftotext).splitlines()]
    wanted = (
        "Verdict", "Change ledger", "1 · Time strip", "2 · Change ledger of DO2I", "3 · Content map",
        "4 · Delivery map", "5 · Dissociation curve", "Saturations reconciled", "All entries", "Findings", "Notes",
        "Corrected and struck-out entries", "Methods and constants in force", "Cautions", "Fingerprint",
    )  # fmt: skip
    places = [lines.index(heading) for heading in wanted]
    assert places == sorted(places)


def test_corrections_and_carried_values_are_marked(stay, pdftotext):
    order = world.order(stay)
    payload = timeline(order, "0" * 64)
    assert ["7.5", "carried"] not in [cell for row in payload["entries"]["rows"] for cell in row]
    marks = [row[-1] for row in payload["entries"]["rows"]]
    assert "corrected" in marks
    assert "bleed 600 mL, note 1" in marks
    text = flat(words_of(timeline_pdf(order), pdftotext))
    assert "Hb 9.2 g/dL → 9.1 g/dL" in text
    assert "read from the wrong slip" in text
    assert "struck out: " in text
    assert "sample of the neighbour" in text


def test_carried_value_carries_its_mark():
    stay = world.make_stay("T-101")
    world.add_gases(stay, 1)
    later = {k: v for k, v in world.gas(0, 1).items() if k != "hb"}
    record.record(stay, world.nurse(), record.NewEntry(world.START + timedelta(hours=1), Site.ARTERIAL, later))
    rows = timeline(world.order(stay), "0" * 64)["entries"]["rows"]
    assert ["10.5", "carried"] in rows[1]
    assert "10.5" in rows[0]


MARKUP = '#import "x": * #read("/etc/passwd") *bold* _em_ $x^2$ \\ `raw` <tag> "quoted" ‘curly’'
HOSTILE = MARKUP + " 👍🩺 שלום مرحبا //no /*no*/ = h"


def test_hostile_notes_print_as_typed(pdftotext):
    stay = world.make_stay("T-102")
    world.add_gases(stay, 2)
    long_note = HOSTILE + " | " + " ".join(f"word{n}" for n in range(700)) + " " + "x" * 900
    assert len(long_note) > 5000
    record.record(stay, world.nurse(), record.NewEntry(world.START, event=Event.OTHER, note=long_note))
    text = flat(words_of(timeline_pdf(world.order(stay)), pdftotext, "-raw"))
    for piece in (MARKUP, "//no /*no*/ = h", "word699", "👍"):
        assert piece in text
    assert text.count("x") > 900


def test_note_of_one_endless_word_stays_on_the_page():
    stay = world.make_stay("T-103")
    world.add_gases(stay, 1)
    record.record(stay, world.nurse(), record.NewEntry(world.START, event=Event.OTHER, note="W" * 5000))
    assert_inside_the_margins(timeline_pdf(world.order(stay)))


def assert_inside_the_margins(pdf: bytes) -> None:
    """No ink beyond the margins at the sides (1.5 cm), nor near the lower edge."""
    with tempfile.TemporaryDirectory() as folder:
        subprocess.run(["pdftoppm", "-r", "50", "-gray", "-png", "-", f"{folder}/p"], input=pdf, check=True)
        for file in sorted(Path(folder).glob("*.png")):
            page = Image.open(file).convert("L")
            edge, foot = int(13.5 / 25.4 * 50), int(8 / 25.4 * 50)
            width, height = page.size
            for strip in ((width - edge, 0, width, height), (0, 0, edge, height), (0, height - foot, width, height)):
                assert page.crop(strip).getextrema()[0] > 200, file.name


@pytest.mark.parametrize("case", ["none", "one", "no flow", "story", "many"])
def test_each_case_gives_a_sensible_document(case, pdftotext):
    stay = world.make_stay("T-104")
    if case == "one":
        world.add_gases(stay, 1)
    elif case == "no flow":
        world.add_gases(stay, 6, drop=("cardiac_output",))
    elif case == "story":
        world.add_story(stay)
    elif case == "many":
        world.add_gases(stay, 300, every=0.5)
    data = timeline_pdf(world.order(stay))
    text = flat(words_of(data, pdftotext))
    assert_inside_the_margins(data)
    assert not re.search(r"\bnan\b|\bNone\b|\binf\b", text)
    expected = {
        "none": "No entries in this span.", "one": "Two arterial gases with haemoglobin are needed",
        "no flow": "Change ledger of CaO2", "story": "Change ledger of DO2I", "many": "300 in the span",
    }  # fmt: skip
    assert expected[case] in text


@pytest.mark.slow
def test_two_thousand_entries():
    stay = world.make_stay("T-105")
    world.add_gases(stay, 2000, every=0.25)
    pdf = pikepdf.open(io.BytesIO(timeline_pdf(world.order(stay))))
    assert 40 < len(pdf.pages) < 250


def test_letter_paper():
    stay = world.make_stay("T-106", paper="us-letter")
    pdf = pikepdf.open(io.BytesIO(timeline_pdf(world.order(stay))))
    assert [round(float(v)) for v in pdf.pages[0].MediaBox] == [0, 0, 612, 792]


def test_span_keeps_values_carried_from_before_it():
    stay = world.make_stay("T-107")
    world.add_gases(stay, 1)
    later = {k: v for k, v in world.gas(0, 1).items() if k != "hb"}
    when = world.START + timedelta(hours=2)
    record.record(stay, world.nurse(), record.NewEntry(when, Site.ARTERIAL, later))
    order = world.order(stay, since=world.START + timedelta(hours=1))
    rows = timeline(order, "0" * 64)["entries"]["rows"]
    assert len(rows) == 1
    assert ["10.5", "carried"] in rows[0]


def test_same_order_same_bytes(stay):
    order = world.order(stay)
    assert timeline_pdf(order) == timeline_pdf(replace(order))


def test_printing_is_audited(stay):
    timeline_pdf(world.order(stay), actor="dr.reader")
    event = AuditEvent.objects.filter(action="printed").get()
    assert (event.actor, event.subject, event.unit) == ("dr.reader", "T-100", "Unit North")


@pytest.mark.parametrize("deidentify", [False, True])
def test_decimal_comma_and_kilopascal(pdftotext, deidentify):
    stay = world.make_stay("T-108", decimal_comma=True, units={"po2": "kPa"})
    world.add_gases(stay, 3)
    payload = timeline(world.order(stay, deidentify=deidentify), "0" * 64)
    head = payload["entries"]["head"]
    assert "PO2\nkPa" in head
    column = head.index("PO2\nkPa")
    assert [row[column] for row in payload["entries"]["rows"]] == ["12,8", "11,5", "10,1"]
    numbers = json.dumps([row[2:] for row in payload["entries"]["rows"]], ensure_ascii=False)
    assert not re.search(r"\d\.\d", numbers)


def test_widest_table_stays_inside_the_margins(pdftotext):
    """Every quantity measured, long names of people, every mark."""
    stay = world.make_stay("T-115")
    every = {
        "so2_calculated": 0.97, "o2hb": 0.95, "sulfhb": 0.001, "bicarbonate": 24.0, "oxygen_flow": 40.0, "peep": 10.0,
        "mean_airway_pressure": 15.0, "respiratory_rate": 20.0, "cardiac_index": 2.8, "vo2_measured": 240.0,
        "heart_rate": 90.0, "mean_arterial_pressure": 70.0, "barometric_pressure": 750.0,
    }  # fmt: skip
    long_name = User.objects.create_user("wilhelmina.featherstonehaugh-cholmondeley")
    for n in range(4):
        new = record.NewEntry(
            world.START + timedelta(hours=n), Site.ARTERIAL, world.gas(n, 4) | every, note="x", source="hl7v2",
            event=Event.DEVICE_CHANGE,
        )  # fmt: skip
        record.record(stay, long_name, new)
        pair = {"ph": 7.3, "pco2": 46.0, "po2": 36.0, "so2": 0.68, "lactate": 12.4}
        record.record(stay, long_name, record.NewEntry(new.time, Site.CENTRAL_VENOUS, pair))
    order = world.order(stay)
    payload = timeline(order, "0" * 64)
    assert {name.split("\n")[0] for name in payload["entries"]["head"]} >= {"PO2", "CI", "DO2I", "Qs/Qt", "Marks"}
    told = {name.split("\n")[0] for table in payload["other"] for name in table["head"]}
    assert {"HR", "MAP", "PB", "DO2", "VO2I", "P50"} <= told
    assert_inside_the_margins(timeline_pdf(order))


def test_text_of_the_charts_can_be_selected(stay, pdftotext):
    order = world.order(stay)
    words = set(words_of(timeline_pdf(order), pdftotext, "-raw").split())
    for chart in timeline(order, "0" * 64)["charts"].values():
        for axis in (chart["x"], *chart["y"]):
            assert set(axis["title"].split()) <= words, axis["title"]
            assert {word for _, text in axis["ticks"] for word in text.split()} <= words, axis["title"]
        named = [s["name"] for s in chart["series"] if s["legend"]]
        assert len(named) == 1 or {word for name in named for word in name.split()} <= words


def test_rows_are_whole_and_heads_repeat(pdftotext):
    """Every page of the table starts with its head, and a row that wraps is never cut by the page's end."""
    stay = world.make_stay("T-111")
    world.add_gases(stay, 120, every=1.0)
    for n in range(60):
        note = record.NewEntry(
            world.START + timedelta(hours=n, minutes=30), event=Event.TRANSFUSION, event_amount=2, note="x"
        )
        record.record(stay, world.nurse(), note)
    order = world.order(stay)
    data = timeline_pdf(order)
    pages = len(pikepdf.open(io.BytesIO(data)).pages)
    found = 0
    for n in range(1, pages + 1):
        lines = [line.strip() for line in words_of(data, pdftotext, "-f", str(n), "-l", str(n), "-layout").splitlines()]
        rows = [line for line in lines if re.match(r"2026-\d\d-\d\d \d\d:\d\d CES?T +(arterial|reading)", line)]
        if rows and any(line.startswith("Time") and "Sample" in line for line in lines):
            found += len(rows)
            head = next(i for i, line in enumerate(lines) if line.startswith("Time") and "Sample" in line)
            body = [line for line in lines[head + 1 :] if line]
            first = next(line for line in body if re.match(r"\d{4}-", line))
            # Between head and first row only units may stand: the rest of a cut row would stand there.
            assert not any(re.search(r"units|note|transfusion", line) for line in body[: body.index(first)])
    assert found >= 180


def test_all_findings_at_once(pdftotext):
    stay = world.make_stay("T-112")
    add = lambda hours, **values: record.record(  # noqa: E731
        stay, world.nurse(), record.NewEntry(world.START + timedelta(hours=hours), Site.ARTERIAL, values)
    )
    add(-5, ph=7.4, pco2=40.0, po2=90.0, hb=10.0, fio2=0.4)  # before admission
    add(0, ph=7.4, pco2=40.0, po2=290.0, hb=10.0, fio2=0.3, bicarbonate=34.0)  # above alveolar; three values disagree
    add(1, ph=7.38, pco2=5.2, po2=11.5, hb=10.0, so2=0.96, fio2=0.4)  # kPa as mmHg
    add(2, ph=7.33, pco2=47.0, po2=39.0, hb=10.0, so2=0.71, fio2=0.3)  # a venous sample
    add(3, ph=7.4, pco2=40.0, po2=95.0, hb=14.9, so2=0.97, spo2=0.85, fio2=0.4)  # jump; finger against sample
    add(4, ph=7.4, pco2=40.0, po2=95.0, hb=14.9, so2=0.97, o2hb=0.97, cohb=0.28, methb=0.1, fio2=0.4)  # sum above all
    add(4, ph=7.4, pco2=40.0, po2=95.0, hb=14.9, so2=0.97, o2hb=0.97, cohb=0.28, methb=0.1, fio2=0.4)  # twice
    add(5, ph=6.85, pco2=140.0, po2=15.0, hb=3.0, so2=0.1, lactate=26.0, fio2=1.0, temperature=29.0)  # all unlikely
    add(24 * 365 * 30, ph=7.4, pco2=40.0, po2=90.0)  # in the future
    order = world.order(stay, until=world.START + timedelta(days=366 * 40))
    table = timeline(order, "0" * 64)["findings"]
    assert len({row[2].split()[0] for row in table["rows"]}) >= 8
    text = flat(words_of(timeline_pdf(order), pdftotext, "-raw"))
    for row in table["rows"]:
        assert all(word in text for word in row[2].split())
    assert_inside_the_margins(timeline_pdf(order))


def test_impossible_stored_value_is_told_and_not_used(pdftotext):
    stay = world.make_stay("T-114")
    values = world.gas(0, 1) | {"po2": 900.0}
    record.record(stay, world.nurse(), record.NewEntry(world.START, Site.ARTERIAL, values))
    payload = timeline(world.order(stay), "0" * 64)
    assert ["900", "impossible"] in payload["entries"]["rows"][0]
    assert not any("P/F" in name for name in payload["entries"]["head"])
    assert "900" in flat(words_of(timeline_pdf(world.order(stay)), pdftotext))


def test_time_mistyped_into_the_future_is_not_left_out():
    stay = world.make_stay("T-116")
    world.add_gases(stay, 2)
    later = timezone.now() + timedelta(days=400)
    record.record(stay, world.nurse(), record.NewEntry(later, Site.ARTERIAL, world.gas(0, 1)))
    payload = timeline(world.order(stay), "0" * 64)
    assert len(payload["entries"]["rows"]) == 3
    assert any("ahead of now" in row[2] for row in payload["findings"]["rows"])


def test_span_without_entries():
    stay = world.make_stay("T-113")
    world.add_gases(stay, 2)
    order = world.order(stay, since=world.START + timedelta(days=3), until=world.START + timedelta(days=4))
    payload = timeline(order, "0" * 64)
    assert payload["entries"]["rows"] == []
    assert timeline_pdf(order).startswith(b"%PDF-")


class TestDeidentified:
    def test_nothing_identifies(self, pdftotext):
        stay = world.make_stay("T-109")
        world.add_story(stay)
        data = timeline_pdf(world.order(stay, deidentify=True))
        text = words_of(data, pdftotext)
        body = text + data.decode("latin1")
        year = str(timezone.now().year)
        for told in ("T-109", "P-T-109", "Unit North", "bed N109", "anna.recorder", "dr.reader", "drain filled",
                     "wrong slip", "2026-03", "91 years", "Zurich"):  # fmt: skip
            assert told not in body, told
        with pikepdf.open(io.BytesIO(data)) as pdf:
            told = str(dict(pdf.docinfo)) + pdf.open_metadata().__str__()
        assert year not in told
        assert "over 89 years" in text
        assert "Time from admission (h)" in text
        assert "2.0 h" in text

    def test_corrections_are_still_told(self, pdftotext):
        stay = world.make_stay("T-110")
        world.add_story(stay)
        text = flat(words_of(timeline_pdf(world.order(stay, deidentify=True)), pdftotext))
        assert "Hb 9.2 g/dL → 9.1 g/dL" in text
        assert "withheld" in text


def test_a_step_is_judged_with_the_share_that_this_was_concluded_from(stay):
    judged = Judged(world.order(stay))
    by_step = {item.step: item for item in judged.verdict.evidence}
    rows = {row[0]: row for row in judged.ledger_table()["rows"] if isinstance(row[0], str)}
    for step in ("lung", "haemoglobin", "function"):
        told = re.fullmatch(r"(no )?loss beyond noise(, below 5 %)? \(([±−+]?\d+) ± (\d+) %\)", rows[step][3])
        assert told, rows[step][3]
        assert float(told[3].replace("−", "-").replace("±", "")) == pytest.approx(100 * by_step[step].share, abs=0.5)
        assert (told[1] is None) == by_step[step].real


def test_a_gas_in_doubt_is_told_before_the_verdict():
    stay = world.make_stay("T-140")
    venous = {k: v for k, v in world.gas(0, 2).items() if k not in ("spo2", "o2hb")}
    looks = venous | {"po2": 39.0, "so2": 0.71, "pco2": 47.0, "ph": 7.33}
    record.record(stay, world.nurse(), record.NewEntry(world.START, Site.ARTERIAL, looks))
    later = world.START + timedelta(hours=4)
    record.record(stay, world.nurse(), record.NewEntry(later, Site.ARTERIAL, world.gas(1, 2)))
    said = Judged(world.order(stay)).sentences()
    assert len(said) == 3
    assert "with which the comparison starts, is in doubt (it looks venous" in said[0]
