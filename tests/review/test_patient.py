"""The patient page: verdict, evidence, detail; who looked, and the way to the next bed."""

import html
import re

import pytest
from django.db import connection
from django.test.utils import CaptureQueriesContext
from django.urls import reverse

from tests.review.wards import add_gas, counted, fill, make_stay, make_unit, make_user
from worksheet.oxygen.readings import Event, Site
from worksheet.review.words import plus_minus
from worksheet.ward import record
from worksheet.ward.display import Display
from worksheet.ward.models import AuditEvent, ReviewMark, Role, Stay

pytestmark = pytest.mark.django_db


@pytest.fixture
def ward(client):
    unit = make_unit()
    nurse = make_user(unit)
    client.force_login(nurse)
    return unit, nurse, client


def page(client, stay, query=""):
    answer = client.get(reverse("patient", args=[stay.unit.slug, stay.reference]) + query)
    assert answer.status_code == 200
    return html.unescape(answer.content.decode())


def bleeding(unit, nurse):
    stay = make_stay(unit, 4)
    for ago, hb in ((10, 10.5), (5, 8.4), (0.5, 7.0)):
        add_gas(stay, nurse, ago, hb=hb)
        add_gas(stay, nurse, ago - 0.05, Site.CENTRAL_VENOUS, ph=7.35, pco2=46.0, po2=34.0, so2=0.62)
    return stay


def test_it_reads_in_the_order_of_the_question(ward):
    unit, nurse, client = ward
    text = page(client, bleeding(unit, nurse), "?window=12")
    places = [text.index(words) for words in ("Delivery fell", "figure-strip", "figure-ledger", "figure-content",
                                              "figure-delivery", "figure-curve", "Saturations reconciled", "Levers:",
                                              "What to measure next", 'id="entries"', 'id="findings"')]  # fmt: skip
    assert places == sorted(places)


def test_the_verdict_names_the_step_and_the_ledger_adds_up(ward):
    unit, nurse, client = ward
    text = page(client, bleeding(unit, nurse), "?window=12")
    assert re.search(r"Delivery fell 3\d % ± \d+ since", text)  # 7.0 of 10.5 g/dL
    table = re.search(r'<table class="lined ledger">.*?</table>', text, flags=re.DOTALL).group()
    numbers = [float(n.replace("−", "-")) for n in re.findall(r'class="number">([−+]?\d+) ± \d+</td>', table)]
    assert len(numbers) == 5
    assert abs(sum(numbers[:4]) - numbers[4]) <= 3  # each is rounded
    assert "loss beyond noise" in table


def test_cautions_stand_beside_the_levers(ward):
    unit, nurse, client = ward
    text = page(client, bleeding(unit, nurse), "?window=12")
    levers = text[text.index("Levers:") : text.index("What to measure next")]
    assert "red-cell unit" in levers
    assert "Carson 2023" in levers
    assert "not an order" in levers


def test_saturations_that_disagree_are_said_in_words(ward):
    unit, nurse, client = ward
    stay = make_stay(unit, 1)
    add_gas(stay, nurse, 0.5, spo2=0.86, so2=0.975, methb=0.22, po2=140.0)
    text = page(client, stay)
    part = text[text.index("Saturations reconciled") : text.index("Levers:")]
    assert re.search(r"The finger reads \d+ points below the measured saturation, more than noise", part)
    assert "MetHb" in part


@pytest.mark.parametrize(
    ("blood", "words"),
    [
        ({"methb": 0.22, "so2": 0.95}, r"about 9 points down, to about 86 %, while 73 % of"),
        ({"cohb": 0.28, "so2": 0.97}, r"about 3 points down, to about 94 %, while 69 % of"),
        ({"so2": 0.883, "po2": 56.0, "spo2": 0.87}, None),
    ],
)
def test_a_probes_prediction_only_where_there_are_dyshaemoglobins(ward, blood, words):
    """Without them its formula just reads high: 93 % for blood of 88 %."""
    unit, nurse, client = ward
    stay = make_stay(unit, 1)
    add_gas(stay, nurse, 0.5, **blood)
    text = page(client, stay)
    part = text[text.index("Saturations reconciled") : text.index("What to measure next")]
    assert ("two-wavelength" in part) == (words is not None)
    assert words is None or re.search(words, part)


def test_a_gas_in_doubt_is_told_before_the_verdict(ward):
    unit, nurse, client = ward
    stay = make_stay(unit, 1)
    add_gas(stay, nurse, 10, po2=39.0, so2=0.71, pco2=47.0, ph=7.33, spo2=None)
    add_gas(stay, nurse, 0.5)
    text = page(client, stay, "?window=12")
    assert text.index("with which the comparison starts, is in doubt (it looks venous)") < text.index("Delivery rose")


def test_the_headline_has_the_number_of_every_table(ward):
    """485 ± 110, not 480: only the half width is told in two figures."""
    unit, nurse, _client = ward
    display = Display.of(nurse, unit)
    assert plus_minus(display, "do2i", 485.0, 56.0) == f"{display.value('do2i', 485.0)} ± 110" == "485 ± 110"


def test_carried_values_are_marked_with_their_age(ward):
    unit, nurse, client = ward
    stay = make_stay(unit, 1)
    add_gas(stay, nurse, 3)
    add_gas(stay, nurse, 0.5, hb=None)
    text = page(client, stay, "?window=6")
    assert re.search(r'class="number carried">10\.5<small>2 h 30 old</small>', text)
    assert "haemoglobin from" in text  # the verdict says what it rests on


def test_corrections_and_strikes_on_request_with_who_and_why(ward):
    unit, nurse, client = ward
    stay = bleeding(unit, nurse)
    wrong = add_gas(stay, nurse, 2, hb=12.1)
    record.correct(
        wrong, nurse, record.NewEntry(wrong.time, Site.ARTERIAL, {"hb": 8.1, "po2": 90.0}), "wrong line read"
    )
    other = add_gas(stay, nurse, 1.5)
    record.strike_out(other, nurse, "sample of the neighbour")
    plain = page(client, stay, "?window=12")
    assert "corrects an earlier entry: wrong line read" in plain
    assert "12.1" not in plain
    assert "sample of the neighbour" not in plain
    shown = page(client, stay, "?window=12&history=1")
    assert "12.1" in shown
    assert "by anna: wrong line read" in shown
    assert "sample of the neighbour" in shown


def test_events_stand_in_the_table(ward):
    unit, nurse, client = ward
    stay = bleeding(unit, nurse)
    when = record.NewEntry(stay.entries.first().time, event=Event.TRANSFUSION, event_amount=2, note="two units")
    record.record(stay, nurse, when)
    text = page(client, stay, "?window=12")
    assert "transfusion, 2 units of red cells" in text
    assert "“two units”" in text


def test_neighbours_keep_the_window(ward):
    unit, _, client = ward
    stays = [make_stay(unit, n) for n in (1, 2, 3)]
    text = page(client, stays[1], "?window=24")
    for other in (stays[0], stays[2]):
        assert f"{reverse('patient', args=[unit.slug, other.reference])}?window=24" in text
    assert 'rel="prev"' not in page(client, stays[0])


def test_marking_reviewed_is_kept_shown_and_becomes_a_window(ward):
    unit, nurse, client = ward
    stay = bleeding(unit, nurse)
    answer = client.post(reverse("mark_reviewed", args=[unit.slug, stay.reference]), {"window": "12"})
    assert answer.status_code == 302
    assert answer["Location"].endswith("?window=12")
    mark = ReviewMark.objects.get()
    assert (mark.stay, mark.user) == (stay, nurse)
    assert AuditEvent.objects.filter(action="reviewed", subject=stay.reference).count() == 1
    text = page(client, stay, "?window=review")
    assert "since my last review" in text
    assert "by anna" in text
    assert client.get(reverse("mark_reviewed", args=[unit.slug, stay.reference])).status_code == 405


def test_looking_leaves_a_trace(ward):
    unit, nurse, client = ward
    stay = bleeding(unit, nurse)
    page(client, stay)
    assert AuditEvent.objects.filter(action="viewed", actor="anna", subject=stay.reference).count() == 1


def test_a_reader_sees_everything_and_no_way_to_type(ward):
    unit, nurse, client = ward
    stay = bleeding(unit, nurse)
    client.force_login(make_user(unit, "rita", Role.READER))
    text = page(client, stay, "?window=12")
    assert "Delivery fell" in text
    for name in ("entry_new", "event_new"):
        assert reverse(name, args=[unit.slug, stay.reference]) not in text
    assert "/correct" not in text


def test_another_units_person_gets_404(ward):
    unit, nurse, client = ward
    stay = bleeding(unit, nurse)
    client.force_login(make_user(make_unit("other", "Other"), "bert", Role.LEAD))
    assert client.get(reverse("patient", args=[unit.slug, stay.reference])).status_code == 404
    assert client.post(reverse("mark_reviewed", args=[unit.slug, stay.reference])).status_code == 404


def test_a_stay_without_entries_says_what_to_do(ward):
    unit, _, client = ward
    text = page(client, make_stay(unit, 1))
    assert "No entries in this window" in text
    assert "Add the first" in text


def test_an_ended_stay_can_still_be_read(ward):
    unit, nurse, client = ward
    stay = bleeding(unit, nurse)
    stay.discharged_at, stay.bed = stay.entries.last().time, None
    stay.save()
    assert "this stay has ended" in page(client, stay, "?window=12")


@pytest.mark.parametrize("beds", [1, 40])
def test_queries_do_not_grow_with_patients_or_entries(ward, beds):
    unit, nurse, client = ward
    fill(unit, nurse, beds, every=2.0)
    stay = Stay.objects.first()
    page(client, stay)  # the first page of a login writes when it began
    with CaptureQueriesContext(connection) as queries:
        page(client, stay, "?window=48&history=1")
    assert len(counted(queries)) <= 8, counted(queries)


def test_nothing_typed_runs_as_markup(ward):
    unit, nurse, client = ward
    stay = make_stay(unit, 1, note="<script>alert(1)</script>")
    record.record(stay, nurse, record.NewEntry(stay.admitted_at, note="x"))
    new = record.NewEntry(add_gas(stay, nurse, 1).time, event=Event.OTHER, note="<img src=x onerror=alert(1)>")
    record.record(stay, nurse, new)
    raw = client.get(reverse("patient", args=[unit.slug, stay.reference]) + "?window=6").content.decode()
    assert "<img src=x" not in raw
    assert "<script>alert" not in raw


def test_levers_say_that_a_transfusion_came_after_the_gas(client, db):
    from datetime import timedelta

    from django.utils import timezone

    from worksheet.oxygen.readings import Event
    from worksheet.ward import demo, record
    from worksheet.ward.models import Stay, User

    demo.make(timezone.now(), "invented-password-1")
    nurse, stay = User.objects.get(username="nurse"), Stay.objects.get(reference="K-2041")
    client.force_login(nurse)
    assert "came after this gas" not in client.get("/u/demo/stay/K-2041/?window=12").content.decode()
    new = record.NewEntry(timezone.now() - timedelta(minutes=2), event=Event.TRANSFUSION, event_amount=1)
    record.record(stay, nurse, new)
    levers = client.get("/u/demo/stay/K-2041/?window=12").content.decode().split('id="levers-title"')[1]
    assert "came after this gas" in levers.split("</section>")[0]
