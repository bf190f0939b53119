"""The unit review: who is getting worse beyond noise comes first, and stale and missing data stand out in words."""

import re
from datetime import timedelta

import pytest
from django.db import connection
from django.test.utils import CaptureQueriesContext
from django.urls import reverse
from django.utils import timezone

from tests.review.wards import add_gas, counted, fill, make_stay, make_unit, make_user
from worksheet.oxygen.readings import Event
from worksheet.ward import record
from worksheet.ward.models import Entry, ReviewMark, Role

pytestmark = pytest.mark.django_db


@pytest.fixture
def ward(client):
    """A unit and a nurse who is logged in."""
    unit = make_unit()
    nurse = make_user(unit)
    client.force_login(nurse)
    return unit, nurse, client


def page(client, unit, query=""):
    answer = client.get(reverse("unit_review", args=[unit.slug]) + query)
    assert answer.status_code == 200
    return answer.content.decode()


def order(text):
    return re.findall(r'id="bed-\d+".*?</span> (W-\d\d)</a>', text, flags=re.DOTALL)


def bed(text, reference):
    return next(part for part in re.findall(r"<tbody.*?</tbody>", text, flags=re.DOTALL) if reference in part)


def five_stories(unit, nurse):
    steady, bleeding, slipping, old, odd = (make_stay(unit, n) for n in range(1, 6))
    for ago in (10, 5, 0.5):
        add_gas(steady, nurse, ago)
    for ago, hb in ((10, 10.5), (5, 8.0), (0.5, 6.0)):
        add_gas(bleeding, nurse, ago, hb=hb)
    for ago, output in ((10, 5.4), (5, 4.6), (0.5, 3.6)):
        add_gas(slipping, nurse, ago, cardiac_output=output)
    for ago in (12, 7.6):
        add_gas(old, nurse, ago)
    for ago in (10, 5):
        add_gas(odd, nurse, ago)
    add_gas(odd, nurse, 0.5, po2=390.0)


def test_worst_real_deterioration_first_then_stale_then_contradictory_then_unchanged(ward):
    unit, nurse, client = ward
    five_stories(unit, nurse)
    text = page(client, unit, "?window=12")
    assert order(text) == ["W-02", "W-03", "W-04", "W-05", "W-01"]
    assert "2 worse beyond noise" in text
    assert "1 stale (last gas over 6 h)" in text
    assert "1 contradictory" in text


def test_a_row_says_supply_change_step_and_what_is_missing(ward):
    unit, nurse, client = ward
    five_stories(unit, nurse)
    text = page(client, unit, "?window=12")
    worst = bed(text, "W-02")
    assert "▼ −4" in worst  # 6.0 of 10.5 g/dL are left: a fall of about 43 %
    assert re.search(r'class="failed">.*haemoglobin', worst)
    assert "Missing" in worst
    assert "venous sample" in worst
    assert "stale, 7 h" in bed(text, "W-04")
    assert "within noise" in bed(text, "W-01")
    assert "Contradictory" in bed(text, "W-05")


def test_filter_by_step(ward):
    unit, nurse, client = ward
    five_stories(unit, nurse)
    assert order(page(client, unit, "?window=12&step=flow")) == ["W-03"]
    nothing = page(client, unit, "?window=12&step=lung")
    assert "In no bed is lung the step that failed" in nothing


def test_without_flow_content_is_shown_and_flow_is_named_as_missing(ward):
    unit, nurse, client = ward
    stay = make_stay(unit, 1)
    add_gas(stay, nurse, 1, cardiac_output=None)
    row = bed(page(client, unit), "W-01")
    assert "CaO2 mL/dL" in row
    assert re.search(r"Missing</b> flow", row)


def test_an_empty_unit_says_what_to_do_next(ward):
    unit, _, client = ward
    text = page(client, unit)
    assert "No patient here yet" in text
    assert reverse("stay_new", args=[unit.slug]) in text


def test_another_units_person_gets_404_and_sees_no_patient(ward):
    unit, nurse, client = ward
    add_gas(make_stay(unit, 1), nurse, 1)
    elsewhere = make_unit("other", "Other unit")
    client.force_login(make_user(elsewhere, "bert", Role.LEAD))
    assert client.get(reverse("unit_review", args=[unit.slug])).status_code == 404


@pytest.mark.parametrize("beds", [1, 40])
def test_queries_do_not_grow_with_the_patients(ward, beds):
    unit, nurse, client = ward
    fill(unit, nurse, beds)
    page(client, unit)  # the first page of a login writes when it began
    with CaptureQueriesContext(connection) as queries:
        page(client, unit)
    assert len(counted(queries)) <= 8, counted(queries)


def test_only_entries_in_reach_are_read(ward):
    unit, nurse, client = ward
    stay = make_stay(unit, 1)
    add_gas(stay, nurse, 0.5)
    add_gas(stay, nurse, 24 * 40)
    with CaptureQueriesContext(connection) as queries:
        page(client, unit, "?window=6")
    reads = [sql for sql in counted(queries) if "ward_entry" in sql and "cardiac_output" in sql]
    assert len(reads) == 1
    assert re.search(r'"ward_entry"."time" >= ', reads[0])


def live(client, unit, etag=""):
    headers = {"HX-Request": "true"} | ({"If-None-Match": etag} if etag else {})
    return client.get(reverse("unit_review", args=[unit.slug]), headers=headers)


def frozen(monkeypatch):
    now = timezone.now().replace(second=5)
    monkeypatch.setattr("worksheet.review.window.timezone.now", lambda: now)
    return now


def test_a_poll_without_news_is_304_and_reads_no_entries(ward, monkeypatch):
    unit, nurse, client = ward
    now = frozen(monkeypatch)
    stay = make_stay(unit, 1)
    add_gas(stay, nurse, 0.5)
    first = live(client, unit)
    assert first.status_code == 200
    assert "<html" not in first.content.decode()
    with CaptureQueriesContext(connection) as queries:
        again = live(client, unit, first["ETag"])
    assert again.status_code == 304
    assert not again.content
    assert not [sql for sql in counted(queries) if "cardiac_output" in sql]
    add_gas(stay, nurse, 0.1, hb=7.0)
    assert live(client, unit, first["ETag"]).status_code == 200
    second = live(client, unit)["ETag"]
    ReviewMark.objects.create(stay=stay, user=nurse, at=now)
    assert live(client, unit, second).status_code == 200
    third = live(client, unit)["ETag"]
    monkeypatch.setattr("worksheet.review.window.timezone.now", lambda: now + timedelta(minutes=1))
    assert live(client, unit, third).status_code == 200  # ages are shown in minutes


def test_corrected_and_struck_values_are_not_counted(ward):
    from worksheet.ward import record

    unit, nurse, client = ward
    stay = make_stay(unit, 1)
    add_gas(stay, nurse, 8)
    wrong = add_gas(stay, nurse, 0.5, hb=5.0)
    assert "fell" in page(client, unit, "?window=12")
    record.strike_out(wrong, nurse, "sample of the neighbour")
    assert 'class="bed fell' not in page(client, unit, "?window=12")
    assert Entry.objects.filter(pk=wrong.pk).exists()


def test_units_and_decimal_comma_of_the_reader_hold(ward):
    unit, nurse, client = ward
    nurse.preferences = {"units": {"cao2": "mmol/L"}, "decimal_comma": True}
    nurse.save()
    add_gas(make_stay(unit, 1), nurse, 1, cardiac_output=None)
    row = bed(page(client, unit), "W-01")
    assert "CaO2 mmol/L" in row
    assert re.search(r'class="now">\d,\d', row)


def test_made_up_for_only_where_another_step_really_gained(ward):
    unit, nurse, client = ward
    helped, alone = make_stay(unit, 1), make_stay(unit, 2)
    add_gas(helped, nurse, 10)
    add_gas(helped, nurse, 0.5, hb=8.4, cardiac_output=7.0)
    add_gas(alone, nurse, 10)
    add_gas(alone, nurse, 0.5, hb=9.3)  # beyond its own noise, within that of delivery
    text = page(client, unit, "?window=12")
    assert "made up for" in bed(text, "W-01")
    assert "made up for" not in bed(text, "W-02")
    assert ">haemoglobin</strong>" in bed(text, "W-02")
    assert "supply within noise" in bed(text, "W-02")


def test_a_transfusion_after_the_gas_is_told_and_haemoglobin_asked_for(ward):
    unit, nurse, client = ward
    before, after = make_stay(unit, 1), make_stay(unit, 2)
    for stay, ago in ((before, 3), (after, 0.2)):
        add_gas(stay, nurse, 10)
        add_gas(stay, nurse, 0.5, hb=7.0)
        record.record(stay, nurse, record.NewEntry(timezone.now() - timedelta(hours=ago), event=Event.TRANSFUSION,
                                                   event_amount=1.0))  # fmt: skip
    text = page(client, unit, "?window=12")
    assert "After the gas" not in bed(text, "W-01")
    assert re.search(r"After the gas</b> transfusion \d\d:\d\d: not in these numbers", bed(text, "W-02"))
    assert re.search(r"Measure next</b> haemoglobin \(transfusion \d\d:\d\d, after the gas\)", bed(text, "W-02"))


def test_a_doubt_about_the_gas_compared_with_leads_though_it_lies_before_the_window(ward):
    unit, nurse, client = ward
    stay = make_stay(unit, 1)
    add_gas(stay, nurse, 14, po2=39.0, so2=0.71, pco2=47.0, spo2=None)
    add_gas(stay, nurse, 0.5, spo2=0.85)
    text = bed(page(client, unit, "?window=12"), "W-01")
    led = r"Contradictory</b> The gas compared with \(\d\d:\d\d\): Labelled arterial, but saturation 71.0 %"
    assert re.search(led, text)


def test_what_the_newest_gas_has_too_is_told_of_the_newest(ward):
    unit, nurse, client = ward
    stay = make_stay(unit, 1)
    for ago, cohb in ((14, 0.14), (0.5, 0.28)):
        add_gas(stay, nurse, ago, cohb=cohb)
    text = bed(page(client, unit, "?window=12"), "W-01")
    assert "COHb 28.0 %: SpO2, PaO2" in text
    assert "The gas compared with" not in text


def test_a_value_that_is_not_of_the_newest_gas_says_when_it_was_and_another_day_is_named(ward):
    unit, nurse, client = ward
    bare, full = make_stay(unit, 1), make_stay(unit, 2)
    for stay in (bare, full):
        add_gas(stay, nurse, 47)
        add_gas(stay, nurse, 26, hb=8.0)
        add_gas(stay, nurse, 0.5, hb=None if stay is bare else 6.0)
    text = page(client, unit, "?window=48")
    assert re.search(r'<b class="ask">of \d\d \w{3} \d\d:\d\d</b>', bed(text, "W-01"))
    assert '<b class="ask">of ' not in bed(text, "W-02")
    assert re.search(r"since \d\d \w{3} \d\d:\d\d<", bed(text, "W-02"))


def test_the_count_says_that_a_failed_step_counts_too(ward):
    """A step that failed beyond noise while delivery is within: counted, and the count says so."""
    unit, nurse, client = ward
    stay = make_stay(unit, 1)
    add_gas(stay, nurse, 10)
    add_gas(stay, nurse, 0.5, hb=9.3)
    text = page(client, unit, "?window=12")
    assert "within noise" in bed(text, "W-01")
    assert re.search(r"1 worse beyond noise</strong> \(supply, or a step of it\)", text)


def test_rows_are_drawn_once_for_all_who_watch():
    from worksheet.review import live

    calls = []
    assert live.drawn("a", lambda: calls.append(1) or b"rows") == b"rows"
    assert live.drawn("a", lambda: calls.append(1) or b"other") == b"rows"
    assert live.drawn("b", lambda: calls.append(1) or b"other") == b"other"
    assert len(calls) == 2
    for number in range(200):
        live.drawn(f"mark-{number}", lambda: b"")
    assert len(live._drawn) <= 64
