"""FHIR R4 out: one Bundle of Patient, Encounter, Specimen, Observation and one DiagnosticReport for each entry."""

from __future__ import annotations

import json
from collections.abc import Iterator
from typing import Any

from worksheet.oxygen.quantities import CATALOGUE, MEASURED, Quantity
from worksheet.oxygen.readings import Device, Event, FlowMethod, Site
from worksheet.ward.models import Entry, Stay

from .codes import LOINC, OWN
from .leaving import Leaving

UCUM = "http://unitsofmeasure.org"
_BLOOD = frozenset(
    {"ph", "pco2", "po2", "hb", "so2", "so2_calculated", "o2hb", "cohb", "methb", "sulfhb", "lactate", "bicarbonate"}
)
_CATEGORY = "http://terminology.hl7.org/CodeSystem/observation-category"
_SITE_CODES = {Site.ARTERIAL: "BLDA", Site.VENOUS: "BLDV"}  # HL7 v2 table 0487
_STATUS = {"preliminary": "preliminary", "corrected": "corrected"}
Resource = dict[str, Any]


def resources(leaving: Leaving) -> Iterator[Resource]:
    """All resources of the chosen stays, patients first."""
    for stay in leaving.stays:
        yield from _stay(leaving, stay)
    for count, entry in enumerate(leaving.entries, 1):
        yield from _entry(leaving, entry, count if leaving.deidentify else entry.pk)


def bundle(leaving: Leaving) -> Resource:
    """Everything of the chosen stays as one collection."""
    return {"resourceType": "Bundle", "type": "collection", "entry": [_full(r) for r in resources(leaving)]}


def lines(leaving: Leaving) -> Iterator[str]:
    """The bundle as text, one resource a line, without holding all of it in memory."""
    yield '{"resourceType": "Bundle", "type": "collection", "entry": ['
    lead = "\n"
    for resource in resources(leaving):
        yield lead + json.dumps(_full(resource), ensure_ascii=False)
        lead = ",\n"
    yield "\n]}\n"


def _full(resource: Resource) -> Resource:
    return {"fullUrl": f"{OWN}{resource['resourceType']}:{resource['id']}", "resource": resource}


def _to(kind: str, name: str) -> dict[str, str]:
    return {"reference": f"{kind}/{name}"}


def _stay(leaving: Leaving, stay: Stay) -> Iterator[Resource]:
    """The patient by identifier, and the stay."""
    name = leaving.names[stay.pk]
    patient: Resource = {"resourceType": "Patient", "id": f"p{stay.pk}"}
    encounter: Resource = {
        "resourceType": "Encounter", "id": f"e{stay.pk}",
        "status": "finished" if stay.discharged_at else "in-progress",
        "class": {"system": "http://terminology.hl7.org/CodeSystem/v3-ActCode", "code": "IMP"},
        "subject": _to("Patient", f"p{stay.pk}"),
        "identifier": [{"system": f"{OWN}stay", "value": name}],
    }  # fmt: skip
    if leaving.deidentify:
        patient["id"], encounter["id"] = f"p-{name}", f"e-{name}"
        encounter["subject"] = _to("Patient", f"p-{name}")
        patient["identifier"] = [{"system": f"{OWN}pseudonym", "value": name}]
    else:
        patient["identifier"] = [{**_system(stay), "value": stay.patient.identifier}]
        if stay.patient.birth_date:
            patient["birthDate"] = stay.patient.birth_date.isoformat()
        if stay.patient.name:
            patient["name"] = [{"text": stay.patient.name}]
    yield patient
    yield encounter


def _system(stay: Stay) -> dict[str, str]:
    system = stay.patient.system
    return {"system": system} if system else {}


def _entry(leaving: Leaving, entry: Entry, number: int) -> Iterator[Resource]:
    """One entry: its sample, its observations, and the report that holds them together, under one number."""
    name = leaving.names[entry.stay_id]
    who = f"-{name}" if leaving.deidentify else str(entry.stay_id)
    moment = leaving.moment(entry.stay_id, entry.time).isoformat()
    shared: Resource = {"subject": _to("Patient", f"p{who}"), "encounter": _to("Encounter", f"e{who}"),
                        "effectiveDateTime": moment}  # fmt: skip
    if entry.site:
        yield _specimen(leaving, entry, number, f"p{who}", moment)
    results = [
        _observation(leaving, entry, number, CATALOGUE[n], shared) for n in MEASURED if getattr(entry, n) is not None
    ]
    if entry.event:
        results.append(_event(entry, number, shared))
    yield from results
    if results:
        yield {
            "resourceType": "DiagnosticReport", "id": f"r{number}", "status": "final", **shared,
            "code": {"text": "entry of the worksheet"}, "result": [_to("Observation", r["id"]) for r in results],
        }  # fmt: skip


def _specimen(leaving: Leaving, entry: Entry, number: int, patient: str, moment: str) -> Resource:
    site = Site(entry.site)
    codes = [{"system": f"{OWN}site", "code": site.name.lower()}]
    if site in _SITE_CODES:
        codes.append({"system": "http://terminology.hl7.org/CodeSystem/v2-0487", "code": _SITE_CODES[site]})
    specimen: Resource = {
        "resourceType": "Specimen", "id": f"s{number}", "subject": _to("Patient", patient),
        "type": {"coding": codes, "text": f"{site.name.lower().replace('_', ' ')} blood"},
        "collection": {"collectedDateTime": moment},
    }  # fmt: skip
    if entry.sample and not leaving.deidentify:
        specimen["identifier"] = [{"value": entry.sample}]
    return specimen


def _observation(leaving: Leaving, entry: Entry, number: int, quantity: Quantity, shared: Resource) -> Resource:
    typed = entry.typed.get(quantity.name, {})
    blood = bool(entry.site) and quantity.name in _BLOOD
    kind = "laboratory" if blood else "vital-signs"
    found: Resource = {
        "resourceType": "Observation", "id": f"o{number}-{quantity.name.replace('_', '-')}",
        "status": _STATUS.get(typed.get("status", ""), "final"),
        "category": [{"coding": [{"system": _CATEGORY, "code": kind}]}],
        "code": _code(quantity, Site(entry.site)), **shared,
        "valueQuantity": _quantity(leaving, quantity, getattr(entry, quantity.name), str(typed.get("comparator", ""))),
    }  # fmt: skip
    if blood:
        found["specimen"] = _to("Specimen", f"s{number}")
    method = _method(entry, quantity.name)
    if method:
        found["method"] = {"coding": [method]}
    if entry.note and not leaving.deidentify:
        found["note"] = [{"text": entry.note}]
    return found


def _code(quantity: Quantity, site: Site) -> Resource:
    """LOINC for the site where there is one, and our own name, which is always exact."""
    codes = quantity.loinc.get(site.name.lower()) or quantity.loinc.get("") or ()
    coding = [{"system": LOINC, "code": codes[0]}] if codes else []
    coding.append({"system": f"{OWN}quantity", "code": quantity.name})
    return {"coding": coding, "text": quantity.label}


def _quantity(leaving: Leaving, quantity: Quantity, canonical: float, comparator: str) -> Resource:
    value = float(quantity.unit.from_canonical(canonical))
    if quantity.name == "age":
        value = leaving.age(value)
    unit = quantity.unit
    found: Resource = {
        "value": float(f"{value:.12g}"),
        "unit": unit.label or unit.ucum,
        "system": UCUM,
        "code": unit.ucum,
    }
    return {**found, "comparator": comparator} if comparator else found


def _method(entry: Entry, name: str) -> dict[str, str]:
    if name == "fio2" and entry.device:
        return {"system": f"{OWN}device", "code": Device(entry.device).name.lower()}
    if name in ("cardiac_output", "cardiac_index") and entry.flow_method:
        return {"system": f"{OWN}flow-method", "code": FlowMethod(entry.flow_method).name.lower()}
    return {}


def _event(entry: Entry, number: int, shared: Resource) -> Resource:
    event = Event(entry.event).name.lower()
    found: Resource = {
        "resourceType": "Observation", "id": f"o{number}-event", "status": "final", **shared,
        "code": {"coding": [{"system": f"{OWN}event", "code": event}], "text": event.replace("_", " ")},
    }  # fmt: skip
    if entry.event_amount is not None:
        found["valueQuantity"] = {"value": entry.event_amount}
    else:
        found["valueBoolean"] = True
    return found
