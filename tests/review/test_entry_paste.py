"""A pasted row fills the fields and stores nothing; what has no place is named."""

import pytest

from worksheet.ward.models import Entry


def paste(world, text, **more):
    answer = world.client.post(world.url("entry_new"), world.blank(action="paste", pasted=text, **more))
    assert not Entry.objects.exists(), "pasting stores nothing"
    return answer.context["slip"], answer.context["filled"]


def test_a_row_with_its_head(world):
    head = "Time\tSite\tpH\tPCO2 (kPa)\tPO2 [kPa]\tHb (g/L)\tsO2 (%)\tLactate\tCrea"
    slip, filled = paste(world, f"{head}\r\n2026-11-30 06:35\tarterial\t7,31\t5,3\t11,7\t102\t96,4\t1,8\t88\r\n")
    texts = {name: (field.text, field.unit.label) for name, field in slip.fields.items() if field.text}
    assert texts == {"ph": ("7,31", ""), "pco2": ("5,3", "kPa"), "po2": ("11,7", "kPa"), "hb": ("102", "g/L"),
                     "so2": ("96,4", "%"), "lactate": ("1,8", "mmol/L")}  # fmt: skip
    assert (slip.date, slip.clock, slip.site) == ("2026-11-30", "06:35", "1")
    assert filled.unused == [("Crea", "no field of this name")]


def test_a_row_without_a_head_is_read_in_the_order_of_the_form_and_says_so(world):
    slip, filled = paste(world, "7.31\t40\t88\t10.2")
    assert [slip.fields[n].text for n in ("ph", "pco2", "po2", "hb")] == ["7.31", "40", "88", "10.2"]
    assert filled.by_position


def test_a_time_with_an_offset_is_put_on_the_units_clock(world):
    slip, _ = paste(world, "time\tpH\n2026-11-30T06:35:00Z\t7.4")
    assert (slip.date, slip.clock) == ("2026-11-30", "07:35")


def test_what_was_typed_before_stays(world):
    slip, _ = paste(world, "pH\tPO2\n7.31\t88", hb="9.9", note="typed")
    assert (slip.fields["hb"].text, slip.note, slip.fields["ph"].text) == ("9.9", "typed", "7.31")


def test_text_in_a_cell_is_shown_in_the_field_and_refused_there(world):
    answer = world.client.post(world.url("entry_new"), world.blank(action="paste", pasted="pH\tHb\n7.31\tclotted"))
    html = answer.content.decode()
    assert 'value="clotted"' in html
    assert "is not a number" in html


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "Nothing was pasted"),
        ("pH\tPO2", "Only the head"),
        ("7.31 40 88", "No columns"),
        ("pH\tPO2\n7.31\t88\n7.32\t90", "3 rows were pasted"),
        ("7.31\t88\n7.32\t90", "2 rows were pasted"),
        ("1\t" * 60, "without a head"),
        ("x\t" * 5000, "characters"),
    ],
)
def test_what_is_no_row_is_a_sentence(world, text, words):
    _, filled = paste(world, text)
    assert words in filled.problem


def test_unknown_units_and_sites_are_not_guessed(world):
    slip, filled = paste(world, "Site\tPO2 (bar)\tpH\nheart\t88\t7.4")
    assert slip.fields["po2"].text == ""
    assert slip.site == "1"
    assert [name for name, _ in filled.unused] == ["Site", "PO2 (bar)"]
