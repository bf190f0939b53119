"""FHIR R4 in: the specification's examples, serial gases, status, comparators, units, codes with two readings."""

import copy
import json
from pathlib import Path

import pytest

from worksheet.transfer.rows import Refused
from worksheet.ward.models import Entry

DATA = Path(__file__).parent.parent / "data" / "transfer" / "fhir"
KPA = 7.500617


def obs(code, value, unit, *, system="http://loinc.org", display="", ucum=None, **more):
    return {
        "resourceType": "Observation",
        "id": f"o{code}-{value}",
        "status": "final",
        "code": {"coding": [{"system": system, "code": code, "display": display}]},
        "subject": {"identifier": {"system": "urn:example:unit-7", "value": "K-9"}},
        "effectiveDateTime": "2026-02-11T05:40:00+01:00",
        "valueQuantity": {"value": value, "unit": unit, "system": "http://unitsofmeasure.org", "code": ucum or unit},
        **more,
    }


def bundle(*resources):
    return {"resourceType": "Bundle", "type": "collection", "entry": [{"resource": r} for r in resources]}


SAMPLE = {"specimen": {"identifier": {"value": "BG-1"}}}


def test_serial_gases(bring):
    seen = bring((DATA / "serial-bundle.json").read_bytes(), "fhir")
    assert seen.counts() == {"new": 19, "withdrawn": 1}
    entries = Entry.objects.order_by("time")
    assert [e.sample for e in entries] == ["BG-769", "BG-770", "BG-771", "BG-772"]
    assert [e.hb for e in entries] == [None, pytest.approx(10.4), pytest.approx(8.1), pytest.approx(6.9)]
    assert [e.site for e in entries] == [1, 1, 1, 1]
    assert entries[0].typed["lactate"] == {"text": "0.3", "unit": "mmol/L", "comparator": "<"}
    assert entries[3].po2 == pytest.approx(12.1 * KPA)
    assert entries[3].so2 == pytest.approx(0.97)
    again = bring((DATA / "serial-bundle.json").read_bytes(), "fhir")
    assert again.counts() == {"same": 19, "withdrawn": 1}
    assert Entry.objects.count() == 4


def test_example_observations_of_the_specification(bring):
    excess = bring((DATA / "f002-base-excess.json").read_bytes(), "fhir")
    assert excess.counts() == {"not understood": 1}
    assert "base excess (11555-0) is not a quantity of the worksheet" in excess.rows[0].reason
    pco2 = bring((DATA / "f003-pco2.json").read_bytes(), "fhir")
    assert pco2.counts() == {"new": 1}
    entry = Entry.objects.get(pco2__isnull=False)
    assert entry.pco2 == pytest.approx(6.2 * KPA)
    assert entry.time.isoformat() == "2013-04-02T09:30:10+00:00"
    assert any("given for a period of 72 h" in c for c in pco2.rows[0].cautions)
    assert bring((DATA / "f005-hemoglobin.json").read_bytes(), "fhir").counts() == {"new": 1}
    assert Entry.objects.get(hb__isnull=False).hb == 7.2
    assert bring((DATA / "satO2.json").read_bytes(), "fhir").counts() == {"new": 1}
    assert Entry.objects.get(spo2__isnull=False).spo2 == pytest.approx(0.95)


def test_a_value_entered_in_error_is_taken_out_of_its_entry(bring):
    first = obs("2703-7", 4.1, "kPa", **SAMPLE)
    ph = obs("2744-1", 7.3, "[pH]", **SAMPLE)
    bring(bundle(first, ph), "fhir")
    wrong = {**first, "status": "entered-in-error"}
    seen = bring(bundle(wrong), "fhir")
    assert seen.rows[0].reason == "entered in error: PO2 is taken out"
    entry = Entry.objects.current().get()
    assert (entry.po2, entry.ph) == (None, 7.3)
    assert entry.replaces.po2 == pytest.approx(4.1 * KPA)
    bring(bundle({**ph, "status": "entered-in-error"}), "fhir")
    assert not Entry.objects.current().exists()
    assert Entry.objects.filter(struck=True).count() == 1
    assert bring(bundle({**ph, "status": "entered-in-error"}), "fhir").counts() == {"same": 1}


def test_amended_corrects_and_late_preliminary_does_not(bring):
    bring(bundle(obs("2703-7", 58, "mm[Hg]", **SAMPLE) | {"status": "preliminary"}), "fhir")
    assert bring(bundle(obs("2703-7", 85, "mm[Hg]", **SAMPLE) | {"status": "amended"}), "fhir").counts() == {
        "corrects": 1
    }
    assert bring(bundle(obs("2703-7", 60, "mm[Hg]", **SAMPLE) | {"status": "preliminary"}), "fhir").counts() == {
        "same": 1
    }
    assert bring(bundle(obs("2703-7", 70, "mm[Hg]", **SAMPLE)), "fhir").counts() == {
        "same": 1
    }  # final: older than amended
    assert Entry.objects.current().get().po2 == 85


def test_a_second_final_value_is_a_conflict(bring):
    bring(bundle(obs("2703-7", 58, "mm[Hg]", **SAMPLE)), "fhir")
    assert bring(bundle(obs("2703-7", 85, "mm[Hg]", **SAMPLE)), "fhir").counts() == {"conflict": 1}


@pytest.mark.parametrize(
    "more,quantity",
    [
        (SAMPLE, "so2"),
        ({"category": [{"coding": [{"code": "vital-signs"}]}]}, "spo2"),
        ({"method": {"coding": [{"display": "Pulse oximetry"}]}}, "spo2"),
        ({"device": {"display": "pulse oximeter 3"}}, "spo2"),
        ({}, ""),
    ],
)
def test_2708_6_is_resolved_by_sample_or_method_else_a_conflict(bring, more, quantity):
    seen = bring(bundle(obs("2708-6", 97, "%", **more)), "fhir")
    if quantity:
        assert getattr(Entry.objects.get(), quantity) == pytest.approx(0.97)
    else:
        assert seen.counts() == {"conflict": 1}
        assert "neither sample nor method says which" in seen.rows[0].reason


def test_a_label_that_contradicts_its_code_is_a_conflict(bring):
    seen = bring(bundle(obs("2713-6", 3.6, "mmol/L", display="Laktat")), "fhir")
    assert seen.counts() == {"conflict": 1}


def test_units(bring):
    cases = [
        (obs("2703-7", 12, "kilos"), "the unit 'kilos' is not known"),
        (obs("718-7", 7.2, ""), "the unit is missing (g/dL or g/L or mmol/L?)"),
    ]
    for resource, words in cases:
        seen = bring(bundle(resource), "fhir")
        assert seen.counts() == {"not understood": 1}
        assert words in seen.rows[0].reason
    assert not Entry.objects.exists()
    printed = obs("718-7", 7.2, "g/dl", ucum="g/dL")
    assert bring(bundle(printed), "fhir").counts() == {"new": 1}


def test_components_and_panels(bring):
    panel = obs("24336-0", 1, "1")
    del panel["valueQuantity"]
    panel["component"] = [
        {"code": o["code"], "valueQuantity": o["valueQuantity"]}
        for o in (obs("2744-1", 7.3, "[pH]"), obs("2019-8", 40, "mm[Hg]"), obs("718-7", 9, "g/dL"))
    ]
    seen = bring(bundle(panel), "fhir")
    assert seen.counts() == {"new": 3}
    entry = Entry.objects.get()
    assert (entry.ph, entry.pco2, entry.hb, entry.site) == (7.3, 40, 9, 1)


def test_patient_specimen_report_and_encounter_are_followed(bring):
    resources = [
        {
            "resourceType": "Patient",
            "id": "p",
            "identifier": [{"system": "urn:x", "value": "MR-5"}],
            "birthDate": "1950-01-01",
        },
        {
            "resourceType": "Specimen",
            "id": "s",
            "identifier": [{"value": "V-1"}],
            "type": {"text": "Central venous blood"},
        },
        obs("11556-8", 38, "mm[Hg]", subject={"reference": "Patient/p"}, specimen={"reference": "Specimen/s"}),
        obs("20564-1", 68, "%", subject={"reference": "Patient/p"}, specimen={"reference": "Specimen/s"}),
    ]
    assert bring(bundle(*resources), "fhir").counts() == {"new": 2}
    entry = Entry.objects.get()
    assert (entry.site, entry.po2, entry.so2, entry.sample) == (3, 38, pytest.approx(0.68), "V-1")
    assert (entry.stay.patient.system, entry.stay.patient.identifier) == ("urn:x", "MR-5")


def test_a_specimen_that_contradicts_the_code_is_a_conflict(bring):
    venous = {"resourceType": "Specimen", "id": "s", "type": {"text": "venous blood"}}
    seen = bring(bundle(venous, obs("2703-7", 38, "mm[Hg]", specimen={"reference": "Specimen/s"})), "fhir")
    assert seen.counts() == {"conflict": 1}


def test_ndjson_lists_and_single_resources(bring):
    lines = "\n".join(
        json.dumps(obs("2744-1", v, "[pH]", effectiveDateTime=f"2026-02-11T0{n}:40:00Z"))
        for n, v in enumerate((7.3, 7.2))
    )
    assert bring(lines, "fhir").counts() == {"new": 2}
    assert bring([obs("2744-1", 7.1, "[pH]", effectiveDateTime="2026-02-12T00:40:00Z")], "fhir").counts() == {"new": 1}


def test_impossible_values_times_and_missing_patients_have_reasons(bring):
    nobody = obs("2744-1", 7.3, "[pH]")
    del nobody["subject"]
    seen = bring(
        bundle(
            obs("2744-1", 74, "[pH]"),
            obs("2744-1", 7.3, "[pH]", effectiveDateTime="2026-02"),
            nobody,
            obs("2744-1", 7.3, "[pH]", status="odd"),
            {"resourceType": "Medication"},
        ),
        "fhir",
    )
    assert [r.fate for r in seen.rows] == ["invalid", "invalid", "unmatched", "not understood", "not understood"]


@pytest.mark.parametrize(
    "text,words",
    [
        ("{", "not valid JSON"),
        ('{"resourceType": "Bundle"}', "no Observation"),
        ("[1, 2]", "not a FHIR resource"),
        ("[" * 100_000, "nested too deeply|not valid JSON"),
        (b"\xff{}", "not UTF-8"),
        ('{"a":1}\n{"b"\n', "not valid JSON"),
    ],
)
def test_files_that_cannot_be_read_are_one_sentence(bring, text, words):
    with pytest.raises(Refused, match=words):
        bring(text, "fhir")


def test_types_that_are_wrong_everywhere_are_survived(bring):
    base = obs("2703-7", 12.0, "kPa", **SAMPLE, component=[], note=[{"text": "x"}], method={}, category=[])
    for key in list(base):
        for wrong in (None, 1, "x", [], {}, [None], {"coding": 3}, {"reference": 4}, {"value": {"a": 1}}, True):
            item = copy.deepcopy(base)
            item[key] = wrong
            try:
                seen = bring(bundle(item), "fhir", dry_run=True)
            except Refused:
                continue
            assert sum(seen.counts().values()) == len(seen.rows)
            assert "unsettled" not in seen.counts()
