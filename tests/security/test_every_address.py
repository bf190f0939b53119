"""Every address of the program, asked by everybody: nobody sees what is not theirs, and no address is forgotten."""

from datetime import UTC, datetime

import pytest
from django.urls import get_resolver, reverse
from django.urls.resolvers import URLResolver

from tests.security.expectations import ADDRESSES
from worksheet.oxygen.readings import Site
from worksheet.ward import record
from worksheet.ward.models import Membership, Patient, Role, Stay, Unit, User

ORDER = ("everybody", "person", "reader", "recorder", "lead", "admin")
MISSING_PK = 999_999


def addresses(resolver=None):
    """Every named address with the parameters that it takes."""
    for pattern in (resolver or get_resolver()).url_patterns:
        if isinstance(pattern, URLResolver):
            yield from addresses(pattern)
        else:
            yield pattern.name, tuple(pattern.pattern.converters)


ALL = sorted(addresses(), key=str)


def test_every_address_has_an_expectation_and_every_expectation_an_address():
    names = [name for name, _ in ALL]
    assert sorted(set(names)) == sorted(names)
    assert sorted(names) == sorted(ADDRESSES)


@pytest.fixture
def world(db):
    """Two units; people of each role in the first, a lead of the second, an administrator."""
    unit = Unit.objects.create(name="Unit 7", slug="unit-7")
    other = Unit.objects.create(name="Unit 8", slug="unit-8")
    people = {}
    for name, role in (("reader", Role.READER), ("recorder", Role.RECORDER), ("lead", Role.LEAD)):
        people[name] = User.objects.create_user(name)
        Membership.objects.create(user=people[name], unit=unit, role=role)
    people["outsider"] = User.objects.create_user("outsider")
    Membership.objects.create(user=people["outsider"], unit=other, role=Role.LEAD)
    people["admin"] = User.objects.create_superuser("admin")
    stay = Stay.objects.create(unit=unit, patient=Patient.objects.create(identifier="K-1"), reference="K-1")
    new = record.NewEntry(datetime(2026, 3, 1, 6, tzinfo=UTC), Site.ARTERIAL, {"po2": 90.0, "hb": 10.0, "ph": 7.4})
    entry, _ = record.record(stay, people["recorder"], new)
    return unit, stay, entry, people


def ask(client, name, parameters, world, person):
    """Status of one request."""
    unit, stay, entry, _ = world
    known = {"slug": unit.slug, "ref": stay.reference, "reference": stay.reference, "entry_id": entry.pk,
             "quantity": "cao2", "pk": MISSING_PK, "token": "no-such-token"}  # fmt: skip
    where = reverse(name, kwargs={p: known.get(p, MISSING_PK) for p in parameters})
    if person is not None:
        client.force_login(person, backend="django.contrib.auth.backends.ModelBackend")
    answer = client.post(where) if ADDRESSES[name].method == "POST" else client.get(where)
    return answer


@pytest.mark.parametrize(("name", "parameters"), ALL, ids=[name for name, _ in ALL])
def test_nobody_without_a_login(name, parameters, world, client):
    answer = ask(client, name, parameters, world, None)
    if ADDRESSES[name].least == "everybody":
        assert answer.status_code in (200, 302, 410)
    else:
        assert answer.status_code in (302, 401, 403)
        assert answer.status_code != 302 or answer.url.startswith(reverse("login"))
        assert b"K-1" not in answer.content


@pytest.mark.parametrize(("name", "parameters"), [a for a in ALL if "slug" in a[1]], ids=str)
def test_a_member_of_another_unit_does_not_learn_that_it_exists(name, parameters, world, client):
    answer = ask(client, name, parameters, world, world[3]["outsider"])
    assert answer.status_code == 404
    assert b"Unit 7" not in answer.content


@pytest.mark.parametrize("role", ["reader", "recorder", "lead", "admin"])
@pytest.mark.parametrize(("name", "parameters"), ALL, ids=[name for name, _ in ALL])
def test_each_role_may_what_it_may(name, parameters, role, world, client):
    answer = ask(client, name, parameters, world, world[3][role])
    if ORDER.index(role) < ORDER.index(ADDRESSES[name].least):
        assert answer.status_code == 403
    else:
        missing = {404, 410} if {"pk", "token"} & set(parameters) or name == "session_end" else set()
        assert answer.status_code in {200, 204, 302, 303, 400, 409, 422} | missing
