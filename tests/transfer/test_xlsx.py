"""Spreadsheets: several sheets, titles, merged cells, blank lines, footers, dates as dates and as numbers, percent."""

import io
import zipfile
from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import openpyxl
import pytest

from worksheet.transfer import limits
from worksheet.transfer.rows import Refused
from worksheet.ward.models import Entry

ZURICH = ZoneInfo("Europe/Zurich")
HEADER = ["Patient ID", "Time", "Site", "pO2 (kPa)", "sO2 (%)", "Hb (g/L)"]


def said(refusal):
    """A refusal is a sentence."""
    assert len(str(refusal)) > 10
    assert str(refusal).rstrip().endswith((".", "?"))


def saved(book):
    out = io.BytesIO()
    book.save(out)
    return out.getvalue()


def sheet(*rows):
    book = openpyxl.Workbook()
    for row in rows:
        book.active.append(row)
    return book


def test_a_sheet_with_a_title_blank_lines_and_a_footer(bring):
    book = sheet(
        ["Gases of ward 7"],
        [],
        HEADER,
        ["K-1", datetime(2026, 2, 11, 5, 40), "arterial", 12.1, 97, 69],
        [],
        ["K-1", datetime(2026, 2, 11, 6, 40), "arterial", 12.0, 96, 68],
        ["Total", 2],
    )
    seen = bring(saved(book), "xlsx", zone=ZURICH, confirmed=True)
    assert seen.counts() == {"new": 2, "not understood": 1}
    entry = Entry.objects.order_by("time").first()
    assert entry.time == datetime(2026, 2, 11, 4, 40, tzinfo=UTC)
    assert entry.po2 == pytest.approx(12.1 * 7.500617)
    assert seen.rows[0].place == "sheet 'Sheet', row 4"


def test_dates_without_zone_are_asked(bring):
    book = sheet(HEADER, ["K-1", datetime(2026, 2, 11, 5, 40), "arterial", 12.1, 97, 69])
    with pytest.raises(Refused, match="no time zone"):
        bring(saved(book), "xlsx")


def test_dates_as_numbers_and_percent_formats(bring):
    book = sheet(HEADER, ["K-1", 46064.236111111, "arterial", 12.1, 0.97, 69])
    book.active["E2"].number_format = "0%"
    bring(saved(book), "xlsx", zone=ZURICH, confirmed=True)
    entry = Entry.objects.get()
    assert entry.time == datetime(2026, 2, 11, 4, 40, tzinfo=UTC)
    assert entry.so2 == pytest.approx(0.97)


def test_merged_identifiers_are_filled_down_and_merged_values_are_not(bring):
    when = [datetime(2026, 2, 11, h, 40) for h in (5, 6)]
    book = sheet(HEADER, ["K-1", when[0], "arterial", 12.1, 97, 69], [None, when[1], "arterial", 12.0, 96, None])
    book.active.merge_cells("A2:A3")
    book.active.merge_cells("F2:F3")
    seen = bring(saved(book), "xlsx", zone=ZURICH, confirmed=True)
    assert seen.counts() == {"new": 2}
    first, second = Entry.objects.order_by("time")
    assert first.stay_id == second.stay_id
    assert (first.hb, second.hb) == (pytest.approx(6.9), None)


def test_all_sheets_are_read_and_those_without_header_named(bring):
    book = sheet(HEADER, ["K-1", "2026-02-11T05:40:00Z", "arterial", 12.1, 97, 69])
    other = book.create_sheet("Second")
    other.append(HEADER)
    other.append(["K-2", "2026-02-11T05:40:00Z", "arterial", 12.1, 97, 69])
    book.create_sheet("Notes").append(["nothing here"])
    seen = bring(saved(book), "xlsx")
    assert seen.counts() == {"new": 2}
    assert any("'Notes' has no header row" in note for note in seen.parsed.notes)


def test_formulas_are_texts_without_a_value(bring):
    book = sheet(["Patient ID", "Time", "ph"], ["K-1", "2026-02-11T05:40:00Z", "=1+6"])
    assert bring(saved(book), "xlsx").counts() == {"not understood": 1}


def with_part(data, name, content, compress=zipfile.ZIP_DEFLATED):
    source, out = zipfile.ZipFile(io.BytesIO(data)), io.BytesIO()
    with zipfile.ZipFile(out, "w", compress) as target:
        for item in source.infolist():
            target.writestr(item.filename, content if item.filename == name else source.read(item.filename))
    return out.getvalue()


def test_a_bomb_is_refused_before_it_is_unpacked(bring):
    data = saved(sheet(HEADER))
    bomb = with_part(data, "xl/worksheets/sheet1.xml", b"0" * 80_000_000)
    assert len(bomb) < 200_000
    with pytest.raises(Refused, match="unpacks to"):
        limits.check_zip(bomb)
    with pytest.raises(Refused, match="unpacks to"):
        bring(bomb, "xlsx")


def test_xml_entities_are_refused(bring):
    data = saved(sheet(HEADER, ["K-1", "2026-02-11T05:40:00Z", "arterial", 12.1, 97, 69]))
    evil = b'<?xml version="1.0"?><!DOCTYPE x [<!ENTITY a "aaaa">]><worksheet>&a;</worksheet>'
    with pytest.raises(Refused, match="XML entities"):
        bring(with_part(data, "xl/worksheets/sheet1.xml", evil), "xlsx")


@pytest.mark.parametrize(
    "part", ["xl/workbook.xml", "xl/worksheets/sheet1.xml", "[Content_Types].xml", "xl/styles.xml"]
)
@pytest.mark.parametrize("content", [b"", b"<a", b"<a/>", b"\x00\x01\x02"])
def test_damaged_parts_are_one_sentence(bring, part, content):
    data = saved(sheet(HEADER, ["K-1", "2026-02-11T05:40:00Z", "arterial", 12.1, 97, 69]))
    try:
        seen = bring(with_part(data, part, content), "xlsx", confirmed=True)
    except Refused as refusal:
        said(refusal)
    else:
        assert sum(seen.counts().values()) == len(seen.rows)


def test_other_archives_and_wrong_names_are_refused():
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w") as target:
        target.writestr("a.txt", "x")
    with pytest.raises(Refused, match="an archive, not a spreadsheet"):
        limits.check_zip(out.getvalue())
    with pytest.raises(Refused, match=r"old \.xls kind"):
        limits.format_of("a.xlsx", b"\xd0\xcf\x11\xe0rest")
    with pytest.raises(Refused, match="the content is none"):
        limits.format_of("a.xlsx", b"stay,time")
    with pytest.raises(Refused, match="PDF"):
        limits.format_of("a.csv", b"%PDF-1.4")
