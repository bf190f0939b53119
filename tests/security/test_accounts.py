"""Logging in, staying in, a second factor, invitations."""

import time

import pytest
from django.contrib.auth.password_validation import validate_password
from django.core.exceptions import ValidationError
from django.test import Client
from django_otp.oath import TOTP
from django_otp.plugins.otp_totp.models import TOTPDevice

from worksheet.ward.models import AuditEvent, Invitation, LoginSession, Membership, Role, Unit, User

pytestmark = pytest.mark.django_db
PASSWORD = "seven green kettles hum"


@pytest.fixture
def unit():
    return Unit.objects.create(name="Unit 7", slug="unit-7")


@pytest.fixture
def lead(unit):
    user = User.objects.create_user("lead", password=PASSWORD)
    Membership.objects.create(user=user, unit=unit, role=Role.LEAD)
    return user


def log_in(client, name="lead", password=PASSWORD):
    return client.post("/login/", {"username": name, "password": password})


@pytest.mark.parametrize(
    ("password", "why"),
    [
        ("short", "too short"),
        ("password1234567", "easy to guess"),
        ("aaaaaaaaaaaaaaaaaaaa", "easy to guess"),
        ("abcabcabcabcabcabc", "easy to guess"),
        ("qwertyuiop1234567890", "easy to guess"),
        ("oxygendeliveryworksheet", "easy to guess"),
        ("lead-of-unit-seven", "too similar"),
    ],
)
def test_weak_passwords_are_refused_with_the_reason(password, why):
    with pytest.raises(ValidationError) as refused:
        validate_password(password, User(username="lead-of-unit-seven"))
    assert any(why in sentence for sentence in refused.value.messages)


def test_a_long_password_of_plain_words_is_welcome():
    validate_password(PASSWORD, User(username="lead"))


def test_passwords_are_hashed_with_argon2(settings):
    settings.PASSWORD_HASHERS = ["django.contrib.auth.hashers.Argon2PasswordHasher"]
    assert User.objects.create_user("somebody", password=PASSWORD).password.startswith("argon2$argon2id$")


def test_a_name_is_locked_at_one_address_and_not_at_another(client, lead, settings):
    for _ in range(settings.AXES_FAILURE_LIMIT):
        answer = log_in(client, password="wrong")
    assert answer.status_code == 429
    assert log_in(client).status_code == 429
    assert log_in(Client(REMOTE_ADDR="10.1.1.9")).status_code == 302
    assert log_in(client, name="somebody-else").status_code == 200


def test_a_login_ends_after_some_time_without_use(client, lead, settings):
    log_in(client)
    session = client.session
    session["seen"] = time.time() - settings.SESSION_IDLE_SECONDS - 1
    session.save()
    assert client.get("/account/").status_code == 302


def test_a_login_ends_after_a_shift_in_any_case(client, lead, settings):
    log_in(client)
    session = client.session
    session["began"] = time.time() - settings.SESSION_ABSOLUTE_SECONDS - 1
    session["seen"] = time.time()
    session.save()
    assert client.get("/account/").status_code == 302


def test_a_page_that_updates_itself_keeps_nobody_logged_in(client, lead):
    log_in(client)
    session = client.session
    session["seen"] = seen = time.time() - 600
    session.save()
    assert client.get("/u/unit-7/", headers={"HX-Request": "true", "HX-Trigger": "live"}).status_code in (200, 304)
    assert client.session["seen"] == seen
    client.get("/u/unit-7/")
    assert client.session["seen"] > seen


def test_sessions_are_listed_and_can_be_ended(client, lead):
    log_in(client)
    other = Client(headers={"user-agent": "the tablet of bed 4"})
    log_in(other)
    page = client.get("/account/")
    assert b"the tablet of bed 4" in page.content
    assert other.session.session_key.encode() not in page.content
    theirs = LoginSession.objects.get(session_key=other.session.session_key)
    assert client.post("/account/session-end", {"began": theirs.began_at.isoformat()}).status_code == 302
    assert other.get("/account/").status_code == 302
    assert client.get("/account/").status_code == 200


def test_nobody_ends_a_session_of_somebody_else(client, lead):
    User.objects.create_user("other", password=PASSWORD)
    other = Client()
    log_in(other, "other")
    theirs = LoginSession.objects.get(session_key=other.session.session_key)
    log_in(client)
    assert client.post("/account/session-end", {"began": theirs.began_at.isoformat()}).status_code == 404
    assert other.get("/account/").status_code == 200


def test_a_changed_password_ends_the_other_logins(client, lead):
    log_in(client)
    other = Client()
    log_in(other)
    new = "nine blue ladders sing"
    form = {"old_password": PASSWORD, "new_password1": new, "new_password2": new}
    assert client.post("/account/", form).status_code == 302
    assert client.get("/account/").status_code == 200
    assert other.get("/account/").status_code == 302


def code_of(device):
    totp = TOTP(device.bin_key, device.step, device.t0, device.digits, device.drift)
    totp.time = time.time()
    return f"{totp.token():06d}"


def set_up_second_factor(client, lead):
    log_in(client)
    client.get("/account/second-factor/new/")
    device = TOTPDevice.objects.get(user=lead)
    return device, client.post("/account/second-factor/new/", {"code": code_of(device)})


def test_a_second_factor_is_asked_once_it_is_set_up(client, lead):
    device, page = set_up_second_factor(client, lead)
    assert page.status_code == 200
    codes = [line.split("</code>")[0] for line in page.content.decode().split("<li><code>")[1:]]
    assert len(codes) == 8
    other = Client()
    log_in(other)
    asked = other.get("/u/unit-7/")
    assert asked.status_code == 302
    assert asked.url.startswith("/account/second-factor/")
    assert other.post("/account/second-factor/", {"code": "000000"}).status_code == 400
    lead.staticdevice_set.update(throttling_failure_count=0)  # a wrong code makes the next one wait
    assert other.post("/account/second-factor/", {"code": codes[0], "next": "/u/unit-7/"}).url == "/u/unit-7/"
    assert other.get("/u/unit-7/").status_code == 200
    third = Client()
    log_in(third)
    assert third.post("/account/second-factor/", {"code": codes[0]}).status_code == 400  # used up


def test_a_second_factor_cannot_be_replaced_by_somebody_who_has_only_the_password(client, lead):
    set_up_second_factor(client, lead)
    other = Client()
    log_in(other)
    assert other.get("/account/second-factor/new/").url == "/account/second-factor/"
    assert other.post("/account/second-factor/remove").url.startswith("/account/second-factor/")
    assert TOTPDevice.objects.filter(user=lead, confirmed=True).exists()


def test_a_site_may_require_the_second_factor(client, lead, settings):
    settings.SECOND_FACTOR_REQUIRED = True
    log_in(client)
    assert client.get("/u/unit-7/").url == "/account/second-factor/new/"


@pytest.mark.parametrize(
    "where", ["//evil.example/", "https://evil.example/", "javascript:alert(1)", "\\\\evil.example"]
)
def test_after_the_second_factor_only_addresses_of_this_site(client, lead, where):
    set_up_second_factor(client, lead)
    other = Client()
    log_in(other)
    code = lead.staticdevice_set.get().token_set.first().token
    assert other.post("/account/second-factor/", {"code": code, "next": where}).url == "/"


def test_an_invitation_makes_one_account_with_its_role_and_is_used_up(client, lead, unit):
    log_in(client)
    page = client.post("/u/unit-7/members/", {"role": Role.RECORDER}).content.decode()
    link = page.split("<code>")[1].split("</code>")[0]
    assert Invitation.objects.get().token_hash not in page
    form = {"username": "nurse", "password1": PASSWORD, "password2": PASSWORD}
    assert Client().post(link, form).status_code == 302
    assert Membership.objects.get(user__username="nurse").role == Role.RECORDER
    assert Client().post(link, {**form, "username": "another"}).status_code == 410
    assert not User.objects.filter(username="another").exists()
    assert AuditEvent.objects.filter(action="joined", actor="nurse").exists()


def test_a_unit_keeps_its_last_lead(client, lead, unit):
    log_in(client)
    own = Membership.objects.get(user=lead)
    client.post(f"/u/unit-7/members/{own.pk}/change", {"role": "out"})
    client.post(f"/u/unit-7/members/{own.pk}/change", {"role": Role.READER})
    own.refresh_from_db()
    assert own.role == Role.LEAD


def test_a_member_who_was_taken_out_sees_nothing_more(client, lead, unit):
    nurse = User.objects.create_user("nurse", password=PASSWORD)
    member = Membership.objects.create(user=nurse, unit=unit, role=Role.RECORDER)
    theirs = Client()
    log_in(theirs, "nurse")
    assert theirs.get("/u/unit-7/").status_code == 200
    log_in(client)
    client.post(f"/u/unit-7/members/{member.pk}/change", {"role": "out"})
    assert theirs.get("/u/unit-7/").status_code == 404


def test_a_changed_constant_is_in_the_trail_with_its_old_value(client, lead, unit):
    log_in(client)
    form = client.get("/u/unit-7/settings/").context["form"]
    values = {name: field.initial if field.initial is not None else "" for name, field in form.fields.items()}
    values |= {"time_zone": "Europe/Zurich", "paper": "a4", "constant_hufner": "1.36"}
    values.pop("decimal_comma")
    assert client.post("/u/unit-7/settings/", values).status_code == 302
    unit.refresh_from_db()
    assert unit.constants == {"hufner": 1.36}
    assert unit.constants_in_force().hufner == 1.36
    assert unit.carry == {}
    assert unit.uncertainties == {}
    changed = AuditEvent.objects.get(action="changed the unit").detail["changed"]
    assert changed["constants"] == [{}, {"hufner": 1.36}]
    assert changed["time_zone"] == ["UTC", "Europe/Zurich"]


@pytest.mark.parametrize(
    ("field", "value"),
    [("constant_hufner", "13.9"), ("constant_hufner", "nan"), ("shifts", "7 o'clock"), ("time_zone", "Mars/Base"),
     ("carry_hb", "-1"), ("sd_ph", "inf")],
)  # fmt: skip
def test_nonsense_is_refused_and_nothing_is_saved(client, lead, unit, field, value):
    log_in(client)
    form = client.get("/u/unit-7/settings/").context["form"]
    values = {name: item.initial if item.initial is not None else "" for name, item in form.fields.items()}
    values |= {"time_zone": "UTC", "paper": "a4", field: value}
    assert client.post("/u/unit-7/settings/", values).status_code == 400
    unit.refresh_from_db()
    assert (unit.constants, unit.carry, unit.time_zone) == ({}, {}, "UTC")


def test_the_trail_shows_who_did_what_and_narrows(client, lead, unit):
    log_in(client)
    client.post("/u/unit-7/members/", {"role": Role.READER})
    page = client.get("/u/unit-7/trail/?action=invited").content.decode()
    assert "invited" in page
    assert "looked at the trail" not in page.split("<tbody>")[1]
