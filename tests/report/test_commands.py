"""The commands of this room: files written whole, words instead of tracebacks, and the fingerprint checked."""

from datetime import timedelta

import pytest
from django.core.management import CommandError, call_command
from django.db import connection

from tests.report import world
from worksheet.oxygen.readings import Site
from worksheet.ward import record
from worksheet.ward.models import AuditEvent, Entry

pytestmark = pytest.mark.django_db


@pytest.fixture
def stay():
    made = world.make_stay()
    world.add_gases(made, 3)
    return made


@pytest.fixture
def printed(stay, tmp_path):
    file = tmp_path / "t.pdf"
    call_command("timeline_pdf", "T-100", output=str(file))
    return file


def test_writes_the_file_and_says_so(stay, tmp_path, capsys):
    file = tmp_path / "t.pdf"
    call_command("timeline_pdf", "north/T-100", output=str(file))
    assert file.read_bytes().startswith(b"%PDF-")
    assert capsys.readouterr().out == f"Wrote {file}: T-100, 3 entries.\n"
    assert [f.name for f in tmp_path.iterdir()] == ["t.pdf"]


def test_span(stay, tmp_path, capsys):
    call_command(
        "timeline_pdf", "T-100", output=str(tmp_path / "t.pdf"), since="2026-03-28T20:30", until="2026-03-28T22:00"
    )
    assert "1 entries" in capsys.readouterr().out  # 20:00 UTC is 21:00 in the unit's zone


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["T-999"], "There is no stay 'T-999'."),
        (["south/T-100"], "There is no unit 'south'. Known: north."),
        (["T-100", "--since", "yesterday"], "--since 'yesterday' is not a time"),
        (["T-100", "--since", "2026-03-29T10:00", "--until", "2026-03-29T09:00"], "--since must lie before --until."),
    ],
)
def test_bad_input_is_told_in_words(stay, tmp_path, arguments, words):
    with pytest.raises(CommandError) as told:
        call_command("timeline_pdf", *arguments, "--output", str(tmp_path / "t.pdf"))
    assert words in str(told.value)
    assert not list(tmp_path.iterdir())


def test_folder_that_is_not_there(stay, tmp_path):
    with pytest.raises(CommandError, match="Cannot write"):
        call_command("timeline_pdf", "T-100", output=str(tmp_path / "none" / "t.pdf"))


def test_fingerprint_holds(printed, capsys):
    call_command("verify_pdf", str(printed))
    assert "Holds: T-100" in capsys.readouterr().out


def test_fingerprint_of_deidentified_document_holds(stay, tmp_path, capsys):
    file = tmp_path / "d.pdf"
    call_command("timeline_pdf", "T-100", output=str(file), deidentify=True)
    capsys.readouterr()
    call_command("verify_pdf", str(file))
    assert "this very file was made" in capsys.readouterr().out


def test_entries_recorded_later_are_counted_not_held_against_it(stay, printed, capsys):
    when = world.START + timedelta(hours=1)
    record.record(stay, world.nurse(), record.NewEntry(when, Site.ARTERIAL, {"po2": 88.0}))
    call_command("verify_pdf", str(printed))
    assert "1 entries of its span were recorded since" in capsys.readouterr().out


def test_changed_data_are_noticed(stay, printed):
    without_guard("ward_entry")
    Entry.objects.filter(stay=stay, po2=96.0).update(hb=12.0)
    with pytest.raises(CommandError, match="are not those this document was made from"):
        call_command("verify_pdf", str(printed))


def without_guard(table: str) -> None:
    """Take the triggers off that refuse a change: somebody with the keys of the database would."""
    with connection.cursor() as cursor:
        if connection.vendor == "postgresql":
            cursor.execute("SET CONSTRAINTS ALL IMMEDIATE")
            cursor.execute(f"ALTER TABLE {table} DISABLE TRIGGER USER")
            return
        cursor.execute("SELECT name FROM sqlite_master WHERE type = 'trigger' AND tbl_name = %s", [table])
        for (name,) in cursor.fetchall():
            cursor.execute(f"DROP TRIGGER {name}")


def test_changed_constants_are_noticed(stay, printed):
    stay.unit.constants = {"hufner": 1.34}
    stay.unit.save()
    with pytest.raises(CommandError, match="constants have changed"):
        call_command("verify_pdf", str(printed))


def test_changed_patient_facts_are_noticed(stay, printed):
    stay.weight = 60.0
    stay.save()
    with pytest.raises(CommandError, match="are not those"):
        call_command("verify_pdf", str(printed))


def test_changed_file_is_noticed(printed, capsys):
    printed.write_bytes(printed.read_bytes() + b"\n")
    call_command("verify_pdf", str(printed))
    assert "the file itself was changed" in capsys.readouterr().out


def test_foreign_files_are_refused(tmp_path):
    file = tmp_path / "x.pdf"
    with pytest.raises(CommandError, match="Cannot read"):
        call_command("verify_pdf", str(file))
    file.write_bytes(b"%PDF-1.7 nothing")
    with pytest.raises(CommandError, match="carries no fingerprint"):
        call_command("verify_pdf", str(file))
    file.write_bytes(b"fingerprint-sha256:" + b"0" * 64)
    with pytest.raises(CommandError, match="was printed from this database"):
        call_command("verify_pdf", str(file))


def test_audit_tells_what_was_printed(printed):
    event = AuditEvent.objects.get(action="printed")
    assert event.detail["document"] == "timeline"
    assert len(event.detail["fingerprint"]) == 64
