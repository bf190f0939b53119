"""CSV in the columns of the batch contract: every row accounted for, bad input named, nothing twice, nothing half."""

from pathlib import Path

import pytest

from worksheet.transfer import pipeline
from worksheet.transfer.rows import Refused
from worksheet.ward.models import AuditEvent, Entry, Stay

DATA = Path(__file__).parent.parent / "data" / "transfer"
GOOD = "stay,time,site,ph,pco2,po2,hb,so2,fio2\nA-1,2026-02-11T05:40:00+01:00,arterial,7.30,40,90,6.9,97,50\n"
HEAD = "stay,time,site,ph,pco2,po2,so2,fio2"


def reasons(seen):
    return [(row.place, row.fate.value, row.reason) for row in seen.rows]


def test_a_row_becomes_an_entry_in_canonical_units_with_what_was_written(bring):
    seen = bring(GOOD)
    assert seen.counts() == {"new": 1}
    entry = Entry.objects.get()
    assert (entry.ph, entry.po2, entry.hb) == (7.30, 90, 6.9)
    assert entry.so2 == pytest.approx(0.97)
    assert entry.fio2 == pytest.approx(0.5)
    assert entry.typed["so2"] == {"text": "97", "unit": "%"}
    assert entry.time.isoformat() == "2026-02-11T04:40:00+00:00"
    assert entry.stay.reference == "A-1"
    assert entry.source == "csv"


def test_the_same_file_twice_changes_nothing(bring):
    bring(GOOD)
    before = list(Entry.objects.values()), AuditEvent.objects.count(), Stay.objects.count()
    assert bring(GOOD).counts() == {"same": 1}
    assert before == (list(Entry.objects.values()), AuditEvent.objects.count(), Stay.objects.count())


def test_one_audit_event_tells_of_a_batch(bring):
    bring(GOOD + "A-1,2026-02-11T06:40:00+01:00,arterial,7.2,40,90,6.9,97,50\n")
    event = AuditEvent.objects.get(action="imported")
    assert event.detail["rows"] == {"new": 2}
    assert event.detail["entries"] == {"new": 2, "stays made": 1}


def test_a_dry_run_stores_nothing(bring):
    assert bring(GOOD, dry_run=True).counts() == {"new": 1}
    assert not Entry.objects.exists()
    assert not Stay.objects.exists()


@pytest.mark.parametrize("name", ["gases-slice.csv", "entries-slice.csv"])
def test_real_files_have_every_row_accounted_for(bring, name):
    data = (DATA / name).read_bytes()
    rows = data.count(b"\n") - 1
    seen = bring(data)
    assert sum(seen.counts().values()) == len(seen.rows) == rows
    assert set(seen.counts()) <= {"new", "invalid"}
    assert Entry.objects.count() == seen.counts()["new"]
    again = bring(data).counts()
    assert again.pop("same") == seen.counts()["new"]
    assert Entry.objects.count() == seen.counts()["new"]


def test_a_refused_constant_of_the_person_does_not_cost_the_gases(bring):
    seen = bring((DATA / "gases-slice.csv").read_bytes())
    spared = [r for r in seen.rows if any("Age 200" in c for c in r.cautions)]
    assert spared
    assert all(r.fate == "new" for r in spared)
    entry = Entry.objects.filter(stay__reference=spared[0].patient.identifier).first()
    assert entry.age is None
    assert entry.typed["age"]["text"] == "200"


BAD = {
    "text in a number field": ("A,2026-02-11T05:40:00+01:00,arterial,acid,40,90,97,50", "pH: 'acid' is not a number"),
    "date in the future": ("A,2031-02-11T05:40:00+01:00,arterial,7.3,40,90,97,50", "is in the future"),
    "saturation of 140": (
        "A,2026-02-11T05:40:00+01:00,arterial,7.3,40,90,140,50",
        "sO2 140 % is impossible (1 to 100.5 %)",
    ),
    "pH of 74": ("A,2026-02-11T05:40:00+01:00,arterial,74,40,90,97,50", "pH 74 is impossible (6.3 to 8.2)"),
    "unknown site": ("A,2026-02-11T05:40:00+01:00,umbilical,7.3,40,90,97,50", "site: 'umbilical' is not known"),
    "broken row": ("A,2026-02-11T05:40:00+01:00,arterial,7.3", "the row is broken: it has 4 cells, the header has 8"),
    "no time": ("A,,arterial,7.3,40,90,97,50", "time: the time is missing"),
    "no stay": (",2026-02-11T05:40:00+01:00,arterial,7.3,40,90,97,50", "stay: it is missing"),
    "no such day": ("A,2026-02-30T05:40:00+01:00,arterial,7.3,40,90,97,50", "does not exist"),
    "no zone": ("A,2026-02-11T05:40:00,arterial,7.3,40,90,97,50", "has no time zone"),
    "open quotation mark": ('A,"2026-02-11T05:40:00+01:00,arterial,7.3,40,90,97,50', "the row is broken"),
}


@pytest.mark.parametrize("what", BAD)
def test_bad_rows_name_row_field_and_reason_and_harm_no_other(bring, what):
    line, reason = BAD[what]
    good = "A,2026-02-11T04:40:00+01:00,arterial,7.3,40,90,97,50"
    late = "A,2026-02-11T06:40:00+01:00,arterial,7.3,40,90,97,50"
    seen = bring(f"{HEAD}\n{good}\n{line}\n{late}\n", confirmed=True)
    fates = reasons(seen)
    bad = [f for f in fates if f[1] == "invalid"]
    assert [f[0] for f in bad] == ["row 3"], fates
    assert reason in bad[0][2]
    assert [f[1] for f in fates] == ["new", "invalid", "new"]
    assert Entry.objects.count() == 2
    assert seen.entries["queued"] == 1


def test_what_a_refused_row_said_waits_in_the_queue(bring, unit):
    bring(f"{HEAD}\nA,2026-02-11T05:40:00+01:00,arterial,74,40,90,97,50\n")
    waiting = unit.queued_rows.get()
    assert waiting.data["raw"]["po2"] == "90"
    assert "pH 74 is impossible" in waiting.reason


def test_the_rest_of_a_row_can_be_kept_on_request(bring):
    seen = bring(f"{HEAD}\nA,2026-02-11T05:40:00+01:00,arterial,74,40,90,97,50\n", keep_rest=True)
    assert seen.counts() == {"new": 1}
    entry = Entry.objects.get()
    assert entry.ph is None
    assert entry.po2 == 90
    assert entry.typed["ph"]["refused"].startswith("pH 74 is impossible")


def test_missing_stays_missing(bring):
    bring("stay,time,site,ph,po2,hb\nA,2026-02-11T05:40:00+01:00,arterial,7.3,,NA\n")
    entry = Entry.objects.get()
    assert (entry.po2, entry.hb) == (None, None)
    assert set(entry.typed) == {"ph"}


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "utf-16-be", "cp1252"])
def test_encodings(bring, encoding):
    text = GOOD.replace("A-1", "Zürich-1") if encoding != "utf-8" else GOOD
    seen = bring(text.encode(encoding))
    assert seen.counts() == {"new": 1}
    assert Entry.objects.get().stay.reference == ("A-1" if encoding == "utf-8" else "Zürich-1")


@pytest.mark.parametrize("delimiter", [";", "\t", "|"])
def test_other_delimiters_are_found_and_told(bring, delimiter):
    seen = bring(GOOD.replace(",", delimiter))
    assert seen.counts() == {"new": 1}
    assert any("separated by a" in note for note in seen.parsed.notes)


@pytest.mark.parametrize("text", [GOOD.replace(",", "#"), "hello world\nthis is no table\n", "a,b,c\n1,2,3\n"])
def test_no_readable_header_is_one_sentence(bring, text):
    with pytest.raises(Refused, match="No header row was found"):
        bring(text)


def test_line_ends_blank_lines_and_footers(bring):
    text = GOOD.replace("\n", "\r\n") + "\r\n\r\nTotal,1,,,,,,,\r\nprinted by the ward\r\n"
    seen = bring(text)
    assert seen.counts() == {"new": 1, "not understood": 2}
    assert "not a row of values" in seen.rows[1].reason


def test_a_comment_with_line_breaks_is_one_row(bring):
    text = 'stay,time,site,ph,note\nA,2026-02-11T05:40:00+01:00,arterial,7.3,"first\nsecond"\n'
    seen = bring(text)
    assert seen.counts() == {"new": 1}
    assert Entry.objects.get().note == "first second"


def test_two_rows_of_one_sample_are_one_entry(bring):
    text = "stay,time,site,ph,po2\nA,2026-02-11T05:40:00Z,arterial,7.3,\nA,2026-02-11T05:40:00Z,arterial,,90\n"
    assert bring(text).counts() == {"new": 2}
    assert Entry.objects.count() == 1
    assert bring(text).counts() == {"same": 2}


def test_two_values_for_one_sample_are_a_conflict(bring):
    text = "stay,time,site,ph\nA,2026-02-11T05:40:00Z,arterial,7.3\nA,2026-02-11T05:40:00Z,arterial,7.2\n"
    seen = bring(text)
    assert [r.fate for r in seen.rows] == ["new", "conflict"]
    assert "two values for one sample: pH 7.3 and 7.2 (row 2)" in seen.rows[1].reason


def test_a_differing_stored_value_is_a_conflict_unless_asked_to_replace_it(bring):
    bring("stay,time,site,ph\nA,2026-02-11T05:40:00Z,arterial,7.3\n")
    later = "stay,time,site,ph\nA,2026-02-11T05:40:00Z,arterial,7.2\n"
    seen = bring(later)
    assert seen.counts() == {"conflict": 1}
    assert seen.rows[0].reason == "pH is 7.3 in the worksheet, 7.2 here"
    assert bring(later, overwrite=True).counts() == {"corrects": 1}
    assert Entry.objects.current().get().ph == 7.2
    assert Entry.objects.current().get().replaces.ph == 7.3
    assert bring(later, overwrite=True).counts() == {"same": 1}


def test_more_values_for_a_stored_sample_complete_it(bring):
    bring("stay,time,site,ph\nA,2026-02-11T05:40:00Z,arterial,7.3\n")
    seen = bring("stay,time,site,ph,lactate\nA,2026-02-11T05:40:00Z,arterial,7.3,2.1\n")
    assert seen.counts() == {"corrects": 1}
    entry = Entry.objects.current().get()
    assert (entry.ph, entry.lactate) == (7.3, 2.1)
    assert "adds Lactate" in entry.reason


def test_a_gas_without_a_site_is_arterial_and_says_so(bring):
    seen = bring("stay,time,site,po2,fio2\nA,2026-02-11T05:40:00Z,,90,40\nA,2026-02-11T06:40:00Z,,,50\n")
    first, second = Entry.objects.order_by("time")
    assert (first.site, second.site) == (1, 0)
    assert "no site given" in first.note
    assert "no site given: read as arterial" in seen.rows[0].cautions


def test_fio2_as_a_fraction_and_saturation_never_rescaled(bring):
    seen = bring(
        "stay,time,site,po2,so2,fio2\nA,2026-02-11T05:40:00Z,arterial,90,,0.5\nA,2026-02-11T06:40:00Z,arterial,90,0.97,50\n"
    )
    assert Entry.objects.get().fio2 == 0.5
    assert seen.rows[1].fate == "invalid"
    assert "sO2 0.97 % is impossible" in seen.rows[1].reason


def test_comparators_are_kept(bring):
    bring("stay,time,site,po2\nA,2026-02-11T05:40:00Z,arterial,>500\n")
    entry = Entry.objects.get()
    assert entry.po2 == 500
    assert entry.typed["po2"]["comparator"] == ">"


def test_unknown_stays_wait_when_they_may_not_be_made(bring, unit):
    seen = bring(GOOD, create=False)
    assert seen.counts() == {"unmatched": 1}
    assert "nobody in this unit has the identifier A-1" in seen.rows[0].reason
    assert unit.queued_rows.get().fate == "unmatched"


def test_dates_shifted_for_deidentification_need_every_row(bring):
    rows = [f"A,21{20 + i}-02-11T05:40:00Z,arterial,7.3" for i in range(12)]
    seen = bring("\n".join(["stay,time,site,ph", *rows]))
    assert seen.counts() == {"new": 12}
    assert seen.parsed.shifted_dates
    mixed = bring("\n".join(["stay,time,site,ph", *rows, "A,2026-02-11T05:40:00Z,arterial,7.3"]))
    assert mixed.counts()["invalid"] == 12


def test_an_interruption_leaves_nothing_behind(bring, monkeypatch):
    def broken(*args, **kwargs):
        raise RuntimeError("power cut")

    monkeypatch.setattr(pipeline.commit, "correct", broken)
    with pytest.raises(RuntimeError):
        bring(GOOD)
    assert not Entry.objects.exists()
    assert not Stay.objects.exists()
