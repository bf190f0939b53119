"""What leaves: the stays of a unit with their entries, under their own names or de-identified."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta
from functools import cached_property

from django.db.models import Min

from worksheet.ward.models import Entry, Stay, Unit
from worksheet.ward.sheet import Sheet, open_sheet

ZERO = datetime(2000, 1, 1, tzinfo=UTC)  # admission, in formats that cannot do without a date
OLDEST = 90.0  # higher ages identify people: 45 CFR 164.514(b)(2)(i)(C)


@dataclass(frozen=True)
class Leaving:
    """Stays of one unit on their way out."""

    unit: Unit
    stays: tuple[Stay, ...]
    deidentify: bool = False

    @cached_property
    def sheet(self) -> Sheet:
        """Everything derived for them."""
        return open_sheet(self.unit, self.stays)

    @cached_property
    def entries(self) -> list[Entry]:
        """Their current entries in time order."""
        found = Entry.objects.filter(stay__in=[s.pk for s in self.stays]).current()
        return list(found.order_by("stay_id", "time", "id"))

    @cached_property
    def names(self) -> dict[int, str]:
        """What each stay is called outside: its reference, or a number that means nothing."""
        if not self.deidentify:
            return {s.pk: s.reference for s in self.stays}
        width = max(3, len(str(len(self.stays))))
        return {s.pk: f"P{n:0{width}d}" for n, s in enumerate(self.stays, 1)}

    @cached_property
    def starts(self) -> dict[int, datetime]:
        """Admission of each stay; its first entry where that was not recorded."""
        pks = [s.pk for s in self.stays]
        rows = Entry.objects.filter(stay__in=pks).order_by().values_list("stay_id").annotate(first=Min("time"))
        first = dict(rows)
        return {s.pk: s.admitted_at or first.get(s.pk) or ZERO for s in self.stays}

    def hours(self, stay_id: int, moment: datetime) -> float:
        """Hours since admission."""
        return (moment - self.starts[stay_id]).total_seconds() / 3600.0

    def moment(self, stay_id: int, moment: datetime) -> datetime:
        """The time that is written: the true one in the unit's zone, or counted from an admission at a fixed date."""
        if self.deidentify:
            return ZERO + timedelta(hours=self.hours(stay_id, moment))
        return moment.astimezone(self.unit.zone)

    def age(self, years: float) -> float:
        """An age as it may leave."""
        return min(years, OLDEST) if self.deidentify else years


def gather(unit: Unit, reference: str = "", *, deidentify: bool = False) -> Leaving | None:
    """One stay of a unit, or all; None if there is no such stay."""
    stays = unit.stays.select_related("patient").order_by("id")
    if reference:
        stays = stays.filter(reference=reference)
    chosen: Sequence[Stay] = list(stays)
    return Leaving(unit, tuple(chosen), deidentify) if chosen else None
