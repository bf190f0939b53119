"""Logging in, staying in, a second factor, invitations."""

import re
import time
from datetime import timedelta

import pytest
from django.contrib.auth.hashers import make_password
from django.contrib.auth.password_validation import validate_password
from django.core.exceptions import ValidationError
from django.test import Client
from django.utils import timezone
from django_otp.oath import TOTP
from django_otp.plugins.otp_totp.models import TOTPDevice

from worksheet.ward.logins import client_address
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
    return device, client.post("/account/second-factor/new/", {"code": code_of(device), "password": PASSWORD})


def recovery_codes(page):
    return [line.split("</code>")[0] for line in page.content.decode().split("<li><code>")[1:]]


def test_a_second_factor_is_asked_once_it_is_set_up(client, lead):
    _, page = set_up_second_factor(client, lead)
    assert page.status_code == 200
    codes = recovery_codes(page)
    assert len(set(codes)) == 8
    assert not lead.staticdevice_set.get().token_set.filter(token__in=codes).exists()  # hashed, as passwords are
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
    code = recovery_codes(set_up_second_factor(client, lead)[1])[0]
    other = Client()
    log_in(other)
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


def test_a_second_factor_needs_the_password_once_more(client, lead):
    log_in(client)
    client.get("/account/second-factor/new/")
    device = TOTPDevice.objects.get(user=lead)
    assert client.post("/account/second-factor/new/", {"code": code_of(device), "password": "no"}).status_code == 400
    assert not TOTPDevice.objects.filter(user=lead, confirmed=True).exists()
    right = {"code": code_of(device), "password": PASSWORD}
    assert client.post("/account/second-factor/new/", right).status_code == 200
    client.post("/account/second-factor/remove", {"password": "no"})
    assert TOTPDevice.objects.filter(user=lead, confirmed=True).exists()
    client.post("/account/second-factor/remove", {"password": PASSWORD})
    assert not TOTPDevice.objects.filter(user=lead).exists()


def test_the_session_key_changes_at_the_login_and_at_the_second_factor(client, lead):
    code = recovery_codes(set_up_second_factor(client, lead)[1])[0]
    other = Client()
    other.get("/login/")
    assert "worksheet" not in other.cookies  # no session before a login
    log_in(other)
    first = other.session.session_key
    assert len(first) == 32
    other.post("/account/second-factor/", {"code": code})
    assert other.session.session_key != first
    assert not LoginSession.objects.filter(session_key=first).exists()


def test_a_unit_may_require_the_second_factor(client, lead, unit):
    unit.second_factor = True
    unit.save()
    log_in(client)
    assert client.get("/u/unit-7/").url == "/account/second-factor/new/"
    assert client.get("/u/unit-7/trail/").url == "/account/second-factor/new/"


def test_after_a_hundred_wrong_passwords_in_a_row_an_account_is_shut_from_everywhere(client, lead, settings):
    settings.WRONG_LOGINS_CAP = 5
    for n in range(5):
        log_in(Client(REMOTE_ADDR=f"10.2.0.{n}"), password="wrong")
    assert User.objects.get(pk=lead.pk).wrong_logins == 5
    assert log_in(Client(REMOTE_ADDR="10.3.0.1")).status_code == 200  # refused, though the password is right
    admin = User.objects.create_superuser("admin", password=PASSWORD)
    client.force_login(admin, backend="django.contrib.auth.backends.ModelBackend")
    member = Membership.objects.get(user=lead)
    assert "locked after 5 wrong passwords" in client.get("/u/unit-7/members/").content.decode()
    client.post(f"/u/unit-7/members/{member.pk}/account", {"do": "open", "reason": "asked in person"})
    assert log_in(Client(REMOTE_ADDR="10.3.0.1")).status_code == 302


def test_a_right_password_sets_the_count_back(lead):
    log_in(Client(REMOTE_ADDR="10.2.0.1"), password="wrong")
    log_in(Client(REMOTE_ADDR="10.2.0.2"))
    assert User.objects.get(pk=lead.pk).wrong_logins == 0


def test_wrong_logins_and_locks_are_in_the_trail_once_and_without_what_was_typed(client, lead, settings):
    for _ in range(settings.AXES_FAILURE_LIMIT + 4):
        log_in(client, password="wrong")
    log_in(client, name="my-password-by-mistake", password="x")
    assert AuditEvent.objects.filter(action="login failed", subject="lead").count() == settings.AXES_FAILURE_LIMIT
    assert AuditEvent.objects.filter(action="locked", subject="lead").count() == 1
    assert User.objects.get(pk=lead.pk).wrong_logins == settings.AXES_FAILURE_LIMIT  # a lock is not a way to shut it
    told = str(list(AuditEvent.objects.values()))
    assert "my-password-by-mistake" not in told
    assert "wrong'" not in told
    assert "127.0.0.1" in told


def test_an_unknown_name_and_a_wrong_password_are_answered_alike(client, lead):
    known = log_in(client, password="wrong").content.decode().replace('value="lead"', "")
    unknown = log_in(client, name="nobody", password="wrong").content.decode().replace('value="nobody"', "")
    token = re.compile(r'(csrfmiddlewaretoken" value=|X-CSRFToken": )"[^"]+"')
    assert token.sub("", known) == token.sub("", unknown)


@pytest.mark.parametrize(
    ("proxies", "told", "seen"),
    [(0, "6.6.6.6", "127.0.0.1"), (1, "6.6.6.6, 10.0.0.9", "10.0.0.9"), (2, "6.6.6.6, 10.0.0.9, 10.0.0.1", "10.0.0.9"),
     (1, "", "127.0.0.1"), (1, "nonsense", None), (1, "2001:db8::1", "2001:db8::1")],
)  # fmt: skip
def test_a_client_cannot_choose_its_address(rf, settings, proxies, told, seen):
    settings.PROXIES = proxies
    assert client_address(rf.get("/", headers={"x-forwarded-for": told})) == seen


def test_an_account_that_is_shut_sees_nothing_at_once(client, lead, unit):
    nurse = User.objects.create_user("nurse", password=PASSWORD)
    member = Membership.objects.create(user=nurse, unit=unit, role=Role.RECORDER)
    theirs = Client()
    log_in(theirs, "nurse")
    assert theirs.get("/u/unit-7/").status_code == 200
    log_in(client)
    where = f"/u/unit-7/members/{member.pk}/account"
    client.post(where, {"do": "shut", "reason": ""})
    assert theirs.get("/u/unit-7/").status_code == 200  # no reason, nothing done
    client.post(where, {"do": "shut", "reason": "left the hospital"})
    assert theirs.get("/u/unit-7/", headers={"HX-Trigger": "live"}).status_code == 302
    assert log_in(theirs, "nurse").status_code == 200
    assert AuditEvent.objects.get(action="shut account").detail["reason"] == "left the hospital"
    client.post(where, {"do": "open", "reason": "came back"})
    assert log_in(theirs, "nurse").status_code == 302


def test_a_link_for_a_new_password_works_once_and_keeps_the_second_factor(client, lead, unit):
    nurse = User.objects.create_user("nurse", password=PASSWORD)
    member = Membership.objects.create(user=nurse, unit=unit, role=Role.RECORDER)
    TOTPDevice.objects.create(user=nurse, confirmed=True)
    theirs = Client()
    log_in(theirs, "nurse")
    log_in(client)
    page = client.post(f"/u/unit-7/members/{member.pk}/account", {"do": "password", "reason": "forgot it"})
    link = page.content.decode().split("<code>")[1].split("</code>")[0]
    fresh = Client()
    form_at = fresh.get(link).url
    weak = {"new_password1": "short", "new_password2": "short"}
    assert b"too short" in fresh.post(form_at, weak).content
    new = {"new_password1": "nine blue ladders sing", "new_password2": "nine blue ladders sing"}
    assert fresh.post(form_at, new).status_code == 302
    assert b"used already" in Client().get(link).content
    assert theirs.get("/account/").status_code == 302
    assert log_in(theirs, "nurse").status_code == 200
    assert log_in(theirs, "nurse", "nine blue ladders sing").status_code == 302
    assert theirs.get("/u/unit-7/").url.startswith("/account/second-factor/")


@pytest.mark.parametrize("what", ["shut", "end", "password", "factor"])
def test_a_lead_gets_no_hold_of_an_account_that_reaches_further(client, lead, unit, what):
    admin = User.objects.create_superuser("admin")
    elsewhere = User.objects.create_user("elsewhere")
    Membership.objects.create(user=elsewhere, unit=Unit.objects.create(name="Unit 8", slug="unit-8"), role=Role.LEAD)
    log_in(client)
    for who in (admin, elsewhere, lead):
        member, _ = Membership.objects.get_or_create(user=who, unit=unit)
        where = f"/u/unit-7/members/{member.pk}/account"
        assert client.post(where, {"do": what, "reason": "because"}).status_code == 403
    assert not AuditEvent.objects.filter(detail__reason="because").exists()


def test_a_member_taken_out_and_a_refusal_are_in_the_trail_of_the_unit(client, lead, unit):
    outsider = User.objects.create_user("outsider", password=PASSWORD)
    theirs = Client()
    log_in(theirs, "outsider")
    assert theirs.get("/u/unit-7/").status_code == 404
    assert AuditEvent.objects.get(action="refused").detail == {"page": "unit_review"}
    log_in(client)
    page = client.get("/u/unit-7/trail/").content.decode().split("<tbody>")[1]
    assert "outsider" in page
    assert outsider.memberships.count() == 0


def test_how_long_a_login_lasts_is_told_without_extending_it(client, lead, settings):
    log_in(client)
    session = client.session
    session["seen"] = seen = time.time() - 600
    session.save()
    told = client.get("/account/session-left").json()
    assert told["name"] == "lead"
    assert abs(told["seconds"] - (settings.SESSION_IDLE_SECONDS - 600)) <= 2
    assert client.session["seen"] == seen
    assert client.post("/account/session-left").json()["seconds"] > settings.SESSION_IDLE_SECONDS - 3
    assert 'data-seconds-left="2' in client.get("/account/").content.decode()


@pytest.mark.parametrize("length", [64, 256])
def test_long_passwords_with_spaces_and_any_letters_are_kept_exactly(client, lead, length):
    password = (" Grüße vom Näherhof, größer als zwölf Öfen " * 9)[: length - 1] + " "
    validate_password(password.strip() + "xyz", lead)
    lead.set_password(password)
    lead.save()
    assert log_in(Client(), password=password.strip()).status_code == 200
    assert log_in(Client(), password=password.lower()).status_code == 200
    assert log_in(Client(), password=password).status_code == 302


def test_fourteen_characters_are_too_few_and_fifteen_enough():
    with pytest.raises(ValidationError):
        validate_password("vrxkmtqzwlpnbd")
    validate_password("vrxkmtqzwlpnbdh")  # no rule of composition


def test_a_site_may_give_a_list_of_breached_passwords(tmp_path, settings):
    (tmp_path / "list").write_text("one\nseven green kettles hum\ntwo\n")
    settings.PASSWORD_LIST = str(tmp_path / "list")
    with pytest.raises(ValidationError, match="breach"):
        validate_password(PASSWORD)
    validate_password("nine blue ladders sing")


def test_an_older_hash_is_renewed_at_the_login(client, lead, settings):
    settings.PASSWORD_HASHERS = [
        "django.contrib.auth.hashers.Argon2PasswordHasher",
        "django.contrib.auth.hashers.PBKDF2PasswordHasher",
    ]
    lead.password = make_password(PASSWORD, hasher="pbkdf2_sha256")
    lead.save()
    assert log_in(client).status_code == 302
    assert User.objects.get(pk=lead.pk).password.startswith("argon2$argon2id$")


def test_an_invitation_ends_after_three_days(unit, lead):
    made, token = Invitation.make(unit, Role.READER, lead)
    assert len(token) >= 22  # 128 bits
    Invitation.objects.filter(pk=made.pk).update(expires_at=timezone.now() - timedelta(seconds=1))
    assert Client().get(f"/invitation/{token}/").status_code == 410
    assert made.expires_at - timezone.now() <= timedelta(hours=72)


def test_forms_for_passwords_help_password_managers(client, lead):
    page = Client().get("/login/").content.decode()
    assert 'autocomplete="username"' in page
    assert 'autocomplete="current-password"' in page
    assert 'type="password"' in page
    log_in(client)
    assert 'autocomplete="new-password"' in client.get("/account/").content.decode()
    assert 'autocomplete="one-time-code"' in client.get("/account/second-factor/new/").content.decode()


def test_wrong_old_passwords_lock_as_wrong_logins_do(client, lead, settings):
    log_in(client)
    new = "nine blue ladders sing"
    form = {"old_password": "guess", "new_password1": new, "new_password2": new}
    for _ in range(settings.AXES_FAILURE_LIMIT):
        answer = client.post("/account/", form)
    assert answer.status_code == 429
    lead.refresh_from_db()
    assert not lead.check_password(new)


def test_a_fresh_site_has_no_account():
    assert not User.objects.exists()


def test_every_limit_of_carrying_has_its_words():
    from dataclasses import fields

    from worksheet.oxygen.constants import CarryLimits
    from worksheet.review.unit_settings import CARRY

    assert set(CARRY) == {field.name for field in fields(CarryLimits)}


def test_logins_outlive_a_change_of_the_key(client, lead, settings):
    log_in(client)
    asleep = Client()
    log_in(asleep)
    settings.SECRET_KEY, settings.SECRET_KEY_FALLBACKS = "n" * 60, [settings.SECRET_KEY]
    assert client.get("/account/").status_code == 200
    settings.SECRET_KEY_FALLBACKS = []
    assert client.get("/account/").status_code == 200  # signed anew meanwhile
    assert asleep.get("/account/").status_code == 302


def test_the_units_of_a_unit_are_shown_to_its_readers_unless_they_chose_their_own(client, lead, unit):
    from worksheet.ward.display import Display

    log_in(client)
    form = client.get("/u/unit-7/settings/").context["form"]
    values = {name: item.initial if item.initial is not None else "" for name, item in form.fields.items()}
    values |= {"time_zone": "UTC", "paper": "a4", "unit_po2": "kPa", "unit_hb": "g/L"}
    for box in ("decimal_comma", "second_factor"):
        values.pop(box)
    assert client.post("/u/unit-7/settings/", values).status_code == 302
    unit.refresh_from_db()
    assert unit.units == {"po2": "kPa", "hb": "g/L"}
    assert Display.of(lead, unit).value("po2", 90.0, with_unit=True) == "12.0 kPa"
    lead.preferences = {"units": {"po2": "mm[Hg]"}}
    assert Display.of(lead, unit).value("po2", 90.0, with_unit=True) == "90 mmHg"


def test_the_lead_finds_every_choice_of_the_unit_on_its_page(client, lead, unit):
    log_in(client)
    answer = client.get("/u/unit-7/settings/")
    text = answer.content.decode()
    assert [name for name in answer.context["form"].fields if f'name="{name}"' not in text] == []


def test_a_changed_unit_of_display_is_in_the_trail(client, lead, unit):
    log_in(client)
    form = client.get("/u/unit-7/settings/").context["form"]
    values = {name: field.initial if field.initial is not None else "" for name, field in form.fields.items()}
    values |= {"time_zone": "UTC", "paper": "a4"}
    values = {name: value for name, value in values.items() if name not in {"decimal_comma", "second_factor"}}
    where = next(name for name in form.fields if name.endswith("po2") and name.startswith("unit"))
    other = next(code for code, _ in form.fields[where].choices if code != form.fields[where].initial)
    assert client.post("/u/unit-7/settings/", values | {where: other}).status_code == 302
    assert AuditEvent.objects.get(action="changed the unit").detail["changed"] == {"units": [{}, {"po2": other}]}
