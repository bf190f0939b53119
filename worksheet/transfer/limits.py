"""What a file may be: size, rows, cells, depth; looked at before any parser sees it."""

from __future__ import annotations

import io
import zipfile
import zlib
from pathlib import Path
from typing import IO

from .rows import Refused

MEGABYTE = 1024 * 1024
MAX_BYTES = 20 * MEGABYTE
MAX_ROWS = 120_000
MAX_COLUMNS = 300
MAX_CELL = 4_000  # characters: a value with its unit, or a comment; not a document
MAX_UNPACKED = 60 * MEGABYTE  # of a spreadsheet: all parts together
MAX_PARTS = 2_000
MAX_RATIO = 200  # unpacked : packed; a spreadsheet of numbers stays below 30
_ZIP, _OLE, _PDF = b"PK\x03\x04", b"\xd0\xcf\x11\xe0", b"%PDF"


def read_file(path: Path) -> bytes:
    """The bytes of a file, refused above the size cap without reading on."""
    try:
        with path.open("rb") as source:
            return read_stream(source)
    except OSError as error:
        raise Refused(
            f"The file {path.name} cannot be opened: {(error.strerror or 'unknown reason').lower()}."
        ) from None


def read_stream(source: IO[bytes]) -> bytes:
    """The bytes of a stream up to the cap."""
    data = source.read(MAX_BYTES + 1)
    if len(data) > MAX_BYTES:
        raise Refused(f"The file is larger than {MAX_BYTES // MEGABYTE} MB; split it by month or by stay.")
    if not data.strip(b"\x00\r\n\t \xef\xbb\xbf\xff\xfe"):
        raise Refused("The file is empty.")
    return data


def format_of(name: str, data: bytes) -> str:
    """``csv``, ``xlsx``, ``fhir`` or ``hl7v2`` by content; the name decides only between kinds of text."""
    head = data[:4096].lstrip(b"\xef\xbb\xbf\x0b\r\n\t ")
    if data.startswith(_ZIP):
        return "xlsx"
    if data.startswith(_OLE):
        raise Refused("This is a spreadsheet of the old .xls kind; save it as .xlsx or CSV.")
    if data.startswith(_PDF):
        raise Refused("This is a PDF; values cannot be read from it safely. Send CSV, XLSX, FHIR or HL7 v2.")
    if head[:3] in (b"MSH", b"FHS", b"BHS"):
        return "hl7v2"
    if head[:1] in (b"{", b"["):
        return "fhir"
    if name.lower().endswith((".xlsx", ".xlsm")):
        raise Refused("The name says spreadsheet but the content is none; save it again as .xlsx or CSV.")
    return "csv"


def check_format(claimed: str, data: bytes) -> None:
    """Refuse content that contradicts what the sender says it is."""
    found = format_of("", data)
    if found != claimed:
        raise Refused(f"The file was announced as {claimed}, but its content is {found}.")


def _has_doctype(archive: zipfile.ZipFile, part: zipfile.ZipInfo) -> bool:
    """Whether a part declares a document type, which no spreadsheet needs and every entity attack does."""
    if not part.filename.endswith((".xml", ".rels")) or part.flag_bits & 1:
        return False
    with archive.open(part) as opened:
        return b"<!DOCTYPE" in opened.read(4096).replace(b"\x00", b"")


def check_zip(data: bytes) -> None:
    """Look at the directory of a spreadsheet before unpacking any of it."""
    try:
        with zipfile.ZipFile(io.BytesIO(data)) as archive:
            parts = archive.infolist()
            declared = [p.filename for p in parts[:MAX_PARTS] if _has_doctype(archive, p)]
    except (
        zipfile.BadZipFile,
        ValueError,
        NotImplementedError,
        OverflowError,
        UnicodeError,
        EOFError,
        RuntimeError,
        zlib.error,
    ):
        raise Refused("The spreadsheet is damaged: its table of contents cannot be read.") from None
    if declared:
        raise Refused("The spreadsheet holds XML entities; such a file is not read.")
    unpacked = sum(part.file_size for part in parts)
    packed = max(1, sum(part.compress_size for part in parts))
    if len(parts) > MAX_PARTS:
        raise Refused(f"The spreadsheet has {len(parts)} parts; at most {MAX_PARTS} are read.")
    if unpacked > MAX_UNPACKED or unpacked / packed > MAX_RATIO:
        raise Refused(
            f"The spreadsheet unpacks to {unpacked / MEGABYTE:.0f} MB ({unpacked / packed:.0f} times its size); "
            f"at most {MAX_UNPACKED // MEGABYTE} MB and {MAX_RATIO} times are read. "
            "Save only the sheet that is needed, or CSV."
        )
    if any(part.flag_bits & 1 for part in parts):
        raise Refused("The spreadsheet is locked by a password; save it without one.")
    names = {part.filename for part in parts}
    if "[Content_Types].xml" not in names:
        raise Refused("This is an archive, not a spreadsheet; send the files one by one.")
