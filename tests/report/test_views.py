"""The PDFs by address: who may have them, what they are called, that they are not stored and are audited."""

import pytest
from django.urls import reverse

from tests.report import world
from worksheet.report import views
from worksheet.report.printing import NotPrinted
from worksheet.ward.models import AuditEvent, Membership, Role, Unit, User

pytestmark = pytest.mark.django_db


@pytest.fixture
def stay():
    made = world.make_stay()
    world.add_gases(made, 3)
    return made


def login(client, stay=None):
    user = User.objects.create_user("dr.reader", password="not-used-here-1")
    if stay:
        Membership.objects.create(user=user, unit=stay.unit, role=Role.READER)
    client.force_login(user, backend="django.contrib.auth.backends.ModelBackend")
    return user


def address(stay, name="report_timeline"):
    return reverse(name, args=[stay.unit.slug, stay.reference] if name == "report_timeline" else [stay.unit.slug])


@pytest.mark.parametrize("name", ["report_timeline", "report_unit"])
class TestAccess:
    def test_reader_gets_a_pdf(self, client, stay, name):
        login(client, stay)
        answer = client.get(address(stay, name))
        assert answer.status_code == 200
        assert answer["Content-Type"] == "application/pdf"
        assert answer.content.startswith(b"%PDF-")
        assert "no-store" in answer["Cache-Control"]
        event = AuditEvent.objects.get(action="printed")
        assert (event.actor, event.unit) == ("dr.reader", "Unit North")

    def test_other_units_reader_gets_nothing(self, client, stay, name):
        login(client)
        assert client.get(address(stay, name)).status_code == 404
        assert not AuditEvent.objects.filter(action="printed").exists()

    def test_anonymous_is_sent_to_the_login(self, client, stay, name):
        answer = client.get(address(stay, name))
        assert answer.status_code == 302
        assert "login" in answer["Location"]

    def test_only_get(self, client, stay, name):
        login(client, stay)
        assert client.post(address(stay, name)).status_code == 405

    def test_trouble_is_told(self, client, stay, name, monkeypatch):
        def fails(*args):
            raise NotPrinted("The document could not be set; the server's log says why.")

        monkeypatch.setattr(views, "timeline_pdf", fails)
        monkeypatch.setattr(views, "unit_pdf", fails)
        login(client, stay)
        answer = client.get(address(stay, name))
        assert answer.status_code == 503
        assert "could not be set" in answer.content.decode()


def test_name_of_the_file(client, stay):
    login(client, stay)
    assert client.get(address(stay))["Content-Disposition"] == 'inline; filename="timeline-t-100.pdf"'


def test_deidentified_file_is_not_named_after_the_patient(client, stay):
    login(client, stay)
    answer = client.get(address(stay), {"deidentify": "1"})
    assert answer["Content-Disposition"] == 'inline; filename="timeline-deidentified.pdf"'
    assert b"T-100" not in answer.content


def test_window_of_the_page_is_printed(client, stay, pdftotext):
    login(client, stay)
    span = {"window": "free", "from": "2026-03-28T20:30", "to": "2026-03-28T22:00"}
    from tests.report.test_timeline import flat, words_of

    text = flat(words_of(client.get(address(stay), span).content, pdftotext))
    assert "2026-03-28 20:30 CET to 2026-03-28 22:00 CET" in text
    assert "1 in the span" in text


def test_stay_of_another_unit_under_this_units_address(client, stay):
    other = Unit.objects.create(name="Unit East", slug="east")
    user = login(client, stay)
    Membership.objects.create(user=user, unit=other, role=Role.READER)
    assert client.get(reverse("report_timeline", args=["east", "T-100"])).status_code == 404
