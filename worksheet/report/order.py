"""What is to be printed: which stay, which span, for whom, and whether names and dates may stand in it."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import UTC, datetime
from functools import cached_property

import numpy as np

from worksheet.charts.scales import Elapsed, TimeScale, WallClock, hours
from worksheet.oxygen.readings import Ints
from worksheet.ward.display import Display
from worksheet.ward.models import Entry, Stay
from worksheet.ward.sheet import Sheet, open_sheet

_NO_END = datetime(9999, 12, 30, tzinfo=UTC)


@dataclass(frozen=True)
class Order:
    """One timeline to print. Without ``since`` and ``until`` the whole stay."""

    stay: Stay
    display: Display
    printed_at: datetime
    printed_by: str
    since: datetime | None = None
    until: datetime | None = None
    deidentify: bool = False

    @cached_property
    def sheet(self) -> Sheet:
        """The whole stay, derived: values carried into the span may come from before it."""
        entries = Entry.objects.filter(stay=self.stay).current()
        return open_sheet(self.stay.unit, [self.stay], entries.filter(time__lte=self.end))

    @cached_property
    def rows(self) -> Ints:
        """Rows of the span, in time order."""
        rows = self.sheet.rows(self.stay)
        if self.since is None:
            return rows
        chosen: Ints = rows[self.sheet.readings.time[rows] >= hours(self.since) - 1e-9]
        return chosen

    @cached_property
    def entries(self) -> dict[int, Entry]:
        """Every entry up to the end of the span, corrected and struck-out ones too, by number."""
        every = Entry.objects.filter(stay=self.stay, time__lte=self.end).select_related("recorded_by", "replaces")
        return {entry.pk: entry for entry in every.order_by("time", "pk")}

    @property
    def end(self) -> datetime:
        """Last moment of the span; without one, everything, a time mistyped into the future too."""
        return self.until or _NO_END

    @cached_property
    def origin(self) -> datetime:
        """Admission, or the first entry where admission is not recorded."""
        first = Entry.objects.filter(stay=self.stay).order_by("time").values_list("time", flat=True).first()
        return self.stay.admitted_at or first or self.printed_at

    @property
    def scale(self) -> TimeScale:
        """Wall clock, or hours from admission where dates may not stand."""
        return Elapsed(hours(self.origin), self.display) if self.deidentify else WallClock(self.display)

    @property
    def window(self) -> tuple[float, float] | None:
        """The span drawn [h since the epoch]; None: that of the rows."""
        times = self.sheet.readings.time[self.rows]
        if self.since is None and self.until is None:
            return None
        low = hours(self.since) if self.since else float(np.min(times, initial=hours(self.origin)))
        return low, hours(self.until) if self.until else max(low, float(np.max(times, initial=low)))

    def when(self, moment: datetime) -> str:
        """A moment as this document may tell it."""
        return self.scale.text(hours(moment))
