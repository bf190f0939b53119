"""People's own headers: what is recognised is shown, what is not certain is asked, nothing is assumed silently."""

from datetime import UTC, datetime
from zoneinfo import ZoneInfo

import pytest

from worksheet.transfer import mappings, plan, table
from worksheet.transfer.rows import Refused
from worksheet.ward.models import Entry

ZURICH = ZoneInfo("Europe/Zurich")
GERMAN = (
    "Blutgase Station 7;;;;;;\n"
    "\n"
    "Fallnummer;Datum;Uhrzeit;Probenart;pO2 (kPa);Hämoglobin (g/l);Laktat (mmol/l);sO2 [%]\n"
    "4711;11.02.2026;05:40;arteriell;12,1;69,0;3,6;97\n"
    "\n"
    "4711;11.02.2026;06:40;arteriell;11,9;68,0;3,7;96\n"
    "Summe;2;;;;;;\n"
)


def plan_of(text, saved=None):
    found = table.read(text.encode())
    return found, plan.propose(found, saved)


def test_headers_units_decimal_comma_and_dates_of_a_german_sheet(bring):
    with pytest.raises(Refused, match="no time zone"):
        bring(GERMAN)
    assert not Entry.objects.exists()
    seen = bring(GERMAN, zone=ZURICH, order="dmy", confirmed=True)
    assert seen.counts() == {"new": 2, "not understood": 1}
    entry = Entry.objects.order_by("time").first()
    assert entry.po2 == pytest.approx(12.1 * 7.500617)
    assert entry.hb == pytest.approx(6.9)
    assert entry.lactate == pytest.approx(3.6)
    assert entry.time == datetime(2026, 2, 11, 4, 40, tzinfo=UTC)
    assert entry.typed["po2"] == {"text": "12,1", "unit": "kPa"}
    assert "Numbers have a decimal comma." in seen.parsed.notes


def test_a_unit_that_only_the_values_tell_is_proposed_and_asked(bring):
    text = "patient,time,PaO2,PaCO2\n1,2026-02-11T05:40:00Z,12.1,5.3\n1,2026-02-11T06:40:00Z,11.0,5.1\n"
    with pytest.raises(Refused, match="kPa is proposed"):
        bring(text)
    seen = bring(text, confirmed=True)
    assert seen.counts() == {"new": 2}
    assert Entry.objects.order_by("time").first().po2 == pytest.approx(12.1 * 7.500617)


def test_a_unit_that_nothing_tells_is_asked_and_its_values_are_never_stored(bring):
    # 5 is a likely haemoglobin in g/dL and in mmol/L
    text = "patient,time,Hb,ph\n1,2026-02-11T05:40:00Z,5.0,7.3\n"
    with pytest.raises(Refused, match="its unit is not given, and the values do not tell"):
        bring(text)
    seen = bring("patient,time,Hb,ph\n1,2026-02-11T05:40:00Z,5.0,7.3\n1,2026-02-11T06:40:00Z,5.2,7.3\n", confirmed=True)
    assert seen.counts() == {"new": 2}
    assert "Hb 5.0: the unit is not known; not stored" in seen.rows[0].cautions
    assert not Entry.objects.exclude(hb=None).exists()


def test_contract_columns_whose_values_are_in_another_unit_are_asked(bring):
    rows = "".join(f"A,2026-02-11T0{h}:40:00Z,arterial,12.{h},5.3\n" for h in range(1, 9))
    with pytest.raises(Refused, match="values look like kPa"):
        bring("stay,time,site,po2,pco2\n" + rows)


@pytest.mark.parametrize(
    "header,quantity,unit",
    [
        ("pO2 (kPa)", "po2", "kPa"),
        ("pO2_mmHg", "po2", "mm[Hg]"),
        ("Hb g/dl", "hb", "g/dL"),
        ("HGB [g/L]", "hb", "g/L"),
        ("Temp. (°C)", "temperature", "Cel"),
        ("FiO2 (%)", "fio2", "%"),
        ("Laktat (mmol/l)", "lactate", "mmol/L"),
        ("SpO₂ [%]", "spo2", "%"),
        ("PCO2 [mm[Hg]]", "pco2", "mm[Hg]"),
        ("Cardiac Output, L/min", "cardiac_output", "L/min"),
    ],
)
def test_units_in_headers(header, quantity, unit):
    _, read_as = plan_of(f'stay id;time;"{header}"\n1;2026-02-11T05:40:00Z;1\n')
    column = read_as.columns[2]
    assert column.quantity is not None
    assert (column.quantity.name, column.unit.ucum, column.sure) == (quantity, unit, True)


def test_values_of_two_sites_in_one_line_become_two_entries(bring):
    text = "stay id,time,PaO2 (mmHg),SvO2 (%)\n1,2026-02-11T05:40:00Z,90,62\n"
    seen = bring(text, confirmed=True)
    assert seen.counts() == {"new": 2}
    sites = {e.site: (e.po2, e.so2) for e in Entry.objects.all()}
    assert sites == {1: (90, None), 2: (None, pytest.approx(0.62))}


def test_dates_that_can_be_read_in_two_ways_are_asked(bring):
    text = "stay id,time,ph\n1,03/04/2025 05:40,7.3\n"
    with pytest.raises(Refused, match="day or the month comes first"):
        bring(text, zone=ZURICH)
    bring(text, zone=ZURICH, order="mdy", confirmed=True)
    assert Entry.objects.get().time.astimezone(ZURICH).date().isoformat() == "2025-03-04"


def test_the_doubled_hour_is_asked(bring):
    text = "stay id,time,ph\n1,2025-10-26 02:30,7.3\n"  # the clocks went back from 03:00 to 02:00
    assert "comes twice in Europe/Zurich" in bring(text, zone=ZURICH, confirmed=True).rows[0].reason
    bring(text, zone=ZURICH, fold="later", confirmed=True)
    assert Entry.objects.get().time == datetime(2025, 10, 26, 1, 30, tzinfo=UTC)


def test_the_hour_that_does_not_exist_is_refused(bring):
    seen = bring("stay id,time,ph\n1,2025-03-30 02:30,7.3\n", zone=ZURICH, confirmed=True)
    assert "does not exist in Europe/Zurich" in seen.rows[0].reason


def test_a_confirmed_mapping_is_not_asked_again(bring, unit, nurse):
    text = "patient,time,PaO2,PaCO2\n1,2026-02-11T05:40:00Z,12.1,5.3\n"
    found, read_as = plan_of(text)
    assert read_as.questions
    mappings.save(unit, nurse, found.header, read_as, "", "ward sheet")
    saved = mappings.saved_for(unit, "csv", text.encode())
    assert saved is not None
    assert not plan_of(text, saved)[1].questions
    assert bring(text, saved=saved).counts() == {"new": 1}


def test_a_cell_in_another_unit_than_its_column_is_refused(bring):
    seen = bring("stay id,time,PaO2 (mmHg)\n1,2026-02-11T05:40:00Z,12 kPa\n", confirmed=True)
    assert "names another unit than its column" in seen.rows[0].reason


@pytest.mark.parametrize("text", ["1,234", "1.234,5", "12.5.3", "1e999", "١٢", "0x10", "1_000", "12;3"])
def test_no_number_is_guessed_from_odd_texts(bring, text):
    seen = bring(
        f'stay;time;hb\nA;2026-02-11T05:40:00Z;"{text}"\nA;2026-02-11T06:40:00Z;9.5\nA;2026-02-11T07:40:00Z;9.6\n',
        confirmed=True,
    )
    assert seen.rows[0].fate == "invalid"


def test_time_beside_date_is_the_clock_and_sample_may_be_the_site(bring):
    text = (
        "Patient;Date;Time;Sample;pO2 (kPa);pH\n1;11.02.2026;05:40;arterial;12,1;7,30\n"
        "1;11.02.2026;06:40;venous;5,1;7,28\n"
        "1;11.02.2026;06:50;umbilical;5,1;7,28\nTotal;3\n"
    )
    with pytest.raises(Refused, match="no time zone"):
        bring(text)
    seen = bring(text, zone=ZURICH, order="dmy", confirmed=True)
    assert [r.fate for r in seen.rows] == ["new", "new", "invalid", "not understood"]
    assert [e.site for e in Entry.objects.order_by("time")] == [1, 4]
