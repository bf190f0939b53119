"""What every answer carries, and what is refused at the door."""

import pytest
from django.test import Client
from django.urls import path

from worksheet.ward.models import Membership, Role, Unit, User

pytestmark = pytest.mark.django_db


@pytest.fixture
def inside(client):
    user = User.objects.create_user("nurse")
    Membership.objects.create(user=user, unit=Unit.objects.create(name="Unit 7", slug="unit-7"), role=Role.RECORDER)
    client.force_login(user, backend="django.contrib.auth.backends.ModelBackend")
    return client


@pytest.mark.parametrize(
    "where", ["/login/", "/u/unit-7/", "/nowhere/", "/health/", "/preferences/", "/static/css/base.css"]
)
def test_every_answer_carries_the_headers(inside, where):
    answer = inside.get(where)
    answer.close()
    policy = answer.headers["Content-Security-Policy"]
    assert "script-src 'self';" in policy
    assert "unsafe" not in policy
    assert "default-src 'self'" in policy
    for part in ("object-src 'none'", "base-uri 'none'", "frame-ancestors 'none'", "form-action 'self'"):
        assert part in policy
    assert answer.headers["X-Content-Type-Options"] == "nosniff"
    assert answer.headers["Referrer-Policy"] == "same-origin"
    assert answer.headers["Cross-Origin-Opener-Policy"] == "same-origin"
    assert "Access-Control-Allow-Origin" not in answer.headers


@pytest.mark.parametrize("where", ["/login/", "/u/unit-7/", "/nowhere/", "/preferences/"])
def test_pages_are_not_stored(inside, where):
    assert "no-store" in inside.get(where).headers["Cache-Control"]


@pytest.mark.parametrize("method", ["TRACE", "PUT", "DELETE", "PATCH", "TRACK"])
@pytest.mark.parametrize("where", ["/login/", "/u/unit-7/", "/health/"])
def test_other_methods_are_refused(inside, method, where):
    assert inside.generic(method, where).status_code == 405


def test_logging_out_clears_what_the_browser_kept(inside):
    answer = inside.post("/logout/")
    assert '"cookies"' in answer.headers["Clear-Site-Data"]
    assert inside.get("/u/unit-7/").status_code == 302


def test_session_cookie_is_out_of_reach_of_scripts_and_other_sites():
    User.objects.create_user("nurse", password="seven green kettles hum")
    client = Client()
    answer = client.post("/login/", {"username": "nurse", "password": "seven green kettles hum"})
    cookie = answer.cookies["worksheet"]
    assert cookie["httponly"]
    assert cookie["samesite"] == "Lax"
    assert cookie["path"] == "/"
    assert not cookie["domain"]


def test_a_form_without_its_token_is_refused_in_words():
    client = Client(enforce_csrf_checks=True)
    answer = client.post("/login/", {"username": "x", "password": "y"})
    assert answer.status_code == 403
    assert b"what you typed is still there" in answer.content


@pytest.mark.parametrize("host", ["evil.example", "127.0.0.1.evil.example"])
def test_another_host_name_is_refused(client, host, settings):
    settings.ALLOWED_HOSTS = ["127.0.0.1"]
    assert client.get("/login/", headers={"host": host}).status_code == 400


def boom(request):
    raise RuntimeError("K-2041 haemoglobin 7.1")


urlpatterns = [path("boom/", boom)]


def test_a_failure_tells_nothing_of_a_patient(client):
    from worksheet import urls

    urls.urlpatterns.append(path("boom/", boom))
    try:
        client.raise_request_exception = False
        user = User.objects.create_user("nurse")
        client.force_login(user, backend="django.contrib.auth.backends.ModelBackend")
        answer = client.get("/boom/")
    finally:
        urls.urlpatterns.pop()
    assert answer.status_code == 500
    assert b"K-2041" not in answer.content
    assert b"Something failed" in answer.content


@pytest.mark.parametrize(
    "hostile", ['"><script>alert(1)</script>', "{{ 7|add:7 }}", "{0.__class__}", "%s%n", "' OR 1=1--"]
)
def test_what_people_type_is_shown_as_typed(inside, hostile):
    from worksheet.ward.models import Patient, Stay

    unit = Unit.objects.get()
    Stay.objects.create(unit=unit, patient=Patient.objects.create(identifier="K-1"), reference="K-1", note=hostile)
    page = inside.get("/u/unit-7/stay/K-1/").content.decode()
    assert "<script>alert(1)" not in page
    assert "{{ 7|add:7 }}" in page or "add:7" not in hostile


class Unreachable:
    """A database that does not answer."""

    def cursor(self):
        from django.db import OperationalError

        raise OperationalError("could not connect to 10.0.0.5, user worksheet")


def test_the_health_page_says_that_the_database_does_not_answer_and_nothing_more(client, monkeypatch):
    from worksheet.review import health

    monkeypatch.setattr(health, "connection", Unreachable())
    answer = client.get("/health/")
    assert (answer.status_code, answer.content) == (503, b"database does not answer")


@pytest.mark.parametrize("kind", ["OperationalError", "InterfaceError"])
def test_a_page_without_a_database_is_a_sentence(inside, monkeypatch, kind):
    from django import db

    from worksheet.review import patient

    def fail(*args):
        raise getattr(db, kind)("could not connect to 10.0.0.5, user worksheet")

    monkeypatch.setattr(patient, "unit_or_404", fail)
    inside.raise_request_exception = False
    answer = inside.get("/u/unit-7/stay/K-1/")
    assert answer.status_code == 503
    assert b"does not answer" in answer.content
    assert b"10.0.0.5" not in answer.content
    assert "no-store" in answer.headers["Cache-Control"]
