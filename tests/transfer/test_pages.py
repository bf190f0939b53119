"""The pages: send, look, settle, store; the queue; dead letters; downloads; who may do what."""

import json

import pytest
from django.core.files.uploadedfile import SimpleUploadedFile
from django.urls import reverse

from worksheet.transfer import work
from worksheet.transfer.models import ColumnMapping, MessageState, RawMessage, Upload, UploadState
from worksheet.ward.models import AuditEvent, Entry, Patient, Stay

GOOD = (
    "stay,time,site,ph,po2\nK-2041,2026-02-11T05:40:00+01:00,arterial,7.30,90\n"
    "NEW-1,2026-02-11T05:40:00+01:00,arterial,7.2,80\n"
)


@pytest.fixture
def page(client, people, unit, stay):
    client.force_login(people["nurse"], backend="django.contrib.auth.backends.ModelBackend")
    return client


def at(name, *args):
    return reverse(f"transfer_{name}", args=["u7", *args])


def send(client, text, name="gases.csv", follow=True):
    data = text.encode() if isinstance(text, str) else text
    return client.post(at("send"), {"file": SimpleUploadedFile(name, data)}, follow=follow)


def login(client, user):
    client.force_login(user, backend="django.contrib.auth.backends.ModelBackend")


def test_send_look_store(page):
    answer = send(page, GOOD)
    assert answer.status_code == 200
    text = answer.content.decode()
    assert "nobody in this unit has the identifier NEW-1" in text
    assert "Store 1 row" in text
    assert not Entry.objects.exists()
    upload = Upload.objects.get()
    stored = page.post(at("confirm", upload.pk), follow=True)
    assert "1 new" in stored.content.decode()
    assert Entry.objects.get().stay.reference == "K-2041"
    upload.refresh_from_db()
    assert (upload.state, upload.content) == (UploadState.STORED, None)
    page.post(at("confirm", upload.pk))
    assert Entry.objects.count() == 1
    report = page.get(at("report", upload.pk)).json()
    assert [row["fate"] for row in report["details"]] == ["new", "unmatched"]


def test_sending_the_same_file_again_says_so_and_changes_nothing(page):
    send(page, GOOD)
    page.post(at("confirm", Upload.objects.get().pk))
    send(page, GOOD)
    again = Upload.objects.first()
    assert again.report["fates"] == {"same": 1, "unmatched": 1}
    page.post(at("confirm", again.pk))
    assert Entry.objects.count() == 1


def test_new_stays_only_when_asked(page):
    send(page, GOOD)
    upload = Upload.objects.get()
    page.post(at("settle", upload.pk), {"create": "on"})
    upload.refresh_from_db()
    assert upload.report["fates"] == {"new": 2}
    page.post(at("confirm", upload.pk))
    assert Stay.objects.filter(reference="NEW-1").count() == 1


def test_questions_stop_storing_until_settled_and_the_mapping_is_kept(page):
    text = "Patient;Zeitpunkt;PaO2;Hb\nK-2041;11.02.2026 05:40;12,1;9,5\nK-2041;11.02.2026 06:40;11,8;9,4\n"
    shown = send(page, text).content.decode()
    assert "To be settled first" in shown
    assert "kPa is proposed" in shown
    upload = Upload.objects.get()
    page.post(at("confirm", upload.pk))
    assert not Entry.objects.exists()
    choices = {
        "column-0": "stay",
        "column-1": "time",
        "column-2": "po2|kPa",
        "site-2": "1",
        "column-3": "hb|g/dL",
        "zone": "Europe/Zurich",
        "order": "dmy",
    }
    page.post(at("settle", upload.pk), choices)
    upload.refresh_from_db()
    assert (upload.report["questions"], upload.report["fates"]) == ([], {"new": 2})
    page.post(at("confirm", upload.pk), {"mapping_name": "ward sheet"})
    assert Entry.objects.count() == 2
    assert ColumnMapping.objects.get().name == "ward sheet"
    send(page, text)
    assert Upload.objects.first().report["questions"] == []
    assert Upload.objects.first().report["fates"] == {"same": 2}


@pytest.mark.parametrize(
    "content,name,words",
    [
        (b"", "a.csv", "empty"),
        (b"%PDF-1.7", "a.csv", "This is a PDF"),
        (b"hello", "a.xlsx", "the content is none"),
        (b"stay,time\x00,ph\nA,b,c\n", "a.csv", "NUL"),
        (b"nothing here", "a.csv", "No header row"),
    ],
)
def test_files_that_cannot_be_read_say_why(page, content, name, words):
    answer = send(page, content, name)
    assert words in answer.content.decode()
    assert not Entry.objects.exists()


def test_choices_that_do_not_exist_are_refused(page):
    send(page, GOOD)
    upload = Upload.objects.get()
    for bad in ({"zone": "Mars/Base"}, {"column-0": "sodium|mmol/L"}, {"column-0": "po2|furlong"}):
        answer = page.post(at("settle", upload.pk), bad, follow=True)
        assert answer.status_code == 200
        assert "not a time zone" in answer.content.decode() or "does not exist" in answer.content.decode()


def test_text_of_a_file_is_shown_as_text(page):
    send(page, 'stay,time,site,ph\n<script>alert(1)</script>,2026-02-11T05:40:00Z,"<b>x</b>",7.3\n')
    text = page.get(at("upload", Upload.objects.get().pk)).content.decode()
    assert "<script>alert" not in text
    assert "&lt;b&gt;x" in text


def test_discard_forgets_the_content(page):
    send(page, GOOD)
    upload = Upload.objects.get()
    page.post(at("discard", upload.pk))
    upload.refresh_from_db()
    assert (upload.state, upload.content, upload.details) == (UploadState.DISCARDED, None, None)


def test_long_files_are_read_in_a_process_of_their_own(page, monkeypatch):
    started = []
    monkeypatch.setattr(work, "AT_ONCE", 10)

    class Process:
        pid = 2**22 + 5  # no such process

        def __init__(self, command, **more):
            started.append(command)

        def poll(self):
            return None

    monkeypatch.setattr(work.subprocess, "Popen", Process)
    answer = send(page, GOOD)
    assert started[0][2:] == ["django", "run_upload", str(Upload.objects.get().pk), "read"]
    assert "You can leave this page" in answer.content.decode()
    fragment = page.get(at("upload", Upload.objects.get().pk), headers={"HX-Request": "true"})
    assert fragment.content.decode().lstrip().startswith('<div id="progress"')
    work._running.clear()
    assert (
        "was interrupted. Nothing of it was stored" in page.get(at("upload", Upload.objects.get().pk)).content.decode()
    )
    monkeypatch.setattr(work, "AT_ONCE", 100_000)
    page.post(at("again", Upload.objects.get().pk))
    assert Upload.objects.get().state == UploadState.READY


def test_a_fault_while_storing_stores_nothing_and_says_so(page, monkeypatch):
    send(page, GOOD)
    upload = Upload.objects.get()

    def broken(*args, **kwargs):
        raise RuntimeError("disk full")

    monkeypatch.setattr(work.pipeline.commit, "correct", broken)
    answer = page.post(at("confirm", upload.pk), follow=True)
    assert "nothing was stored" in answer.content.decode()
    assert not Entry.objects.exists()


def test_queue_try_again_assign_and_close(page, unit, people):
    send(page, GOOD)
    page.post(at("confirm", Upload.objects.get().pk))
    waiting = unit.queued_rows.get()
    assert "nobody in this unit has the identifier NEW-1" in page.get(at("queue")).content.decode()
    page.post(at("queue_act"), {"row": waiting.pk, "action": "retry"})
    waiting.refresh_from_db()
    assert waiting.closed_at is None
    page.post(at("queue_act"), {"row": waiting.pk, "action": "close", "reason": ""})
    waiting.refresh_from_db()
    assert waiting.closed_at is None
    Stay.objects.create(unit=unit, patient=Patient.objects.create(identifier="P-8"), reference="S-8")
    page.post(at("queue_act"), {"row": waiting.pk, "action": "retry", "stay": "S-8"})
    waiting.refresh_from_db()
    assert waiting.closed_how == "stored for S-8"
    assert Entry.objects.get(stay__reference="S-8").po2 == 80
    assert AuditEvent.objects.filter(action="closed queued rows").count() == 1
    assert "Nothing waits" in page.get(at("queue")).content.decode()


def test_queue_conflict_can_correct_the_stored_value(page, unit):
    one = "stay,time,site,ph\nK-2041,2026-02-11T05:40:00Z,arterial,{}\n"
    for value in ("7.3", "7.1"):
        send(page, one.format(value))
        page.post(at("confirm", Upload.objects.first().pk))
    waiting = unit.queued_rows.get()
    assert waiting.fate == "conflict"
    page.post(at("queue_act"), {"row": waiting.pk, "action": "replace"})
    assert Entry.objects.current().get().ph == 7.1


GAS = (
    "MSH|^~\\&|POC|LAB|HIS|U|20260211060000||ORU^R01|M1|P|2.5.1\rPID|||K-2041^^^UNIT7^MR\r"
    "OBR|1|||24336-0^Gas^LN|||20260211054000\rOBX|1|NM|2744-1^pH^LN||7.3||||||F\r"
)


def test_dead_letters_can_be_read_replayed_and_closed(client, people, unit, stay):
    login(client, people["lead"])
    letter = RawMessage.objects.create(
        unit=unit,
        sender="POC|LAB",
        control_id="M1",
        digest="x",
        content=GAS.encode(),
        state=MessageState.DEAD,
        reason="the database refused the message",
    )
    assert "the database refused" in client.get(at("letters")).content.decode()
    assert "2744-1" in client.get(at("letter", letter.pk)).content.decode()
    client.post(at("replay", letter.pk))
    letter.refresh_from_db()
    assert (letter.state, Entry.objects.get().ph) == (MessageState.STORED, 7.3)
    client.post(at("replay", letter.pk))
    assert Entry.objects.count() == 1
    assert "M1" in client.get(at("letters") + "?all=1").content.decode()
    bad = RawMessage.objects.create(
        unit=unit, sender="s", control_id="M2", digest="y", content=b"junk", state=MessageState.DEAD
    )
    assert "still not stored" in client.post(at("replay", bad.pk), follow=True).content.decode()
    client.post(at("dismiss", bad.pk))
    bad.refresh_from_db()
    assert bad.state == MessageState.DISMISSED


def test_messages_without_a_unit_are_for_the_administrator(client, people, unit):
    lost = RawMessage.objects.create(sender="?", control_id="M9", digest="z", content=b"x", state=MessageState.DEAD)
    login(client, people["lead"])
    assert client.get(at("letter", lost.pk)).status_code == 404
    people["lead"].is_superuser = True
    people["lead"].save()
    assert client.get(at("letter", lost.pk)).status_code == 200


def test_downloads(client, people, unit, stay, bring):
    bring(GOOD)
    login(client, people["reader"])
    one = client.get(reverse("transfer_stay_csv", args=["u7", "K-2041"]))
    assert one["Content-Disposition"] == 'attachment; filename="K-2041.csv"'
    assert one.getvalue().decode().count("\r\n") == 2
    bundle = json.loads(client.get(reverse("transfer_stay_fhir", args=["u7", "K-2041"])).getvalue())
    assert bundle["resourceType"] == "Bundle"
    hidden = client.get(reverse("transfer_stay_csv", args=["u7", "K-2041"]) + "?deidentify=1")
    assert "K-2041" not in hidden.getvalue().decode() + hidden["Content-Disposition"]
    assert client.get(reverse("transfer_unit_csv", args=["u7"])).status_code == 403
    login(client, people["lead"])
    assert client.get(reverse("transfer_unit_csv", args=["u7"])).getvalue().decode().count("\r\n") == 3
    assert AuditEvent.objects.filter(action="exported").count() == 4


PAGES = [("home", []), ("queue", []), ("letters", []), ("unit_csv", []), ("unit_fhir", [])]
POSTS = [
    ("send", []),
    ("queue_act", []),
    ("settle", [1]),
    ("confirm", [1]),
    ("discard", [1]),
    ("again", [1]),
    ("replay", [1]),
    ("dismiss", [1]),
    ("forget_mapping", [1]),
]


@pytest.mark.parametrize("who,status", [("stranger", 404), ("reader", 403)])
def test_who_may_not(client, people, unit, who, status):
    login(client, people[who])
    for name, more in PAGES:
        assert client.get(at(name, *more)).status_code == status, name
    for name, more in POSTS:
        assert client.post(at(name, *more)).status_code == status, name
        assert client.get(at(name, *more)).status_code == 405, name


def test_nobody_sees_anything_without_a_login(client, unit):
    for name, more in PAGES:
        assert client.get(at(name, *more)).status_code == 302, name


def test_an_upload_of_another_unit_is_not_found(page, people, unit):
    send(page, GOOD)
    login(page, people["stranger"])
    assert page.get(at("upload", Upload.objects.get().pk)).status_code == 404


@pytest.mark.parametrize("count", [1, 40])
def test_query_counts_do_not_grow(page, unit, count, django_assert_max_num_queries):
    rows = "".join(f"N-{n},2026-02-11T05:40:00Z,arterial,7.3,90\n" for n in range(count))
    send(page, "stay,time,site,ph,po2\n" + rows)
    page.post(at("confirm", Upload.objects.get().pk))
    with django_assert_max_num_queries(12):
        page.get(at("queue"))
    with django_assert_max_num_queries(12):
        page.get(at("upload", Upload.objects.get().pk))
    with django_assert_max_num_queries(12):
        page.get(at("home"))
