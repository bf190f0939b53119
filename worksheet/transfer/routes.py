"""The unit map: which unit the messages of which sender belong to, with its zone and its local codes."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any
from zoneinfo import ZoneInfo

from worksheet.oxygen.quantities import MEASURED
from worksheet.ward.models import Unit

from .hl7_message import Header
from .people import unit_named
from .rows import Refused

_KEYS = {"unit", "zone", "unknown_stays", "codes", "doubled_hour"}


@dataclass(frozen=True)
class Route:
    """Where the messages of one sender go."""

    unit: Unit
    zone: ZoneInfo
    create: bool = False
    codes: Mapping[str, str] = field(default_factory=dict)


@dataclass(frozen=True)
class UnitMap:
    """Routes by ``application|facility``, facility, application, ward (PV1-3.1), or ``*`` for all others."""

    routes: Mapping[str, Route]

    def find(self, head: Header, ward: str = "") -> Route | None:
        """The route of a message: the most telling key first."""
        application, _, facility = head.sender.partition("|")
        for key in (head.sender, ward, facility, application, "*"):
            if key and key in self.routes:
                return self.routes[key]
        return None


def read(path: Path) -> UnitMap:
    """Read the map from a JSON file: ``{"LAB|SITE": "icu-7", "*": {"unit": "icu-7", "zone": "Europe/Zurich"}}``."""
    try:
        data = json.loads(path.read_text(encoding="utf-8"))
    except OSError as error:
        raise Refused(f"The unit map {path.name} cannot be read: {(error.strerror or 'unknown').lower()}.") from None
    except ValueError:
        raise Refused(f"The unit map {path.name} is not valid JSON.") from None
    if not isinstance(data, dict) or not data:
        raise Refused('The unit map has to look like {"LAB|SITE": "icu-7", "*": "icu-7"}.')
    return UnitMap({key: _route(key, value) for key, value in data.items()})


def _route(key: str, value: Any) -> Route:
    given = {"unit": value} if isinstance(value, str) else value
    if not isinstance(given, dict) or not isinstance(given.get("unit"), str) or set(given) - _KEYS:
        raise Refused(
            f"The unit map's '{key}' has to name a unit; allowed beside it: {', '.join(sorted(_KEYS - {'unit'}))}."
        )
    unit = unit_named(given["unit"])
    try:
        zone = ZoneInfo(given.get("zone") or unit.time_zone)
    except (KeyError, ValueError, OSError, TypeError):
        raise Refused(f"The unit map's '{key}' names an unknown time zone.") from None
    codes = given.get("codes", {})
    unknown = [q for q in codes.values() if q not in MEASURED] if isinstance(codes, dict) else ["codes"]
    if unknown:
        raise Refused(f"The unit map's '{key}' maps codes to unknown quantities: {', '.join(map(str, unknown))}.")
    if given.get("unknown_stays", "queue") not in ("queue", "create"):
        raise Refused(f"The unit map's '{key}': unknown_stays is 'queue' or 'create'.")
    return Route(unit, zone, given.get("unknown_stays") == "create", codes)
