"""Files made to harm: a clear refusal, in bounded memory and time. Each is read in a process of its own."""

import json
import subprocess
import sys
from pathlib import Path

import pytest
from django.core.management import CommandError, call_command

ROOT = Path(__file__).parents[2]
MEMORY = 300  # MB, the whole process with its libraries
SECONDS = 60

READ = """
import json, os, resource, sys, time
os.environ["DJANGO_SETTINGS_MODULE"] = "worksheet.settings"
import django; django.setup()
from pathlib import Path
from zoneinfo import ZoneInfo
from worksheet.transfer import limits, pipeline
from worksheet.transfer.group import drafts_of
from worksheet.transfer.rows import Refused
from worksheet.transfer.times import TimeRules
started, said, fates = time.monotonic(), "", {}
try:
    data = limits.read_file(Path(sys.argv[1]))
    kind = limits.format_of(sys.argv[1], data)
    parsed = pipeline.parse(kind, data, pipeline.Options(TimeRules(ZoneInfo("UTC"))))
    drafts_of(parsed.rows, observations=kind in ("fhir", "hl7v2"))
    for row in parsed.rows:
        fates[str(row.fate)] = fates.get(str(row.fate), 0) + 1
except Refused as refusal:
    said = str(refusal)
peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
print(json.dumps({"said": said, "fates": fates, "megabytes": peak, "seconds": time.monotonic() - started}))
"""


def read(path):
    done = subprocess.run(
        [sys.executable, "-c", READ, str(path)], cwd=ROOT, capture_output=True, text=True, timeout=2 * SECONDS
    )
    assert done.returncode == 0, done.stderr[-2000:]
    return json.loads(done.stdout)


HEAD = b"stay,time,site,ph,po2\n"
ROW = b"A,2026-02-11T05:40:00Z,arterial,7.3,90\n"
OBS = (
    b'{"resourceType":"Observation","status":"final","code":{"coding":[{"system":"http://loinc.org","code":"2744-1"}]},'
    b'"subject":{"reference":"Patient/1"},"effectiveDateTime":"2026-02-11T05:40:00Z","valueQuantity":{"value":7.3,"code":"[pH]"}}'
)
MSH = b"MSH|^~\\&|A|B|C|D|20260211||ORU^R01|1|P|2.5\rPID|||K-1\rOBR|1||||||20260211054000\r"


def minutes(n):
    return b"".join(
        b"S%d,2026-02-%02dT%02d:%02d:00Z,arterial,7.%d,%d\n"
        % (i % 900, 1 + i // 1440 % 28, i // 60 % 24, i % 60, 300 + i % 90, 60 + i % 70)
        for i in range(n)
    )


HOSTILE = {
    "more bytes than allowed": (lambda: HEAD + ROW * 600_000, "larger than 20 MB"),
    "more rows than allowed": (
        lambda: HEAD + b"A,2026-02-11T05:40:00Z,arterial,7,9\n" * 150_000,
        "at most 120,000 rows",
    ),
    "as many rows as allowed": (lambda: HEAD + minutes(119_000), ""),
    "a cell of 10 MB": (
        lambda: HEAD + ROW + b"A,2026-02-11T05:40:00Z,arterial," + b"7" * 10_000_000 + b",90\n" + ROW,
        "",
    ),
    "a quoted cell of 10 MB": (
        lambda: HEAD + ROW + b'A,"' + b"x\n" * 5_000_000 + b'",arterial,7.3,90\n',
        "at most 120,000 rows",
    ),
    "an open quotation mark": (lambda: HEAD + b'A,"2026-02-11T05:40:00Z,arterial,7.3,90\n' + ROW * 20_000, ""),
    "a header of 100,000 columns": (lambda: HEAD[:-1] + b",x" * 100_000 + b"\n" + ROW, "columns"),
    "only separators": (lambda: b"," * 10_000_000, "No header row"),
    "only quotation marks": (lambda: b'"' * 5_000_000, "No header row"),
    "one endless line": (lambda: b"stay,time" + b" " * 15_000_000, "No header row"),
    "NUL bytes": (lambda: HEAD + b"A,\x00\x00,arterial,7.3,90\n", "Line 2 contains NUL bytes"),
    "deep JSON": (lambda: b'{"a":' * 3_000_000 + b"1" + b"}" * 1_000, "nested too deeply|not valid JSON"),
    "deep lists": (lambda: b"[" * 10_000_000, "nested too deeply|not valid JSON"),
    "deep resources": (lambda: b'{"resourceType":"Bundle","entry":[{"resource":' * 400 + OBS + b"}]}" * 400, ""),
    "many observations": (
        lambda: b'{"resourceType":"Bundle","entry":[' + b",".join([b'{"resource":' + OBS + b"}"] * 60_000) + b"]}",
        "",
    ),
    "a number of 10 MB": (lambda: OBS.replace(b"7.3", b"7" * 10_000_000), "not valid JSON"),
    "a number out of range": (lambda: OBS.replace(b"7.3", b"1e999"), ""),
    "not a number": (lambda: OBS.replace(b"7.3", b"NaN"), ""),
    "a text of 10 MB": (lambda: OBS.replace(b"2744-1", b"9" * 10_000_000), ""),
    "a segment of 10 MB": (lambda: MSH + b"OBX|1|NM|2744-1^pH^LN||7.3" + b"9" * 10_000_000 + b"||||||F\r", ""),
    "a million components": (lambda: MSH + b"OBX|1|NM|" + b"^" * 1_000_000 + b"||7.3||||||F\r", ""),
    "a million segments": (lambda: MSH + b"OBX|\r" * 1_000_000, ""),
    "a file of many messages": (lambda: (MSH + b"OBX|1|NM|2744-1^pH^LN||7.3||||||F\r") * 30_000, ""),
}


@pytest.mark.slow
@pytest.mark.parametrize("what", HOSTILE)
def test_hostile_files_are_refused_or_read_in_bounded_memory_and_time(tmp_path, what):
    make, words = HOSTILE[what]
    name = "file.json" if what.startswith(("deep", "many obs", "a number", "not a", "a text")) else "file.csv"
    path = tmp_path / name
    path.write_bytes(make())
    seen = read(path)
    assert seen["megabytes"] < MEMORY, seen
    assert seen["seconds"] < SECONDS, seen
    if words:
        assert any(word in seen["said"] for word in words.split("|")), seen
        assert seen["said"].endswith("."), seen
    else:
        assert seen["said"] or seen["fates"], seen


@pytest.mark.parametrize("data", [b"", b"\x00" * 100, b"\xff\xfe", b"   \n\n"])
def test_empty_files(unit, tmp_path, data):
    path = tmp_path / "empty.csv"
    path.write_bytes(data)
    with pytest.raises(CommandError, match=r"The file is empty\."):
        call_command("import_entries", str(path), unit="u7")


def test_the_command_never_prints_a_traceback(unit, tmp_path, capsys):
    with pytest.raises(CommandError, match="cannot be opened: no such file"):
        call_command("import_entries", str(tmp_path / "none.csv"), unit="u7")
    path = tmp_path / "a.csv"
    path.write_bytes(HEAD + ROW)
    with pytest.raises(CommandError, match="There is no unit 'x'"):
        call_command("import_entries", str(path), unit="x")
    with pytest.raises(CommandError, match="announced as fhir, but its content is csv"):
        call_command("import_entries", str(path), unit="u7", format="fhir")
    with pytest.raises(CommandError, match="not a time zone"):
        call_command("import_entries", str(path), unit="u7", zone="Nowhere")
    report = tmp_path / "report.json"
    call_command("import_entries", str(path), unit="u7", report=report)
    assert "1 rows (1 new); stored: 1 new, 1 stays made." in capsys.readouterr().out
    assert json.loads(report.read_text())["fates"] == {"new": 1}
    call_command("import_entries", str(path), unit="u7", dry_run=True)
    assert "1 same" in capsys.readouterr().out
    path.write_bytes(HEAD + b"A,2026-02-11T05:40:00Z,arterial,74,90\n")
    with pytest.raises(CommandError, match="No row is valid; nothing was stored"):
        call_command("import_entries", str(path), unit="u7")
    assert "row 2: invalid: pH 74 is impossible" in capsys.readouterr().err
