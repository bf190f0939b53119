"""The queue of rows that nobody could place: put in, seen, tried again, closed."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Iterable
from typing import Any

from worksheet.oxygen.readings import Device, FlowMethod, Site
from worksheet.ward.models import Unit

from .models import QueuedRow
from .rows import Cell, Fate, PatientRef, Row, Status


def put(rows: Iterable[Row], unit: Unit, source: str) -> int:
    """Queue rows; one that waits already (or was closed) is not queued again."""
    before = unit.queued_rows.count()
    QueuedRow.objects.bulk_create((_queued(row, unit, source) for row in rows), batch_size=500, ignore_conflicts=True)
    return unit.queued_rows.count() - before


def _queued(row: Row, unit: Unit, source: str) -> QueuedRow:
    fate = row.fate or Fate.INVALID
    data = as_data(row)
    text = json.dumps([data, row.reason, fate.value], sort_keys=True, ensure_ascii=False)
    if fate is Fate.NOT_UNDERSTOOD and row.cells == {}:
        text = row.reason  # one example of each code or unit that nobody understands, not thousands
    elif row.patient is None or row.time is None:
        text += f"{source}|{row.place}"
    return QueuedRow(
        unit=unit,
        source=source[:160],
        place=row.place[:120],
        fate=fate.value,
        reason=row.reason,
        patient=row.patient.identifier[:64] if row.patient else "",
        system=row.patient.system[:120] if row.patient else "",
        time=row.time,
        data=data,
        digest=hashlib.sha256(text.encode("utf-8", "replace")).hexdigest(),
    )


def as_data(row: Row) -> dict[str, Any]:
    """Everything of a row that is needed to try it again."""
    data: dict[str, Any] = {
        "site": int(row.site),
        "sample": row.sample,
        "group": row.group,
        "status": int(row.status),
        "note": row.note,
        "device": int(row.device),
        "flow_method": int(row.flow_method),
        "cells": {n: {"value": c.value, **c.typed(), "problem": c.problem} for n, c in row.cells.items()},
    }
    if row.patient:
        data["name"], data["birth_date"] = row.patient.name, row.patient.birth_date
    if row.raw is not None:
        data["raw"] = row.raw
    return data


def as_row(queued: QueuedRow) -> Row:
    """A queued row for another try, without its refused values."""
    data = queued.data
    cells = {
        n: Cell(
            c["value"],
            c["text"],
            c["unit"],
            c.get("comparator", ""),
            status=Status[c["status"].upper()] if "status" in c else Status.FINAL,
        )
        for n, c in data["cells"].items()
        if c["value"] is not None
    }
    patient = (
        PatientRef(queued.patient, queued.system, data.get("name", ""), data.get("birth_date", ""))
        if queued.patient
        else None
    )
    return Row(
        queued.place,
        patient,
        queued.time,
        Site(data["site"]),
        data["sample"],
        data["group"],
        cells,
        Status(data["status"]),
        Device(data["device"]),
        FlowMethod(data["flow_method"]),
        note=data["note"],
    )
