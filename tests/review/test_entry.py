"""The entry form: stored once and right, or shown again with everything that was typed."""

from datetime import timedelta

import pytest
from django.utils import timezone

from worksheet.oxygen.quantities import MEASURED
from worksheet.oxygen.readings import Site
from worksheet.review import slip_words
from worksheet.ward import record
from worksheet.ward.models import AuditEvent, Entry

SCRIPT = {"HTTP_X_WORKSHEET_FORM": "1"}


def page(answer):
    return answer.content.decode()


def test_every_measured_quantity_has_a_field(world):
    html = page(world.client.get(world.url("entry_new")))
    assert all(f'name="{name}"' in html for name in MEASURED if name != "age")


def test_a_slip_is_stored_with_what_was_typed(world):
    answer = world.client.post(world.url("entry_new"), world.gas(po2="11,7", po2_unit="kPa", hb="102", hb_unit="g/L"))
    assert answer.status_code == 302
    entry = Entry.objects.get()
    assert entry.po2 == pytest.approx(11.7 * 7.500617)
    assert entry.hb == pytest.approx(10.2)
    assert entry.so2 == pytest.approx(0.964)
    assert entry.typed["po2"] == {"text": "11,7", "unit": "kPa"}
    assert (entry.site, entry.recorded_by.username, entry.source) == (Site.ARTERIAL, "nurse", "form")
    assert AuditEvent.objects.filter(action="recorded", subject="T-1").count() == 1


def test_a_missing_value_stays_missing(world):
    world.client.post(world.url("entry_new"), world.blank(ph="7.4", po2="90"))
    entry = Entry.objects.get()
    assert [name for name in MEASURED if getattr(entry, name) is not None] == ["ph", "po2"]


@pytest.mark.parametrize(
    ("field", "text", "words"),
    [
        ("ph", "74", "pH 74 is impossible (possible: 6.3 to 8.2)"),
        ("so2", "140", "sO2 140 % is impossible"),
        ("hb", "abc", "Hb: &#x27;abc&#x27; is not a number."),
        ("hb", "102", "As g/L it would be usual"),
        ("so2", "0.97", "As fraction it would be usual"),
        ("so2", "1", "no saturation of living blood"),
        ("fio2", "140", "FiO2 140 % is impossible"),
        ("site", "9", "no sampling site of the list"),
        ("site", "x", "no sampling site of the list"),
        ("site", "", "never assumed"),
        ("date", "2999-01-01", "in the future"),
        ("clock", "later", "24 h clock"),
        ("sample", "x" * 70, "at most 64"),
        ("note", "x" * 2001, "at most 2000"),
    ],
)
def test_what_cannot_be_is_refused_and_stays_in_the_form(world, field, text, words):
    answer = world.client.post(world.url("entry_new"), world.gas(**{field: text}))
    html = page(answer)
    assert answer.status_code == 422
    assert words in html
    assert "Nothing was saved yet" in html
    assert text in html
    assert 'value="10.2"' in html or field == "hb", "the other values stay too"
    assert not Entry.objects.exists()


def test_an_empty_slip_is_no_entry(world):
    assert "at least one value" in page(world.client.post(world.url("entry_new"), world.blank()))
    assert not Entry.objects.exists()


def test_what_is_unlikely_is_asked_once_and_only_for_that_value(world):
    slip = world.gas(peep="33")
    first = world.client.post(world.url("entry_new"), slip)
    assert "PEEP 33 cmH2O is unlikely" in page(first)
    token = next(s.notice.token for s in first.context["summary"])
    changed = world.client.post(world.url("entry_new"), {**slip, "peep": "34", "confirm": [token]})
    assert changed.status_code == 422, "a confirmation holds for the value it was given for"
    assert world.client.post(world.url("entry_new"), {**slip, "confirm": [token]}).status_code == 302
    assert Entry.objects.get().peep == 33


def test_kilopascals_typed_as_mmhg_are_asked_about(world):
    html = page(world.client.post(world.url("entry_new"), world.gas(po2="11.7")))
    assert "PO2 11.7 mmHg is unlikely" in html
    assert "As kPa it would be usual" in html
    assert not Entry.objects.exists()


def test_fio2_as_a_fraction_is_read_and_said(world):
    live = page(world.client.post(world.url("entry_live"), world.gas(fio2="0.4")))
    assert "FiO2 0.4 is read as a fraction: 40 %" in live
    world.client.post(world.url("entry_new"), world.gas(fio2="0.4"))
    assert Entry.objects.get().fio2 == pytest.approx(0.4)


def test_a_comparator_is_kept_and_said(world):
    slip = world.gas(po2=">500", fio2="100", so2="", o2hb="", spo2="100")
    assert "PO2 is kept as &gt;500" in page(world.client.post(world.url("entry_live"), slip))
    world.client.post(world.url("entry_new"), slip)
    assert Entry.objects.get().typed["po2"]["comparator"] == ">"


def test_estimated_fio2_is_offered_never_filled_in(world):
    slip = world.gas(fio2="", device="2", oxygen_flow="4")
    assert "as an <strong>estimate</strong>" in page(world.client.post(world.url("entry_live"), slip))
    world.client.post(world.url("entry_new"), slip)
    assert Entry.objects.get().fio2 is None
    later = world.gas(fio2="", device="2", oxygen_flow="4", use_estimate="1", key="second", sample="s2", site="1")
    answer = world.client.post(world.url("entry_new"), later)
    token = [s.notice.token for s in answer.context["summary"]]  # the same minute and site: asked
    world.client.post(world.url("entry_new"), {**later, "confirm": token})
    entry = Entry.objects.get(key="second")
    assert entry.fio2 == pytest.approx(0.36)
    assert "nasal cannula at 4 L/min" in entry.typed["fio2"]["estimated"]


def test_time_before_admission_is_asked(world):
    early = (world.stay.admitted_at - timedelta(hours=2)).astimezone(world.unit.zone)
    slip = world.gas(date=f"{early:%Y-%m-%d}", clock=f"{early:%H:%M}")
    answer = world.client.post(world.url("entry_new"), slip)
    assert "before the admission" in page(answer)
    token = [s.notice.token for s in answer.context["summary"]]
    assert world.client.post(world.url("entry_new"), {**slip, "confirm": token}).status_code == 302


def test_the_hour_that_comes_twice_is_stored_as_chosen(world):
    world.stay.admitted_at = None
    world.stay.save()
    slip = world.gas(date="2025-10-26", clock="02:30")
    html = page(world.client.post(world.url("entry_new"), slip))
    assert "comes twice" in html
    assert 'id="fold-0"' in html
    assert 'id="fold-1"' in html
    world.client.post(world.url("entry_new"), {**slip, "fold": "1"})
    assert Entry.objects.get().time.isoformat() == "2025-10-26T01:30:00+00:00"


def test_sent_twice_is_stored_once(world):
    slip = world.gas()
    first, second = (world.client.post(world.url("entry_new"), slip, **SCRIPT) for _ in range(2))
    assert first.headers["X-Worksheet-Go"] == second.headers["X-Worksheet-Go"]
    assert Entry.objects.count() == 1


def test_the_same_form_with_other_values_is_not_lost(world):
    slip = world.gas()
    world.client.post(world.url("entry_new"), slip)
    answer = world.client.post(world.url("entry_new"), {**slip, "site": "3", "hb": "9.1"})
    assert "already recorded with other values" in page(answer)
    again = {**slip, "site": "3", "hb": "9.1", "key": answer.context["slip"].key}
    answer = world.client.post(world.url("entry_new"), again)
    if answer.status_code == 422:
        again["confirm"] = [s.notice.token for s in answer.context["summary"]]
        answer = world.client.post(world.url("entry_new"), again)
    assert answer.status_code == 302
    assert Entry.objects.count() == 2


def test_the_slip_of_a_colleague_is_asked_about(world):
    world.client.post(world.url("entry_new"), world.gas())
    world.as_("other")
    answer = world.client.post(world.url("entry_new"), world.gas(begun_by="other", key="k2"))
    assert "recorded already by nurse" in page(answer)
    assert Entry.objects.count() == 1


def test_a_form_begun_by_somebody_else_is_not_recorded_under_a_wrong_name(world):
    slip = world.gas()
    world.as_("other")
    answer = world.client.post(world.url("entry_new"), slip)
    assert "begun by nurse" in page(answer)
    assert not Entry.objects.exists()
    assert world.client.post(world.url("entry_new"), {**slip, "take_over": "1"}).status_code == 302
    assert Entry.objects.get().recorded_by.username == "other"


def test_units_are_remembered_for_the_next_slip(world):
    world.client.post(world.url("entry_new"), world.gas(po2="11.7", po2_unit="kPa"))
    html = page(world.client.get(world.url("entry_new")))
    assert '<option value="kPa" selected>kPa</option>' in html
    world.as_("other")
    assert '<option value="kPa" selected>' not in page(world.client.get(world.url("entry_new")))


def test_live_shows_what_the_stored_entry_will_show(world):
    live = world.client.post(world.url("entry_live"), world.gas())
    assert not Entry.objects.exists(), "typing stores nothing"
    shown = {symbol: text for symbol, _, text, _ in live.context["derived"]}
    world.client.post(world.url("entry_new"), world.gas())
    from worksheet.ward.display import Display
    from worksheet.ward.sheet import open_sheet

    sheet = open_sheet(world.unit, [world.stay])
    display = Display.of(world.people["nurse"], world.unit)
    for name, symbol in (("cao2", "CaO2"), ("do2i", "DO2I"), ("pf_ratio", "P/F"), ("aa_gradient", "A–a")):
        assert shown[symbol] == display.value(name, float(sheet.derived[name][0]))
    assert live.headers["X-Worksheet-Form"] == "live"


def test_live_carries_haemoglobin_and_says_so(world):
    hb = record.NewEntry(timezone.now() - timedelta(hours=2), Site.ARTERIAL, {"hb": 8.2, "po2": 80.0, "ph": 7.4})
    record.record(world.stay, world.people["nurse"], hb)
    html = page(world.client.post(world.url("entry_live"), world.gas(hb="")))
    assert "Carried: Hb 8.2 g/dL (1 h 5" in html


@pytest.mark.parametrize("name", ["entry_new", "event_new", "stay_edit"])
@pytest.mark.parametrize(("who", "status"), [("reader", 403), ("stranger", 404)])
def test_who_may_not_record(world, name, who, status):
    world.as_(who)
    assert world.client.get(world.url(name)).status_code == status
    assert world.client.post(world.url(name), world.gas()).status_code == status
    assert not Entry.objects.exists()


def test_no_login_no_form(world):
    world.client.logout()
    answer = world.client.post(world.url("entry_new"), world.gas())
    assert answer.status_code == 302
    assert "/login/" in answer.headers["Location"]


def test_another_units_stay_is_not_there(world):
    from worksheet.ward.models import Unit

    Unit.objects.create(name="South", slug="south")
    assert world.client.get("/u/south/stay/T-1/entry/new").status_code == 404


def test_the_number_of_queries_does_not_grow(world, django_assert_max_num_queries):
    def live():
        with django_assert_max_num_queries(12) as asked:
            world.client.post(world.url("entry_live"), world.gas())
        return len(asked)

    world.client.get(world.url("entry_new"))  # the session's own bookkeeping
    counts = [live()]
    for n in range(40):
        entry = record.NewEntry(timezone.now() - timedelta(hours=1 + n), Site.ARTERIAL, {"hb": 9.0, "po2": 80.0 + n})
        record.record(world.stay, world.people["nurse"], entry)
    assert [*counts, live()] == counts * 2


def test_paired_sample_opens_with_the_same_time(world):
    slip = world.gas(action="save_next")
    answer = world.client.post(world.url("entry_new"), slip, **SCRIPT)
    html = page(world.client.get(answer.headers["X-Worksheet-Go"]))
    assert f'value="{slip["clock"]}"' in html
    assert 'value="10.2"' not in html


def test_the_form_itself_has_no_inline_style_or_script(world):
    html = page(world.client.get(world.url("entry_new")))
    assert "style=" not in html
    assert "onclick" not in html


def test_the_catalogue_drives_the_form():
    assert set(slip_words.names()) == set(MEASURED) - {"age"}


def test_a_form_left_open_asks_whether_its_time_is_the_samples(world):
    early = (timezone.now() - timedelta(minutes=50)).astimezone(world.unit.zone)
    opened = f"{early:%Y-%m-%d} {early:%H:%M}"
    slip = world.gas(date=f"{early:%Y-%m-%d}", clock=f"{early:%H:%M}", opened=opened)
    html = page(world.client.post(world.url("entry_new"), slip))
    assert "opened 50 min ago" in html or "opened 51 min ago" in html
    later = (early + timedelta(minutes=3)).astimezone(world.unit.zone)
    assert world.client.post(world.url("entry_new"), {**slip, "clock": f"{later:%H:%M}"}).status_code == 302


def test_a_confirmed_value_is_marked_as_checked(world):
    slip = world.gas(peep="33")
    token = [s.notice.token for s in world.client.post(world.url("entry_new"), slip).context["summary"]]
    world.client.post(world.url("entry_new"), {**slip, "confirm": token})
    typed = Entry.objects.get().typed
    assert typed["peep"] == {"text": "33", "unit": "cm[H2O]", "checked": "yes"}
    assert "checked" not in typed["hb"]


def test_the_numbers_without_a_refused_value_say_so(world):
    record.record(world.stay, world.people["nurse"], record.NewEntry(
        timezone.now() - timedelta(hours=1), Site.ARTERIAL, {"hb": 9.0, "po2": 80.0}))  # fmt: skip
    html = page(world.client.post(world.url("entry_live"), world.gas(hb="102")))
    assert "Without</span> Hb, which cannot be as typed" in html
