"""What leaves: CSV without formulas, FHIR that others accept and that comes back the same, nothing that identifies."""

import csv
import io
import json
from datetime import UTC, datetime, timedelta

import pytest
from django.core.management import CommandError, call_command
from fhir.resources.R4B.bundle import Bundle

from worksheet.oxygen.quantities import DERIVED, MEASURED, WITH_SD
from worksheet.oxygen.readings import Device, Event, FlowMethod, Site
from worksheet.transfer import csv_out, fhir_out
from worksheet.transfer.csv_text import safe, unsafe
from worksheet.transfer.leaving import gather
from worksheet.ward import record
from worksheet.ward.models import AuditEvent, Patient, Stay, Unit

T0 = datetime(2026, 2, 11, 4, 40, tzinfo=UTC)
GAS = {
    "ph": 7.31,
    "pco2": 41.2,
    "po2": 87.5,
    "so2": 0.963,
    "lactate": 2.4,
    "cohb": 0.012,
    "methb": 0.008,
    "sulfhb": 0.001,
    "barometric_pressure": 720.0,
    "fio2": 0.5,
    "age": 93.0,
}


@pytest.fixture
def filled(unit, stay, nurse):
    """A stay with everything an entry can hold."""
    stay.admitted_at = T0 - timedelta(hours=2)
    stay.height, stay.weight = 176, 79
    stay.save()
    stay.patient.name, stay.patient.birth_date = "Probe", datetime(1933, 4, 15).date()
    stay.patient.save()
    new = record.NewEntry
    entries = [
        new(T0, Site.ARTERIAL, {**GAS, "hb": 8.1}, device=Device.VENTILATOR, sample="BG-1", note="=HYPERLINK(1)"),
        new(
            T0 + timedelta(hours=1),
            Site.ARTERIAL,
            {**GAS, "po2": 500.0},
            typed={"po2": {"text": ">500", "unit": "mmHg", "comparator": ">"}},
        ),
        new(T0 + timedelta(minutes=3), Site.CENTRAL_VENOUS, {"so2": 0.68, "po2": 38.0, "ph": 7.28}),
        new(T0, Site.NONE, {"cardiac_output": 5.4, "spo2": 0.95}, flow_method=FlowMethod.THERMODILUTION),
        new(T0 + timedelta(minutes=30), event=Event.BLEED, event_amount=600.0),
    ]
    for entry in entries:
        record.record(stay, nurse, entry)
    return stay


def rows_of(unit, **more):
    text = "".join(csv_out.lines(gather(unit, **more)))
    return list(csv.DictReader(io.StringIO(text)))


def content_of(stay):
    names = ("time", "site", "device", "flow_method", "event", "event_amount", "sample", *MEASURED)
    rows = list(stay.entries.current().order_by("time", "site").values(*names))
    return [{k: round(v, 6) if isinstance(v, float) else v for k, v in row.items()} for row in rows]


def content():
    return content_of(Stay.objects.get(reference="K-2041"))


def test_csv_has_raw_derived_uncertainty_and_ages(unit, filled):
    rows = rows_of(unit)
    assert len(rows) == 5
    assert {*MEASURED, *DERIVED, *(f"{n}_sd" for n in WITH_SD), "hb_age_h"} <= set(rows[0])
    arterial = [r for r in rows if r["site"] == "arterial"]
    first, second = sorted(arterial, key=lambda r: r["time"])
    assert (first["po2"], second["po2"]) == ("87.5", ">500")
    assert float(first["cao2"]) == pytest.approx(10.8, abs=0.4)
    assert float(first["do2i"]) > 0
    assert float(first["cao2_sd"]) > 0
    assert first["hb_age_h"] == ""
    assert first["time"] == "2026-02-11T05:40:00+01:00"  # the unit's zone
    assert second["hb"] == ""


def test_no_cell_is_a_formula(unit, filled):
    for row in rows_of(unit):
        for text in row.values():
            assert not text.startswith(("=", "+", "@", "\t", "\r"))
            assert not text.startswith("-") or float(text) < 0


@pytest.mark.parametrize("text", ["=1+1", "+1", "-1", "@SUM(A1)", "\t=1", "'=1", "plain", "|cmd", "'quoted", "%0A"])
def test_texts_come_back_as_they_were(text):
    assert not safe(text).startswith(("=", "+", "-", "@", "\t", "|", "%"))
    assert unsafe(safe(text)) == " ".join(text.split())


def test_csv_comes_back_to_the_same_entries(unit, filled, bring):
    before = content()
    text = "".join(csv_out.lines(gather(unit)))
    assert set(bring(text).counts()) == {"same"}
    Stay.objects.filter(pk=filled.pk).update(unit=Unit.objects.create(name="Elsewhere", slug="elsewhere"))
    assert set(bring(text).counts()) == {"new"}
    assert content_of(Stay.objects.get(unit=unit)) == before


def test_fhir_is_accepted_by_a_validator_and_comes_back(unit, filled, bring):
    before = content()
    text = "".join(fhir_out.lines(gather(unit)))
    bundle = Bundle.model_validate_json(text)
    kinds = {e.resource.get_resource_type() for e in bundle.entry}
    assert kinds == {"Patient", "Encounter", "Specimen", "Observation", "DiagnosticReport"}
    assert set(bring(text, "fhir").counts()) == {"same"}
    other = Unit.objects.create(name="Elsewhere", slug="elsewhere")
    Stay.objects.filter(pk=filled.pk).update(unit=other)
    assert set(bring(text, "fhir").counts()) == {"new"}
    came_back = Stay.objects.get(unit=unit)
    assert came_back.patient == filled.patient
    assert content_of(came_back) == before


def test_every_quantity_survives_fhir(unit, stay, nurse, bring):
    from worksheet.oxygen.quantities import CATALOGUE

    values = {}
    for name in MEASURED:
        low, high = CATALOGUE[name].unlikely
        values[name] = low + 0.37 * (high - low)
    record.record(stay, nurse, record.NewEntry(T0, Site.ARTERIAL, values))
    before = content()
    text = "".join(fhir_out.lines(gather(unit)))
    Bundle.model_validate_json(text)
    Stay.objects.filter(pk=stay.pk).update(unit=Unit.objects.create(name="Elsewhere", slug="elsewhere"))
    assert bring(text, "fhir").counts() == {"new": len(MEASURED)}
    fresh = Stay.objects.get(unit=unit).entries.get()
    assert {n: getattr(fresh, n) for n in MEASURED} == pytest.approx({n: before[0][n] for n in MEASURED}, rel=1e-9)


@pytest.mark.parametrize("kind", ["csv", "fhir"])
def test_deidentified_files_hold_nothing_that_identifies(unit, filled, kind):
    leaving = gather(unit, deidentify=True)
    text = "".join(csv_out.lines(leaving) if kind == "csv" else fhir_out.lines(leaving))
    for secret in ("K-2041", "UNIT7", "Probe", "1933", "2026", "BG-1", "HYPERLINK", "93"):
        assert secret not in text, secret
    if kind == "csv":
        assert {r["hours"] for r in csv.DictReader(io.StringIO(text))} == {"2", "3", "2.05", "2.5"}
        assert {r["age"] for r in csv.DictReader(io.StringIO(text))} == {"90", ""}
    else:
        Bundle.model_validate_json(text)


def test_the_command_writes_whole_files_and_leaves_a_trace(unit, filled, tmp_path, capsys):
    target = tmp_path / "out.csv"
    call_command("export_entries", unit="u7", format="csv", output=str(target))
    assert target.read_text().count("\n") == 6
    assert "Wrote 5 entries of 1 stays" in capsys.readouterr().out
    assert AuditEvent.objects.filter(action="exported").count() == 1
    with pytest.raises(CommandError, match="no stay 'nobody'"):
        call_command("export_entries", unit="u7", stay="nobody", format="csv", output=str(target))
    with pytest.raises(CommandError, match="There is no unit 'x'"):
        call_command("export_entries", unit="x", format="csv", output=str(target))
    with pytest.raises(CommandError, match="cannot be written"):
        call_command("export_entries", unit="u7", format="csv", output=str(tmp_path / "no" / "such" / "folder.csv"))
    assert [p.name for p in tmp_path.iterdir()] == ["out.csv"]
    call_command("export_entries", unit="u7", stay="K-2041", format="fhir", output=str(tmp_path / "out.json"))
    assert json.loads((tmp_path / "out.json").read_text())["resourceType"] == "Bundle"


def test_a_unit_of_another_name_is_not_touched(unit, filled):
    other = Unit.objects.create(name="Other", slug="other")
    stay = Stay.objects.create(unit=other, patient=Patient.objects.create(identifier="Z"), reference="Z")
    assert {r["stay"] for r in rows_of(unit)} == {"K-2041"}
    assert gather(unit, stay.reference) is None
