"""What a person chose on the preview page, checked before it counts."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any
from zoneinfo import ZoneInfo, available_timezones

from worksheet.oxygen.quantities import CATALOGUE, MEASURED
from worksheet.oxygen.readings import Site
from worksheet.ward.models import Unit

from .models import Upload
from .rows import Refused

ROLES = ("stay", "time", "date", "clock", "site", "sample", "note", "device", "flow_method", "event", "event_amount")
SWITCHES = ("create", "keep_rest", "overwrite", "shifted")


def common_zones(unit: Unit) -> list[str]:
    """The unit's zone first, then UTC and all others."""
    rest = sorted(z for z in available_timezones() if "/" in z and not z.startswith(("Etc/", "posix", "right")))
    return [unit.time_zone, *(z for z in ("UTC", *rest) if z != unit.time_zone)]


def checked_options(posted: Mapping[str, Any], upload: Upload) -> dict[str, Any]:
    """The options of an upload from a form; :class:`Refused` for what does not exist."""
    options: dict[str, Any] = {name: bool(posted.get(name)) for name in SWITCHES}
    zone = str(posted.get("zone", ""))
    if zone:
        try:
            ZoneInfo(zone)
        except (KeyError, ValueError, OSError):
            raise Refused(f"'{zone[:60]}' is not a time zone.") from None
        options["zone"] = zone
    for name, allowed in (("order", ("dmy", "mdy", "ymd")), ("fold", ("earlier", "later"))):
        if posted.get(name) in allowed:
            options[name] = posted[name]
    columns = upload.report.get("columns", [])
    if columns and "column-0" in posted:
        options["columns"] = {
            column["header"]: _column(str(posted.get(f"column-{n}", "")), str(posted.get(f"site-{n}", "0")))
            for n, column in enumerate(columns)
        }
    return options


def _column(picked: str, site: str) -> dict[str, Any]:
    """One column's choice: a role, or ``quantity|unit``."""
    nothing = {"role": "", "quantity": "", "unit": "", "site": 0}
    if not picked:
        return nothing
    if picked in ROLES:
        return {**nothing, "role": picked}
    name, _, ucum = picked.partition("|")
    if name not in MEASURED or not any(u.ucum == ucum for u in CATALOGUE[name].units):
        raise Refused("A column was given a quantity or unit that does not exist.")
    code = int(site) if site.isdecimal() and int(site) in set(Site) else 0
    return {"role": "quantity", "quantity": name, "unit": ucum, "site": code}
