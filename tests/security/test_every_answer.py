"""Every page and every file, walked: headers, what a page holds, what a GET may do, what a POST needs."""

import re

import pytest
from django.apps import apps
from django.test import Client
from django.urls import reverse

from tests.security.expectations import ADDRESSES
from tests.security.test_every_address import ALL, MISSING_PK, world  # noqa: F401

GETS = [(name, parameters) for name, parameters in ALL if ADDRESSES[name].method == "GET"]
POSTS = [(name, parameters) for name, parameters in ALL if name not in {"health"}]
BINARY = {"application/pdf": b"%PDF", "text/csv": b"", "application/fhir+json": b"{", "application/json": b"{"}


def address(name, parameters, known):
    unit, stay, entry, _ = known
    given = {"slug": unit.slug, "ref": stay.reference, "reference": stay.reference, "entry_id": entry.pk,
             "quantity": "cao2"}  # fmt: skip
    return reverse(name, kwargs={p: given.get(p, MISSING_PK) for p in parameters})


def body_of(answer):
    return b"".join(answer.streaming_content) if answer.streaming else answer.content


def logged_in(client, person):
    client.force_login(person, backend="django.contrib.auth.backends.ModelBackend")
    return client


@pytest.mark.parametrize(("name", "parameters"), GETS, ids=[name for name, _ in GETS])
def test_headers_type_and_content(name, parameters, world, client):  # noqa: F811
    logged_in(client, world[3]["lead"])
    answer = client.get(address(name, parameters, world), headers={"origin": "https://evil.example"})
    body = body_of(answer)
    assert "default-src 'self'" in answer.headers["Content-Security-Policy"]
    assert "unsafe" not in answer.headers["Content-Security-Policy"]
    assert answer.headers["X-Content-Type-Options"] == "nosniff"
    assert answer.headers["X-Frame-Options"] == "DENY"
    assert answer.headers["Referrer-Policy"] == "same-origin"
    assert answer.headers["Cross-Origin-Opener-Policy"] == "same-origin"
    assert not [header for header in answer.headers if header.startswith("Access-Control")]
    assert {"no-store", "private", "no-cache"} & set(re.split(r"[,\s]+", answer.headers["Cache-Control"]))
    kind = answer.headers.get("Content-Type", "text/html; charset=utf-8")
    if not kind.startswith("text/html"):
        start = next(start for known, start in BINARY.items() if kind.startswith(known)) if name != "health" else b"ok"
        assert body.startswith(start)
        assert "application/" in kind or "charset=utf-8" in kind
    elif answer.status_code == 200:
        assert "charset=utf-8" in kind
    if answer.headers.get("Content-Disposition"):
        # Only documents that the program itself makes open in the browser; what people sent never does.
        assert answer.headers["Content-Disposition"].startswith(("attachment", "inline" if "pdf" in kind else "attach"))
    assert client.session.session_key.encode() not in body


@pytest.mark.parametrize(("name", "parameters"), GETS, ids=[name for name, _ in GETS])
def test_a_page_has_no_script_or_style_of_its_own_and_a_way_out(name, parameters, world, client):  # noqa: F811
    logged_in(client, world[3]["lead"])
    answer = client.get(address(name, parameters, world))
    if answer.status_code != 200 or not answer.headers["Content-Type"].startswith("text/html"):
        return
    text = body_of(answer).decode()
    scripts = re.findall(r"<script\b([^>]*)>([^<]*)</script>", text)
    assert all('type="application/json"' in head or not inside.strip() for head, inside in scripts)
    assert not re.search(r"<[a-z][^>]*\s(?:style|on[a-z]+)=", text)
    assert not re.search(r"<style[\s>]", text)
    assert "javascript:" not in text.lower()
    assert not re.search(r'(?:src|href|action)="(?:https?:)?//', text)
    if "<html" in text:
        assert f'action="{reverse("logout")}"' in text


@pytest.mark.parametrize(("name", "parameters"), GETS, ids=[name for name, _ in GETS])
def test_looking_changes_nothing_but_the_trail(name, parameters, world, client):  # noqa: F811
    logged_in(client, world[3]["lead"])

    def stored():
        kept = [m for m in apps.get_models() if m.__name__ not in {"AuditEvent", "LoginSession", "TOTPDevice"}]
        return {model.__name__: sorted(map(repr, model._default_manager.values())) for model in kept}

    before = stored()
    body_of(client.get(address(name, parameters, world)))
    assert stored() == before


@pytest.mark.parametrize(
    "query",
    ["window=%00", "window=' OR 1=1--", "page=-1&page=x", "since=1e999", "next=javascript:alert(1)", "a=" + "(" * 999],
)
def test_hostile_queries_are_answered(query, world, client):  # noqa: F811
    logged_in(client, world[3]["lead"])
    for name, parameters in GETS:
        answer = client.get(f"{address(name, parameters, world)}?{query}")
        body = body_of(answer)
        assert answer.status_code < 500, name
        assert not re.search(rb'(?:href|action|src|hx-get)="\s*javascript:', body, re.IGNORECASE)


@pytest.mark.parametrize(("name", "parameters"), POSTS, ids=[name for name, _ in POSTS])
def test_nothing_is_posted_without_the_token_of_the_form(name, parameters, world):  # noqa: F811
    client = logged_in(Client(enforce_csrf_checks=True), world[3]["lead"])
    answer = client.post(address(name, parameters, world), {"role": "1"})
    assert answer.status_code in {403, 405}


@pytest.mark.parametrize("method", ["TRACE", "CONNECT", "PUT", "DELETE", "PATCH", "PROPFIND"])
def test_methods_that_no_page_has_are_refused_everywhere(method, world, client):  # noqa: F811
    logged_in(client, world[3]["lead"])
    for name, parameters in ALL:
        assert client.generic(method, address(name, parameters, world)).status_code == 405, name


def test_the_same_parameter_twice_is_read_by_one_rule(world, client):  # noqa: F811
    """Django takes the last one everywhere; what is not a window falls back to the usual one."""
    logged_in(client, world[3]["lead"])
    both = client.get("/u/unit-7/?window=6&window=24").content
    assert b"window=24" in both


def test_a_failing_trail_stops_the_action(world, client, monkeypatch):  # noqa: F811
    """Fail closed: what cannot be told in the trail does not happen, and is not shown."""
    from worksheet.oxygen.readings import Site
    from worksheet.ward import audit, record
    from worksheet.ward.models import Entry

    def fail(*args, **kwargs):
        raise RuntimeError("trail")

    unit, stay, entry, people = world
    monkeypatch.setattr(audit, "write", fail)
    before = Entry.objects.count()
    with pytest.raises(RuntimeError):
        record.record(stay, people["recorder"], record.NewEntry(entry.time, Site.ARTERIAL, {"po2": 70.0}))
    assert Entry.objects.count() == before
    logged_in(client, people["reader"])
    client.raise_request_exception = False
    shown = client.get(f"/u/{unit.slug}/stay/{stay.reference}/")
    assert shown.status_code == 500
    assert b"K-1" not in shown.content
    assert re.search(rb"failure [0-9a-f]{8}", shown.content)


def test_no_count_search_or_poll_tells_of_another_unit(world, client):  # noqa: F811
    """The pages of one unit are the same whatever is stored in another."""
    from datetime import timedelta

    from worksheet.oxygen.readings import Site
    from worksheet.ward import record
    from worksheet.ward.models import Patient, Stay, Unit

    logged_in(client, world[3]["lead"])
    pages = ["/u/unit-7/trail/", "/u/unit-7/members/", "/u/unit-7/export/entries.csv", "/"]

    def seen():
        texts = [body_of(client.get(page)).decode() for page in pages if page != "/u/unit-7/trail/"]
        return [re.sub(r'(csrfmiddlewaretoken" value="|X-CSRFToken": ")[^"]+|seconds-left="\d+', "", t) for t in texts]

    before = seen()
    other = Unit.objects.get(slug="unit-8")
    stay = Stay.objects.create(unit=other, patient=Patient.objects.create(identifier="K-777"), reference="K-777")
    new = record.NewEntry(world[2].time + timedelta(hours=1), Site.ARTERIAL, {"po2": 55.5})
    record.record(stay, world[3]["outsider"], new)
    assert seen() == before
    assert "K-777" not in client.get("/u/unit-7/trail/").content.decode()
