"""HL7 v2 messages: cut out of files and streams, decoded, taken apart into segments; headers and acknowledgements."""

from __future__ import annotations

import re
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from datetime import UTC, datetime

import hl7

from .cells import shortened
from .limits import MEGABYTE
from .rows import Refused

START, END, CR = b"\x0b", b"\x1c", b"\r"
MAX_MESSAGE = MEGABYTE
MAX_SEGMENTS = 5_000
MAX_PARTS = 5_000  # separators in one segment
VERSIONS = ("2.3", "2.3.1", "2.4", "2.5", "2.5.1", "2.6", "2.7", "2.7.1", "2.8", "2.8.1", "2.8.2")
_CHARSETS = {  # HL7 table 0211
    "ASCII": "ascii", "8859/1": "latin-1", "8859/2": "iso8859-2", "8859/5": "iso8859-5", "8859/7": "iso8859-7",
    "8859/9": "iso8859-9", "8859/15": "iso8859-15", "UNICODE UTF-8": "utf-8", "UNICODE": "utf-8", "UTF-8": "utf-8",
    "UNICODE UTF-16": "utf-16",
}  # fmt: skip
_SEGMENT = re.compile(r"[A-Z][A-Z0-9]{2}(\||$)")


@dataclass(frozen=True)
class Header:
    """What the first segment says, as far as it could be read."""

    sender: str = ""
    control_id: str = ""
    kind: str = ""
    processing: str = ""
    version: str = ""
    zone: str = ""  # offset of the message time, +0100
    fields: tuple[str, ...] = ()


class Rejected(Exception):
    """A message that cannot be taken: ``code`` is AR (never send it again like this) or AE (an error here)."""

    def __init__(self, code: str, reason: str) -> None:
        self.code, self.reason = code, reason
        super().__init__(reason)


def split_file(data: bytes) -> list[bytes]:
    """The messages of a file: batch envelopes and MLLP frames removed, any kind of line end."""
    plain = data.replace(START, b"").replace(END, b"\r").replace(b"\r\n", CR).replace(b"\n", CR)
    messages: list[list[bytes]] = []
    for line in plain.removeprefix(b"\xef\xbb\xbf").split(CR):
        if line.startswith(b"MSH"):
            messages.append([])
        if not line.strip() or line[:3] in (b"FHS", b"BHS", b"BTS", b"FTS"):
            continue
        if not messages:
            raise Refused(f"The file does not begin with MSH but with '{shortened(line[:30].decode('latin-1'))}'.")
        messages[-1].append(line)
    if not messages:
        raise Refused("The file holds no message: no line begins with MSH.")
    return [CR.join(lines) for lines in messages]


def header(raw: bytes) -> Header:
    """The header of a message; never fails, so that even a broken message can be answered."""
    first = re.split(rb"[\r\n]", raw.lstrip(b"\r\n"), maxsplit=1)[0].decode("latin-1")
    if not first.startswith("MSH") or len(first) < 8:
        return Header()
    mark = first[3]
    fields = ["MSH", mark, *first.split(mark)[1:]]
    take = [*fields, *[""] * 30]
    component = take[2][:1] or "^"
    kind = "^".join(take[9].split(component)[:2])
    sender = "|".join(p.split(component)[0] for p in take[3:5])
    offset = re.search(r"[+-]\d{4}$", take[7])
    return Header(sender[:160], take[10][:80], kind, take[11].split(component)[0], take[12].split(component)[0].strip(),
                  offset.group(0) if offset else "", tuple(take[:25]))  # fmt: skip


def check(head: Header, raw: bytes) -> None:
    """Refuse what this program does not take, with the reason for the sender."""
    if not head.fields:
        raise Rejected("AR", "the message does not begin with MSH")
    marks = head.fields[1] + head.fields[2]
    if not 5 <= len(marks) <= 6 or len(set(marks)) != len(marks) or any(c.isalnum() or c.isspace() for c in marks):
        raise Rejected("AR", "the separators (MSH-1, MSH-2) cannot be used")
    if len(raw) > MAX_MESSAGE:
        raise Rejected("AR", f"the message is larger than {MAX_MESSAGE // MEGABYTE} MB")
    if b"\x00" in raw and "UTF-16" not in head.fields[18]:
        raise Rejected("AR", "the message contains NUL bytes")
    if head.kind not in ("ORU^R01", "ORU^", "ORU"):
        raise Rejected("AR", f"messages of type {shortened(head.kind) or '(none)'} are not taken; only ORU^R01")
    if head.version not in VERSIONS:
        raise Rejected("AR", f"version {shortened(head.version) or '(none)'} is not taken; 2.3 to 2.8 are")
    if head.processing not in ("P", ""):
        raise Rejected(
            "AR", f"processing {shortened(head.processing)} (training or test) is not stored as patient data"
        )
    if not head.control_id:
        raise Rejected("AR", "the message has no control id (MSH-10)")


def decode(raw: bytes, head: Header) -> tuple[str, str]:
    """The text of a message by MSH-18, and a note if that had to be left."""
    claimed = head.fields[18].split("~")[0].strip().upper() if head.fields else ""
    codec = _CHARSETS.get(claimed, "utf-8")
    try:
        return raw.decode(codec), ""
    except (UnicodeDecodeError, LookupError):
        note = f"The characters are not {claimed or 'UTF-8'} as the message says; read as Windows-1252."
        return raw.decode("cp1252", "replace"), note


def segments(raw: bytes, head: Header) -> tuple[list[hl7.Segment], list[str]]:
    """The segments of a message, and notes on what was repaired."""
    text, note = decode(raw, head)
    notes = [note] if note else []
    lines: list[str] = []
    for line in re.split(r"\r\n|\r|\n", text):
        if _SEGMENT.match(line):
            lines.append(line)
        elif line.strip() and lines:
            lines[-1] += " " + line  # a line break inside a comment
            notes.append("A line break inside a segment was joined.")
    if len(lines) > MAX_SEGMENTS:
        raise Rejected("AR", f"the message has {len(lines):,} segments; at most {MAX_SEGMENTS:,} are read")
    most = max((sum(line.count(c) for c in "|^~&") for line in lines), default=0)
    if most > MAX_PARTS:
        raise Rejected("AR", f"a segment has {most:,} parts; at most {MAX_PARTS:,} are read")
    try:
        return list(hl7.parse("\r".join(lines))), list(dict.fromkeys(notes))
    except (hl7.HL7Exception, ValueError, IndexError, KeyError, TypeError, AttributeError) as error:
        raise Rejected("AR", f"the message cannot be taken apart ({type(error).__name__})") from None


def text(segment: hl7.Segment, *path: int) -> str:
    """The text at field, component, subcomponent (from 1; first repetition), unescaped; empty if there is none."""
    return at(segment, path[0], 1, *path[1:])


def at(segment: hl7.Segment, number: int, repetition: int, component: int = 0, sub: int = 1) -> str:
    """The text at a field's repetition; without a component the whole repetition as it was sent."""
    try:
        item = segment(number)(repetition)
        if not component:
            return str(item)
        part = item(component) if isinstance(item, hl7.Container) else (item if component == 1 else "")
        part = part(sub) if isinstance(part, hl7.Container) else (part if sub == 1 else "")
        return unescape(str(part)).strip()
    except (IndexError, KeyError, TypeError):
        return ""


def repetitions(segment: hl7.Segment, number: int) -> int:
    """How many repetitions a field has."""
    try:
        return len(segment(number))
    except (IndexError, KeyError, TypeError):
        return 0


_ESCAPES = {"F": "|", "S": "^", "T": "&", "R": "~", "E": "\\", ".br": "\n"}


def unescape(value: str) -> str:
    r"""Replace the escapes of HL7 (``\F\``, ``\S\``, ``\T\``, ``\R\``, ``\E\``, ``\Xdd\``); others are dropped."""
    if "\\" not in value:
        return value

    def one(match: re.Match[str]) -> str:
        name = match.group(1)
        if re.fullmatch(r"X(?:[0-9A-Fa-f]{2})+", name):
            return bytes.fromhex(name[1:]).decode("latin-1")
        return _ESCAPES.get(name, "")

    return re.sub(r"\\([^\\]{0,40})\\", one, value)


def acknowledge(head: Header, code: str, reason: str = "") -> bytes:
    """The ACK for a message: AA, AE or AR, with the reason in ERR and MSA-3."""
    fields = [*head.fields, *[""] * 30]
    now = datetime.now(UTC).strftime("%Y%m%d%H%M%S+0000")
    clean = re.sub(r"[|^~\\&\r\n]", " ", reason)[:200]
    trigger = head.kind.split("^")[1] if "^" in head.kind else ""
    kind = f"ACK^{trigger}^ACK" if trigger else "ACK"
    version = head.version if head.version in VERSIONS else "2.5"
    out = [
        f"MSH|^~\\&|{_bare(fields[5])}|{_bare(fields[6])}|{_bare(fields[3])}|{_bare(fields[4])}|{now}||{kind}"
        f"|A{now[:14]}{zlib.crc32(fields[10].encode()) % 10000:04d}|P|{version}||||||UNICODE UTF-8",
        f"MSA|{code}|{_bare(fields[10])}|{clean}",
    ]
    if code != "AA":
        out.append(f"ERR|||{'207' if code == 'AE' else '200'}^{clean[:80]}^HL70357|E||||{clean}")
    return "\r".join(out).encode("utf-8") + CR


def _bare(value: str) -> str:
    return re.sub(r"[|\r\n]", " ", value)[:180]


def frames(buffer: bytearray) -> Iterator[bytes]:
    """Take complete MLLP frames out of a buffer; what is incomplete stays, bytes between frames are dropped."""
    while True:
        start = buffer.find(START)
        if start < 0:
            buffer.clear()
            return
        end = buffer.find(END, start)
        if end < 0:
            del buffer[:start]
            return
        frame = bytes(buffer[start + 1 : end])
        del buffer[: end + 1]
        yield frame
