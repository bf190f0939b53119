"""Drafts: what was typed comes back to the person who typed it, and only to them."""

import json

from worksheet.ward.models import Draft, Entry


def keep(world, **more):
    return world.client.post(world.url("draft_save"), world.gas(form_name="entry", **more))


def test_a_draft_comes_back_with_every_text(world):
    answer = keep(world, hb="9,", note="half a sent", po2_unit="kPa", confirm=["a", "b"])
    assert json.loads(answer.content)["saved"]
    page = world.client.get(world.url("entry_new"))
    html = page.content.decode()
    assert 'value="9,"' in html
    assert "half a sent" in html
    assert "has not been recorded" in html
    assert page.context["slip"].confirmed == {"a", "b"}
    assert Draft.objects.count() == 1
    assert not Entry.objects.exists()


def test_a_draft_belongs_to_one_person_and_stay(world):
    keep(world)
    world.as_("other")
    assert 'value="10.2"' not in world.client.get(world.url("entry_new")).content.decode()


def test_recording_ends_the_draft_and_a_late_draft_does_not_bring_it_back(world):
    slip = world.gas(form_name="entry")
    world.client.post(world.url("draft_save"), slip)
    world.client.post(world.url("entry_new"), slip)
    assert not Draft.objects.exists()
    late = world.client.post(world.url("draft_save"), slip)
    assert late.status_code == 409
    assert not Draft.objects.exists()


def test_start_empty(world):
    keep(world)
    answer = world.client.post(world.url("draft_save"), {"form_name": "entry", "action": "discard"})
    assert answer.headers["Location"] == world.url("entry_new")
    assert not Draft.objects.exists()


def test_a_form_begun_by_somebody_else_is_not_kept_under_my_name(world):
    world.as_("other")
    assert keep(world).status_code == 409
    assert not Draft.objects.exists()


def test_unknown_forms_and_long_texts_are_refused(world):
    assert world.client.post(world.url("draft_save"), {"form_name": "x"}).status_code == 400
    assert keep(world, note="x" * 21_000).status_code == 400
    assert not Draft.objects.exists()


def test_an_ended_session_keeps_nothing_for_nobody_but_a_fresh_login_goes_on(world):
    slip = world.gas(form_name="entry")
    world.client.logout()
    for name in ("draft_save", "entry_live", "entry_new"):
        assert "/login/" in world.client.post(world.url(name), slip).headers["Location"]
    assert "/login/" in world.client.get("/form/token").headers["Location"]
    world.as_("nurse")
    data = json.loads(world.client.get("/form/token").content)
    assert data["user"] == "nurse"
    assert len(data["token"]) == 64
    assert keep(world).status_code == 200


def test_drafts_of_a_correction_and_of_an_event_are_apart(world):
    world.client.post(world.url("entry_new"), world.gas())
    entry = Entry.objects.get()
    world.client.post(world.url("draft_save"), world.gas(form_name=f"correct-{entry.pk}", hb="7.7", key="c"))
    event = world.blank(form_name="event", kind="1", amount="2", note="half", key="e")
    world.client.post(world.url("draft_save"), event)
    assert 'value="7.7"' in world.client.get(world.url("entry_correct", entry.pk)).content.decode()
    assert 'value="7.7"' not in world.client.get(world.url("entry_new")).content.decode()
    page = world.client.get(world.url("event_new"))
    assert "half" in page.content.decode()
    assert page.context["form"].amount_text == "2"


def test_who_may_not_record_may_not_keep(world):
    world.as_("reader")
    assert keep(world).status_code == 403
    assert world.client.get(world.url("draft_save")).status_code == 405
