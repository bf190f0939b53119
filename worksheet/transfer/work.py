"""What happens to an upload: read and previewed, then stored; long files in a process of their own."""

from __future__ import annotations

import json
import logging
import os
import subprocess
import sys
import zlib
from dataclasses import replace
from typing import Any, Literal
from zoneinfo import ZoneInfo

from django.db import transaction

from worksheet.ward.display import Display
from worksheet.ward.models import User

from . import mappings, pipeline
from .match import Matched
from .models import Upload, UploadState
from .rows import Preview, Refused, Row
from .times import TimeRules

log = logging.getLogger(__name__)
Step = Literal["read", "store"]
AT_ONCE = 150_000  # bytes: read while the person waits (under half a second)
_running: list[subprocess.Popen[bytes]] = []


def start(upload: Upload, step: Step) -> None:
    """Do a step now if the file is short, else in a process of its own, so that the server stays free."""
    state = UploadState.READING if step == "read" else UploadState.STORING
    upload.state, upload.message, upload.done, upload.total = state, "", 0, 0
    if len(upload.content or b"") <= AT_ONCE:
        upload.save()
        run(upload, step)
        return
    upload.options = {**upload.options, "pid": 0}
    upload.save()
    command = [sys.executable, "-m", "django", "run_upload", str(upload.pk), step]
    env = {**os.environ, "DJANGO_SETTINGS_MODULE": "worksheet.settings"}
    _running[:] = [p for p in _running if p.poll() is None]
    started = subprocess.Popen(command, env=env, stdin=subprocess.DEVNULL, start_new_session=True)  # noqa: S603
    _running.append(started)
    Upload.objects.filter(pk=upload.pk, state=state).update(options={**upload.options, "pid": started.pid})


def run(upload: Upload, step: Step) -> None:
    """Do a step; whatever goes wrong becomes a sentence on the upload's page, and nothing is stored."""
    try:
        (_read if step == "read" else _store)(upload)
    except (Refused, pipeline.Interrupted) as refusal:
        fatal = isinstance(refusal, Refused) and step == "read"
        _finish(upload, UploadState.REFUSED if fatal else UploadState.READY, str(refusal))
    except Exception:
        log.exception("an upload could not be processed")
        _finish(
            upload,
            UploadState.REFUSED,
            "The file could not be processed; nothing was stored. The server's log has the reason.",
        )


def interrupted(upload: Upload) -> bool:
    """Whether the process that worked on an upload is gone before it finished."""
    pid = int(upload.options.get("pid") or 0)
    if upload.state not in (UploadState.READING, UploadState.STORING) or not pid:
        return False
    for process in _running:
        if process.pid == pid:
            return process.poll() is not None
    try:
        os.kill(pid, 0)
    except ProcessLookupError:
        return True
    except PermissionError:
        return False
    return False


def _finish(upload: Upload, state: UploadState, message: str = "", **more: Any) -> None:
    upload.state, upload.message = state, message
    for name, value in more.items():
        setattr(upload, name, value)
    upload.save()


def options_of(upload: Upload) -> pipeline.Options:
    """The choices made on the upload's page."""
    chosen = upload.options
    zone = chosen.get("zone") or ((upload.unit.time_zone) if upload.format == "hl7v2" else "")
    rules = TimeRules(
        ZoneInfo(zone) if zone else None, chosen.get("order", ""), chosen.get("fold", ""),
        shifted=bool(chosen.get("shifted")),
    )  # fmt: skip
    columns = {"columns": chosen["columns"], "order": chosen.get("order", "")} if chosen.get("columns") else None
    return pipeline.Options(
        rules, bool(chosen.get("create")), bool(chosen.get("overwrite")), bool(chosen.get("keep_rest")), saved=columns
    )


def _prepared(upload: Upload) -> tuple[Preview, Matched, pipeline.Options]:
    content = bytes(upload.content or b"")
    options = options_of(upload)
    if options.saved is None:
        options = replace(options, saved=mappings.saved_for(upload.unit, upload.format, content))
        if options.saved and options.saved.get("zone") and options.rules.zone is None:
            options = replace(options, rules=replace(options.rules, zone=ZoneInfo(options.saved["zone"])))

    def progress(done: int, total: int) -> None:
        Upload.objects.filter(pk=upload.pk).update(done=done, total=total)

    parsed = pipeline.parse(upload.format, content, replace(options, progress=progress))
    return *pipeline.preview(upload.unit, upload.name, parsed, options), options


def _read(upload: Upload) -> None:
    seen, _, _ = _prepared(upload)
    _finish(upload, UploadState.READY, report=seen.report(limit=0), details=pack(seen, upload.unit_display()))


def _store(upload: Upload) -> None:
    seen, found, options = _prepared(upload)
    with transaction.atomic():
        stored = pipeline.store(upload.unit, upload.user, seen, found, options)
        _finish(upload, UploadState.STORED, report=stored.report(limit=0),
                details=pack(stored, upload.unit_display()), content=None)  # fmt: skip


def pack(seen: Preview, display: Display) -> bytes:
    """Every row as the page shows it, compressed."""
    rows = [_shown(row, display) for row in seen.rows]
    return zlib.compress(json.dumps(rows, ensure_ascii=False).encode(), 6)


def unpack(data: bytes | memoryview[int] | None) -> list[list[str]]:
    """The rows that :func:`pack` kept."""
    rows: list[list[str]] = json.loads(zlib.decompress(bytes(data))) if data else []
    return rows


def _shown(row: Row, display: Display) -> list[str]:
    values = ", ".join(
        f"{display.quantity(name).symbol} {cell.comparator}{cell.text.lstrip('<>=')} {cell.unit}".strip()
        for name, cell in row.cells.items()
    )
    when = display.stamp(row.time) if row.time else ""
    site = row.site.name.lower().replace("_", " ") if row.site else ""
    who = row.patient.identifier if row.patient else ""
    words = "; ".join([*([row.reason] if row.reason else []), *row.cautions])
    return [row.place, row.fate.value if row.fate else "", words, who, when, site, values]


def claim(upload_id: int, user: User, state: UploadState, step: Step) -> bool:
    """Start a step on an upload that is in a state; False if somebody was faster."""
    with transaction.atomic():
        upload = Upload.objects.visible_to(user).select_for_update().filter(pk=upload_id, state=state).first()
        if upload is None:
            return False
        upload.state = UploadState.READING if step == "read" else UploadState.STORING
        upload.save(update_fields=["state", "touched_at"])
    start(upload, step)
    return True
