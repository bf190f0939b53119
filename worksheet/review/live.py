"""What a live page looks at before it does any work: whether anything that it shows has changed."""

from __future__ import annotations

import hashlib
from collections import OrderedDict
from collections.abc import Callable, Sequence

from worksheet.ward.models import Stay, Unit, User

from .window import Window


def mark_of(unit: Unit, user: User, stays: Sequence[Stay], window: Window, *more: str) -> str:
    """An entity tag: equal while entries, stays, reviews, choices, window and the minute are.

    The newest entry of all units is asked for, because that is one step in an index however long the history is. The
    minute is in it because ages are shown in minutes; so nothing is ever late by more than that. The person is not in
    it, only what they chose: everybody who may see a unit sees the same rows.
    """
    parts = [
        getattr(stays[0], "newest_entry", None) if stays else None, f"{window.now:%Y%m%d%H%M}", window.kind, *more,
        (window.since, window.until) if window.kind == "free" else "",
        unit.pk, unit.name, unit.constants, unit.carry, unit.uncertainties, unit.units, unit.decimal_comma,
        unit.time_zone, unit.shift_starts, sorted(user.preferences.items(), key=str),
        *((s.pk, s.bed_id, s.bed and (s.bed.name, s.bed.position), s.reference, s.height, s.weight, s.age,
           getattr(s, "reviewed_at", None)) for s in stays),
    ]  # fmt: skip
    return f'"{hashlib.sha256(repr(parts).encode()).hexdigest()[:32]}"'


_drawn: OrderedDict[str, bytes] = OrderedDict()  # rows by their mark, of this process
_KEPT = 64


def drawn(mark: str, draw: Callable[[], bytes]) -> bytes:
    """The rows of a mark, drawn once for all who watch.

    Measured: with 200 who watch, each new entry would have the same rows drawn 200 times. A mark names what is drawn,
    so nothing kept under it can be out of date; access is checked before, at every request.
    """
    if mark not in _drawn:
        _drawn[mark] = draw()
        while len(_drawn) > _KEPT:
            _drawn.popitem(last=False)
    return _drawn[mark]
