"""The unit review stays on one page, however many beds and whatever was found."""

import io
from datetime import timedelta

import pikepdf
import pytest
from django.core.management import CommandError, call_command

from tests.report import world
from tests.report.test_timeline import assert_inside_the_margins, flat, words_of
from worksheet.report.unit import unit_pdf, window_since
from worksheet.ward.display import Display
from worksheet.ward.models import AuditEvent, Unit

pytestmark = pytest.mark.django_db


def printed(unit: Unit) -> bytes:
    now = world.START + timedelta(hours=15)
    return unit_pdf(
        unit, window_since(unit, world.START - timedelta(hours=1), now), Display.of(None, unit), "dr.reader"
    )


@pytest.mark.parametrize("beds", [1, 12, 40])
def test_one_landscape_page(beds, pdftotext):
    for n in range(beds):
        world.add_gases(world.make_stay(f"T-{n:03}"), 3, drop=("cohb", "methb", "cardiac_output") if n % 3 else ())
    data = printed(Unit.objects.get(slug="north"))
    pdf = pikepdf.open(io.BytesIO(data))
    assert len(pdf.pages) == 1
    box = [float(v) for v in pdf.pages[0].MediaBox]
    assert box[2] > box[3]
    assert_inside_the_margins(data)
    text = flat(words_of(data, pdftotext))
    for n in range(beds):
        assert f"T-{n:03}" in text
    assert f"{beds} beds" in text
    assert "Page 1 of 1" in text


def test_empty_unit(pdftotext):
    unit = Unit.objects.create(name="Unit East", slug="east")
    assert "No patient is in this unit." in flat(words_of(printed(unit), pdftotext))


def test_stay_without_entries_is_on_the_page(pdftotext):
    stay = world.make_stay()
    assert "no arterial gas" in flat(words_of(printed(stay.unit), pdftotext))


def test_steps_are_told_in_words_too(pdftotext):
    stay = world.make_stay()
    world.add_gases(stay, 8)
    text = flat(words_of(printed(stay.unit), pdftotext))
    assert "Failed: haemoglobin." in text
    assert "haemoglobin −" in text


def test_command(tmp_path, capsys):
    stay = world.make_stay()
    world.add_gases(stay, 2)
    file = tmp_path / "unit.pdf"
    call_command("unit_pdf", "north", output=str(file))
    assert file.read_bytes().startswith(b"%PDF-")
    assert capsys.readouterr().out == f"Wrote {file}: Unit North.\n"
    assert AuditEvent.objects.get(action="printed").detail["document"] == "unit review"


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["south"], "There is no unit 'south'. Known: north."),
        (["north", "--since", "noon"], "is not a time"),
        (["north", "--since", "2999-01-01"], "--since lies in the future."),
    ],
)
def test_bad_input_is_told_in_words(tmp_path, arguments, words):
    world.make_stay()
    with pytest.raises(CommandError) as told:
        call_command("unit_pdf", *arguments, "--output", str(tmp_path / "u.pdf"))
    assert words in str(told.value)


def test_same_moment_same_bytes():
    stay = world.make_stay()
    world.add_gases(stay, 2)
    assert printed(stay.unit) == printed(stay.unit)
