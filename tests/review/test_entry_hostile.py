"""Whatever is posted: an answer in words, never an error page, never another unit's data, never half an entry."""

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from worksheet.oxygen.quantities import MEASURED
from worksheet.oxygen.readings import Site
from worksheet.review import slip_words
from worksheet.ward import record
from worksheet.ward.models import Draft, Entry, Patient, Stay, Unit

NAMES = [*slip_words.names(), "date", "clock", "fold", "site", "device", "flow_method", "sample", "note", "key",
         "opened", "begun_by", "use_estimate", "reason", "pasted", "action", "po2_unit", "hb_unit", "confirm", "kind",
         "amount", "bed", "identifier", "reference", "height_unit", "end_date", "end_clock"]  # fmt: skip
ODD = ["", "0", "1", "7.4", "7,4", "-1", "1e400", "99999999999999999999", "\x00", "\x00\n", "2026-12-01", "02:30",
       "save", "paste", "<b>", "' OR 1=1 --", "kPa", "½", "a\tb", "pH\tPO2\n7.4\t90"]  # fmt: skip
TEXTS = st.one_of(st.text(max_size=30), st.sampled_from(ODD))


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.dictionaries(st.sampled_from(NAMES), TEXTS, max_size=20))
def test_any_texts_get_an_answer_in_words(world, fields):
    for name in ("entry_new", "entry_live", "event_new", "draft_save", "stay_edit"):
        assert world.client.post(world.url(name), {**fields, "form_name": "entry"}).status_code in {200, 302, 409, 422}
    assert world.client.post("/u/north/stay/new", fields).status_code in {302, 422}
    assert world.client.post("/preferences/", fields).status_code in {302, 422}
    assert world.client.get(world.url("entry_new")).status_code == 200, "whatever the draft holds"
    assert all(getattr(e, n) is None or abs(getattr(e, n)) < 1e4 for e in Entry.objects.all() for n in MEASURED)


def test_characters_that_a_data_base_refuses_are_taken_out(world):
    slip = world.gas(note="first\r\nsecond\x00\x07", sample="A\x001")
    assert world.client.post(world.url("draft_save"), {**slip, "form_name": "entry"}).status_code == 200
    assert "\x00" not in str(Draft.objects.get().data)
    assert world.client.post(world.url("entry_new"), slip).status_code == 302
    entry = Entry.objects.get()
    assert (entry.note, entry.sample) == ("first\nsecond", "A1")


@pytest.fixture
def elsewhere(world):
    """An entry of a unit that the nurse does not belong to, under a key that can be guessed."""
    unit = Unit.objects.create(name="South unit", slug="south")
    stay = Stay.objects.create(unit=unit, patient=Patient.objects.create(identifier="S-1"), reference="S-1")
    new = record.NewEntry(
        world.stay.admitted_at, Site.ARTERIAL, {"hb": 6.66, "po2": 66.6}, note="secret", key="guessed"
    )
    return record.record(stay, world.people["other"], new)[0]


def test_a_guessed_key_shows_and_changes_nothing_of_another_unit(world, elsewhere):
    answers = [world.client.post(world.url("entry_new"), world.gas(key="guessed"))]
    world.client.post(world.url("entry_new"), world.gas(key="mine"))
    mine = Entry.objects.get(key="mine")
    answers.append(
        world.client.post(world.url("entry_correct", mine.pk), world.gas(key="guessed", reason="typo", hb="9"))
    )
    answers.append(world.client.post(world.url("entry_strike", mine.pk), {"key": "guessed", "reason": "wrong"}))
    answers.append(world.client.post(world.url("event_new"), world.blank(key="guessed", kind="1", amount="2", site="")))
    for answer in answers:
        assert answer.status_code == 422
        assert "secret" not in answer.content.decode()
        assert "6.66" not in answer.content.decode()
    assert not Entry.objects.filter(replaces=mine).exists()
    assert world.client.post(world.url("entry_correct", elsewhere.pk), {}).status_code == 404


def test_what_is_typed_is_shown_as_text(world):
    html = world.client.post(world.url("entry_new"), world.gas(note="<script>x</script>", hb='"><b>')).content.decode()
    assert "<script>x" not in html
    assert '"><b>' not in html
