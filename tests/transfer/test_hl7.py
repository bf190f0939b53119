"""HL7 v2 in: units, zones, status, odd values, and messages that are refused with the reason."""

from datetime import UTC, datetime
from pathlib import Path
from zoneinfo import ZoneInfo

import pytest

from worksheet.transfer.rows import Refused
from worksheet.ward.models import Entry

DATA = Path(__file__).parent.parent / "data" / "transfer" / "hl7v2"
ZURICH = ZoneInfo("Europe/Zurich")
KPA = 7.500617
MSH = "MSH|^~\\&|POC|LAB|HIS|U|20260211060000||ORU^R01|{id}|P|2.5.1"
PID = "PID|||K-9^^^UNIT7^MR||Probe^Eins||19580415|M"


def message(*segments, msh=MSH, id="X1", pid=PID):
    return "\r".join([msh.replace("{id}", id), pid, *segments]) + "\r"


def gas(*results, when="20260211054000", obr="OBR|1|||24336-0^Gas panel - Arterial blood^LN|||{when}"):
    return [obr.replace("{when}", when), *(f"OBX|{n}|{r}" for n, r in enumerate(results, 1))]


def file(name):
    return next(DATA.glob(f"{name}-*.hl7")).read_bytes()


@pytest.fixture
def bring7(bring):
    return lambda data, **more: bring(data, "hl7v2", **{"zone": ZURICH, **more})


def test_kpa_without_a_unit_on_ph_and_names_in_utf8(bring7):
    assert bring7(file("01")).counts() == {"new": 5}
    entry = Entry.objects.get()
    assert (entry.ph, entry.bicarbonate, entry.site) == (7.39, 23, 1)
    assert entry.pco2 == pytest.approx(5.2 * KPA)
    assert entry.po2 == pytest.approx(12.4 * KPA)
    assert entry.so2 == pytest.approx(0.98)
    assert entry.time == datetime(2026, 2, 10, 18, 20, tzinfo=UTC)
    assert entry.typed["po2"] == {"text": "12.4", "unit": "kPa"}
    assert entry.typed["ph"] == {"text": "7.39", "unit": ""}


def test_ucum_components_8859_1_and_a_code_of_oxygen_content_labelled_lactate(bring7):
    seen = bring7(file("02"))
    assert seen.counts() == {"new": 3, "conflict": 1}
    assert "59274-1 means arterial oxygen content, but it is labelled lactate" in seen.rows[3].reason
    entry = Entry.objects.get()
    assert (entry.pco2, entry.po2, entry.lactate) == (42, 89, None)
    assert entry.time == datetime(2026, 2, 11, 0, 5, tzinfo=UTC)  # when it was drawn, not when it was run


def test_a_code_that_contradicts_its_name_is_a_conflict_not_a_saturation(bring7):
    seen = bring7(file("03"))
    assert [r.fate for r in seen.rows] == ["new", "new", "new", "conflict", "new"]
    entry = Entry.objects.get()
    assert (entry.so2_calculated, entry.so2, entry.lactate) == (None, None, None)
    assert entry.spo2 == pytest.approx(0.97)  # 20564-1, labelled SpO2


def test_preliminary_then_corrected(bring7):
    seen = bring7(file("04"))
    assert seen.counts() == {"new": 2, "corrects": 2}
    entry = Entry.objects.current().get()
    assert (entry.po2, entry.ph) == (85, 7.25)
    assert entry.replaces.po2 == 58
    assert "status" not in entry.typed["ph"]  # final now
    assert entry.replaces.typed["ph"]["status"] == "preliminary"
    assert "First value withdrawn: air bubble" not in (entry.replaces.reason or "")
    assert bring7(file("04")).counts() == {"same": 4}
    assert Entry.objects.count() == 2


def test_above_the_range_text_and_attachment(bring7):
    seen = bring7(file("05"))
    assert [r.fate for r in seen.rows] == ["new", "invalid", "not understood", "not understood"]
    assert "no result can be obtained ('clotted', status X)" in seen.rows[1].reason
    assert "attachment" in seen.rows[3].reason
    entry = Entry.objects.get()
    assert (entry.po2, entry.typed["po2"]["comparator"]) == (500, ">")


def test_characters_of_8859_1(bring7):
    raw = message(*gas("NM|2703-7^pO2 gemäß^LN||89|mm[Hg]|||||F"), msh=MSH + "||||||8859/1").encode("latin-1")
    assert bring7(raw).counts() == {"new": 1}


@pytest.mark.parametrize("version", ["2.3", "2.3.1", "2.4", "2.5", "2.5.1", "2.6", "2.7", "2.8"])
def test_versions(bring7, version):
    assert bring7(message(*gas("NM|2744-1^pH^LN||7.3||||||F"), msh=MSH.replace("2.5.1", version))).counts() == {
        "new": 1
    }


@pytest.mark.parametrize(
    "msh,words",
    [
        (MSH.replace("2.5.1", "3.0"), "version 3.0 is not taken"),
        (MSH.replace("ORU^R01", "ADT^A01"), "type ADT^A01 are not taken"),
        (MSH.replace("|P|", "|T|"), "training or test"),
        (MSH.replace("{id}", ""), "no control id"),
    ],
)
def test_messages_of_another_kind_are_refused(bring7, msh, words):
    seen = bring7(message(*gas("NM|2744-1^pH^LN||7.3||||||F"), msh=msh))
    assert seen.counts() == {"invalid": 1}
    assert words in seen.rows[0].reason


@pytest.mark.parametrize(
    "result,fate,words",
    [
        ("NM|2703-7^pO2^LN||12.4||||||F", "not understood", "the unit is missing (mmHg or kPa?)"),
        ("NM|2703-7^pO2^LN||12.4|furlong|||||F", "not understood", "the unit 'furlong' is not known"),
        ("NM|2703-7^pO2^LN||high|kPa|||||F", "invalid", "'high' is not a number"),
        ("NM|2703-7^pO2^LN||12.4|kPa|||||Q", "not understood", "the status 'Q' is not known"),
        ("NM|2703-7^pO2^LN||900|kPa|||||F", "invalid", "is impossible"),
        ("NM|2951-2^Sodium^LN||140|mmol/L|||||F", "not understood", "2951-2"),
        ("NM|NA^Natrium^L||140|mmol/L|||||F", "not understood", "NA (Natrium)"),
        ("NM|2703-7^pO2^LN||12.4~12.6|kPa|||||F", "not understood", "several values"),
        ("SN|2703-7^pO2^LN||10^-^12|kPa|||||F", "not understood", "a range or ratio"),
    ],
)
def test_results_that_are_not_stored_have_a_reason(bring7, result, fate, words):
    seen = bring7(message(*gas(result)))
    assert seen.rows[0].fate == fate
    assert words in seen.rows[0].reason
    assert not Entry.objects.exists()


def test_structured_numbers_keep_their_comparator(bring7):
    bring7(message(*gas("SN|2703-7^pO2^LN||>^500|mm[Hg]|||||F")))
    assert Entry.objects.get().typed["po2"]["comparator"] == ">"


def test_a_message_time_with_offset_holds_for_its_other_times(bring7):
    bring7(message(*gas("NM|2744-1^pH^LN||7.3||||||F"), msh=MSH.replace("20260211060000", "20260211060000+0530")))
    assert Entry.objects.get().time == datetime(2026, 2, 11, 0, 10, tzinfo=UTC)


def test_the_doubled_hour_waits(bring7):
    seen = bring7(message(*gas("NM|2744-1^pH^LN||7.3||||||F", when="20251026023000")))
    assert seen.rows[0].fate == "invalid"
    assert "comes twice" in seen.rows[0].reason


def test_specimen_segments_and_venous_samples(bring7):
    segments = gas(
        "NM|11556-8^pO2^LN||38|mm[Hg]|||||F", "NM|20564-1^sO2^LN||68|%|||||F", obr="OBR|1|||BGA^Blood gas^L|||{when}"
    )
    spm = "SPM|1|^V-77||BLDMV^Mixed venous blood^HL70487|||||||||||||20260211053500"
    assert bring7(message(*segments, spm)).counts() == {"new": 2}
    entry = Entry.objects.get()
    assert (entry.site, entry.sample, entry.po2, entry.so2) == (2, "V-77", 38, pytest.approx(0.68))
    assert entry.time == datetime(2026, 2, 11, 4, 35, tzinfo=UTC)


def test_a_withdrawn_result(bring7):
    bring7(message(*gas("NM|2703-7^pO2^LN||89|mm[Hg]|||||F", "NM|2744-1^pH^LN||7.3||||||F")))
    seen = bring7(message(*gas("NM|2703-7^pO2^LN||89|mm[Hg]|||||W"), id="X2"))
    assert seen.counts() == {"withdrawn": 1}
    assert Entry.objects.current().get().po2 is None


def test_patients_by_identifier_never_by_name(bring7, stay):
    other = message(*gas("NM|2744-1^pH^LN||7.3||||||F"), pid="PID|||^^^UNIT7^MR||K-2041^Eins")
    assert bring7(other, create=False).counts() == {"unmatched": 1}
    stay.patient.birth_date = datetime(1940, 1, 1).date()
    stay.patient.save()
    wrong = message(*gas("NM|2744-1^pH^LN||7.3||||||F"), pid=PID.replace("K-9", "K-2041"))
    seen = bring7(wrong, create=False)
    assert seen.counts() == {"unmatched": 1}
    assert "birth date" in seen.rows[0].reason


@pytest.mark.parametrize("data", [b"hello\r", b"PID|1\r", b"\x0b\x1c\r"])
def test_files_without_a_message_are_one_sentence(bring7, data):
    with pytest.raises(Refused, match="MSH"):
        bring7(data)


def test_batch_envelopes_frames_and_line_ends(bring7):
    one = message(*gas("NM|2744-1^pH^LN||7.3||||||F")).replace("\r", "\r\n")
    two = message(*gas("NM|2744-1^pH^LN||7.2||||||F", when="20260211064000"), id="X2").replace("\r", "\n")
    framed = "FHS|^~\\&\r\nBHS|^~\\&\r\n\x0b" + one + "\x1c\r\n" + two + "BTS|2\nFTS|1\n"
    assert bring7(framed).counts() == {"new": 2}


def test_escapes_and_broken_lines(bring7):
    text = message(*gas("NM|2744-1^pH \\T\\ more^LN||7.3||||||F"), "NTE|1||first\nsecond line \\.br\\ third")
    seen = bring7(text)
    assert seen.counts() == {"new": 1}
    assert Entry.objects.get().note.startswith("first second line")
