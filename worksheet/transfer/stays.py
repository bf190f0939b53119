"""Whose values these are: patients by identifier, never by name alone; who is not found waits."""

from __future__ import annotations

from collections import defaultdict
from dataclasses import dataclass, field
from datetime import datetime, timedelta

from django.db.models import Q

from worksheet.ward.models import Patient, Stay, Unit

from .names import fold
from .rows import PatientRef

_GRACE = timedelta(hours=24)  # results arrive after a patient has left, and before the bed is booked
_ONE_BY_ONE = 20  # identifiers


@dataclass
class StayFinder:
    """Finds the stays of one unit; remembers what it found.

    An identifier matches a patient of the same issuing system, or a stay that the unit itself calls by it. A birth
    date or family name that contradicts the stored one stops the match.
    """

    unit: Unit
    create: bool = False
    made: dict[PatientRef, Stay] = field(default_factory=dict)
    _known: dict[PatientRef, tuple[list[Stay], str]] = field(default_factory=dict)
    _all: defaultdict[str, list[Stay]] | None = None

    def find(self, ref: PatientRef, time: datetime) -> tuple[Stay | None, str]:
        """The stay, or why there is none. A stay to be made has no primary key yet."""
        if ref not in self._known:
            self._known[ref] = self._look_up(ref)
        stays, problem = self._known[ref]
        if problem:
            return None, problem
        if not stays:
            return self._make(ref)
        covering = [s for s in stays if _covers(s, time)]
        if len(covering) == 1:
            return covering[0], ""
        if not covering:
            return self._another(ref, stays, time)
        if all(s.admitted_at for s in covering):
            return max(
                covering, key=lambda s: (s.admitted_at <= time, s.admitted_at) if s.admitted_at else (False, time)
            ), ""
        return None, f"{ref.identifier} has more than one stay that covers this time"

    def _another(self, ref: PatientRef, stays: list[Stay], time: datetime) -> tuple[Stay | None, str]:
        """A further stay of a known patient, for values from before an admission or after a discharge."""
        if not self.create:
            return None, f"the stay of {ref.identifier} does not cover this time"
        made = self.made.get(ref)
        if made is None:
            reference = f"{ref.identifier[:50]}-{time.astimezone(self.unit.zone):%Y-%m-%d}"
            made = Stay(reference=reference, unit=self.unit, patient=stays[0].patient, admitted_at=time)
            self.made[ref] = made
        made.admitted_at = min(made.admitted_at or time, time)
        if any(s.admitted_at and s.admitted_at > time for s in stays):
            made.discharged_at = max(made.discharged_at or time, time)
        return made, ""

    def _candidates(self, ref: PatientRef) -> list[Stay]:
        """Stays called or identified so: asked one by one at first, all at once for a file of many patients."""
        if len(self._known) < _ONE_BY_ONE:
            named = Q(reference=ref.identifier) | Q(patient__identifier=ref.identifier)
            return list(self.unit.stays.select_related("patient").filter(named))
        if self._all is None:
            self._all = defaultdict(list)
            for stay in self.unit.stays.select_related("patient"):
                for name in {stay.reference, stay.patient.identifier}:
                    self._all[name].append(stay)
        return self._all.get(ref.identifier, [])

    def _look_up(self, ref: PatientRef) -> tuple[list[Stay], str]:
        own = self._candidates(ref)
        stays = [s for s in own if s.patient.identifier == ref.identifier and s.patient.system == ref.system]
        stays = stays or [s for s in own if s.reference == ref.identifier]
        patients = {s.patient_id for s in stays}
        stays = [s for s in own if s.patient_id in patients]
        wrong = next((w for s in stays if (w := _contradiction(ref, s.patient))), "")
        return stays, wrong

    def _make(self, ref: PatientRef) -> tuple[Stay | None, str]:
        if not self.create:
            return None, f"nobody in this unit has the identifier {ref.identifier}"
        if ref not in self.made:
            patient = Patient(system=ref.system or f"unit:{self.unit.slug}", identifier=ref.identifier)
            self.made[ref] = Stay(reference=ref.identifier[:64], unit=self.unit, patient=patient)
        return self.made[ref], ""


def _covers(stay: Stay, time: datetime) -> bool:
    after = stay.admitted_at is None or time >= stay.admitted_at - _GRACE
    return after and (stay.discharged_at is None or time <= stay.discharged_at + _GRACE)


def _contradiction(ref: PatientRef, patient: Patient) -> str:
    """Why a patient found by identifier is not the one meant."""
    if ref.birth_date and patient.birth_date and ref.birth_date[:10].replace("-", "") != f"{patient.birth_date:%Y%m%d}":
        return f"the birth date of {ref.identifier} differs from the stored one"
    theirs, ours = (set(fold(n).split()) for n in (ref.name, patient.name))
    if theirs and ours and not theirs & ours:
        return f"the name of {ref.identifier} differs from the stored one"
    return ""


def store_new(finder: StayFinder) -> int:
    """Store the stays that were made, with their patients."""
    for stay in finder.made.values():
        if stay.pk is None:
            if stay.patient.pk is None:
                named = {"system": stay.patient.system, "identifier": stay.patient.identifier}
                stay.patient = Patient.objects.get_or_create(**named)[0]
            stay.save(force_insert=True)
    return len(finder.made)
