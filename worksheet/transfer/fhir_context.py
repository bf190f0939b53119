"""What surrounds an Observation in its file: patient, encounter, specimen, report, device; found by reference."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from worksheet.oxygen.readings import Site

from .codes import Coding
from .names import site_named
from .rows import PatientRef

# Specimen types: HL7 v2 table 0487 and SNOMED CT, as printed in public value sets.
_SPECIMEN_CODES = {
    "BLDA": Site.ARTERIAL, "BLDV": Site.VENOUS, "BLDMV": Site.MIXED_VENOUS, "BLDCV": Site.CENTRAL_VENOUS,
    **{site.name: site for site in Site if site}, "122552005": Site.ARTERIAL, "122555007": Site.VENOUS,
}  # fmt: skip
_CERTAIN_WORDS = (
    ("mixed venous", Site.MIXED_VENOUS), ("central venous", Site.CENTRAL_VENOUS), ("arterial", Site.ARTERIAL),
    ("venous", Site.VENOUS),
)  # fmt: skip


def text_of(value: Any) -> str:
    """A text, or nothing."""
    return value if isinstance(value, str) else ""


def codings(concept: Any) -> list[Coding]:
    """The codings of a CodeableConcept."""
    found = concept.get("coding") if isinstance(concept, Mapping) else None
    return [
        Coding(text_of(c.get("code")), text_of(c.get("system")), text_of(c.get("display"))[:200])
        for c in (found if isinstance(found, list) else [])
        if isinstance(c, Mapping)
    ]


def place_of(number: int, resource: Mapping[str, Any]) -> str:
    """How a person finds a resource again."""
    name = text_of(resource.get("id"))
    return f"{text_of(resource.get('resourceType')) or 'resource'} {name or number}"[:100]


def _reference(value: Any) -> str:
    return text_of(value.get("reference")) if isinstance(value, Mapping) else ""


def _identifier(value: Any) -> tuple[str, str]:
    """Value and system of an Identifier."""
    if not isinstance(value, Mapping):
        return "", ""
    return text_of(value.get("value")).strip(), text_of(value.get("system")).strip()


@dataclass
class Context:
    """The resources of one file by their addresses."""

    by_url: dict[str, Mapping[str, Any]] = field(default_factory=dict)
    _report_of: dict[str, str] = field(default_factory=dict)
    _urls: dict[int, str] = field(default_factory=dict)

    def add(self, url: str, resource: Mapping[str, Any]) -> None:
        """Make a resource known by its full address and by type and id."""
        kind, name = text_of(resource.get("resourceType")), text_of(resource.get("id"))
        for address in (url, f"{kind}/{name}" if name else ""):
            if address:
                self.by_url[address] = resource
        members = "result" if kind == "DiagnosticReport" else "hasMember" if kind == "Observation" else ""
        listed = resource.get(members) if members else None
        for member in listed if isinstance(listed, list) else []:
            self._report_of[_reference(member)] = f"{kind}/{name or url}"

    def find(self, value: Any) -> Mapping[str, Any] | None:
        """The resource a Reference points to, if the file holds it."""
        target = _reference(value)
        found = self.by_url.get(target)
        if found is None and target.startswith(("http:", "https:")):
            found = self.by_url.get("/".join(target.rsplit("/", 2)[-2:]))
        return found

    def specimen(self, item: Mapping[str, Any]) -> tuple[str, Site]:
        """Number and site of the sample."""
        given = item.get("specimen")
        resource = self.find(given)
        number = _identifier(given.get("identifier"))[0] if isinstance(given, Mapping) else ""
        site = Site.NONE
        if resource is not None:
            listed = resource.get("identifier")
            first = listed[0] if isinstance(listed, list) and listed else resource.get("accessionIdentifier")
            number = number or _identifier(first)[0]
            concept = resource.get("type")
            words = text_of(concept.get("text")) if isinstance(concept, Mapping) else ""
            site = site_of(codings(concept), words)
        elif not number:
            number = _reference(given).rsplit("/", 1)[-1]
        return number[:64], site or site_of(codings(item.get("bodySite")), "")

    def collected(self, item: Mapping[str, Any]) -> str:
        """When the specimen was collected."""
        resource = self.find(item.get("specimen"))
        collection = resource.get("collection") if resource else None
        return text_of(collection.get("collectedDateTime")) if isinstance(collection, Mapping) else ""

    def group(self, item: Mapping[str, Any]) -> str:
        """The report or panel that lists an Observation."""
        name = text_of(item.get("id"))
        addresses = [f"Observation/{name}"] if name else []
        found = next((self._report_of[a] for a in addresses if a in self._report_of), "")
        return found or self._report_of.get(self._url_of(item), "") or _reference(item.get("specimen"))

    def _url_of(self, item: Mapping[str, Any]) -> str:
        if not self._urls:
            self._urls.update({id(r): u for u, r in self.by_url.items() if u.startswith("urn:")})
        return self._urls.get(id(item), "")

    def device(self, item: Mapping[str, Any]) -> str:
        """Name of the device, for telling a pulse oximeter from a blood-gas analyser."""
        given = item.get("device")
        return text_of(given.get("display"))[:200] if isinstance(given, Mapping) else ""


def site_of(given: list[Coding], words: str) -> Site:
    """The site that a specimen type names."""
    for coding in given:
        if coding.code.upper() in _SPECIMEN_CODES:
            return _SPECIMEN_CODES[coding.code.upper()]
    for text in (words, *(c.display for c in given)):
        folded = text.casefold()
        for word, site in _CERTAIN_WORDS:
            if word in folded:
                return site
        exact = site_named(text)
        if exact:
            return exact
    return Site.NONE


def patient_of(context: Context, item: Mapping[str, Any]) -> PatientRef | None:
    """The patient by identifier: of the reference, of the Patient resource, else the address of the reference."""
    subject = item.get("subject")
    if not isinstance(subject, Mapping):
        return None
    resource = context.find(subject)
    value, system = _identifier(subject.get("identifier"))
    name = birth = ""
    if resource is not None:
        listed = resource.get("identifier")
        for one in listed if isinstance(listed, list) and not value else []:
            value, system = _identifier(one)
            if value:
                break
        value = value or text_of(resource.get("id"))
        birth = text_of(resource.get("birthDate"))
        name = _family(resource)
    value = value or _reference(subject).rsplit("/", 1)[-1].removeprefix("urn:uuid:")
    return PatientRef(value, system[:120], name, birth) if 0 < len(value) <= 64 else None


def _family(resource: Mapping[str, Any]) -> str:
    names = resource.get("name")
    first = names[0] if isinstance(names, list) and names and isinstance(names[0], Mapping) else {}
    return (text_of(first.get("family")) or text_of(first.get("text")))[:120]
