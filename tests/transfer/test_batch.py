"""The batch command: the contract of its columns, what passes through, and every way to go wrong."""

import csv
import io
import os
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from django.core.management import call_command

from worksheet.oxygen.quantities import DERIVED, WITH_SD
from worksheet.transfer import batch, batch_split
from worksheet.transfer.batch_rows import OUTPUT, texts

MANAGE = Path(__file__).parents[2] / "manage.py"
CONTRACT = [
    "cao2",
    "cvo2",
    "avdo2",
    "dissolved_share",
    "do2",
    "vo2",
    "do2i",
    "vo2i",
    "o2er",
    "pf_ratio",
    "sf_ratio",
    "pao2_alveolar",
    "aa_gradient",
    "a_a_ratio",
    "shunt_fraction",
    "oxygenation_index",
    "rox_index",
    "so2_from_po2",
    "gap_calculated",
    "gap_measured",
    "p50",
    "extractable_o2",
    "predicted_spo2",
    "co2_gap",
    "co2_o2_ratio",
    "bsa",
    "cao2_sd",
    "do2_sd",
    "do2i_sd",
    "o2er_sd",
    "pf_ratio_sd",
    "shunt_fraction_sd",
    "ledger_lung",
    "ledger_haemoglobin",
    "ledger_function",
    "ledger_flow",
    "ledger_total",
    "ledger_unit",
    "limiting_step",
    "findings",
]
HEAD = "stay,time,site,ph,pco2,po2,hb,so2,fio2,cardiac_output,height,weight,note"
ROWS = [
    "A,2025-03-01T05:40:00+01:00,arterial,7.40,40,90,10.0,97,0.5,5.0,180,80,first",
    "A,2025-03-01T05:45:00+01:00,mixed_venous,7.36,46,38,10.0,70,,,,,",
    "A,2025-03-01T06:10:00+01:00,,,,,8.2,,,,,,lab",
    "A,2025-03-01T06:30:00+01:00,arterial,7.38,41,88,,96,,,,,second",
    "B,2025-03-01T04:45:00Z,,7.41,39,80,,,,,,,",
]


@pytest.fixture
def run(tmp_path, capsys):
    """Derive a text (or bytes): exit code, output rows (None if there is no file), what was said."""

    def call(text, *options):
        source, target = tmp_path / "in.csv", tmp_path / "out.csv"
        source.write_bytes(text if isinstance(text, bytes) else text.encode())
        code = batch.main([str(source), "--output", str(target), *options])
        said = capsys.readouterr().err
        left = sorted(path.name for path in tmp_path.iterdir() if path.name not in ("in.csv", "out.csv"))
        assert left == [], "nothing half-written is left"
        rows = (
            list(csv.DictReader(io.StringIO(target.read_text("utf-8", "surrogateescape")))) if target.exists() else None
        )
        target.unlink(missing_ok=True)
        return code, rows, said

    return call


def lines(*rows, head=HEAD):
    return "\n".join([head, *rows]) + "\n"


def test_output_columns_are_the_contracts_after_the_inputs(run):
    code, rows, said = run(lines(*ROWS))
    assert code == 0
    assert list(rows[0]) == [*HEAD.split(","), *CONTRACT, "basis"]
    assert set(CONTRACT) >= {*DERIVED, *(f"{name}_sd" for name in WITH_SD)}
    assert "5 rows read, 4 written" in said


def test_numbers_are_in_the_units_of_the_contract(run):
    _, rows, _ = run(lines(*ROWS))
    first = {name: float(rows[0][name]) for name in CONTRACT[:35] if rows[0][name]}
    cao2, cvo2 = 1.34 * 10 * 0.97 + 0.279, 1.34 * 10 * 0.70 + 0.1178
    expected = {"cao2": cao2, "cvo2": cvo2, "o2er": 100 * (cao2 - cvo2) / cao2, "do2": 50 * cao2, "do2i": 25 * cao2,
                "vo2": 50 * (cao2 - cvo2),
                "pf_ratio": 180, "bsa": 2, "co2_gap": 6, "dissolved_share": 27.9 / cao2}  # fmt: skip
    for name, number in expected.items():
        assert first[name] == pytest.approx(number, rel=5e-4), name
    assert 90 < first["so2_from_po2"] < 100
    assert 0 < first["cao2_sd"] < 1
    assert 1 < first["shunt_fraction"] < 40


def test_values_are_carried_and_the_basis_says_so(run):
    _, rows, _ = run(lines(*ROWS))
    second = rows[2]
    assert float(second["cao2"]) == pytest.approx(1.34 * 8.2 * 0.96 + 0.0031 * 88, rel=5e-4)
    assert "hb-carried:20" in second["basis"].split(";")
    assert "fio2-carried:50" in second["basis"].split(";")
    assert float(second["ledger_haemoglobin"]) < 0
    parts = sum(float(second[f"ledger_{step}"]) for step in ("lung", "haemoglobin", "function", "flow"))
    assert parts == pytest.approx(float(second["ledger_total"]), abs=1e-3)
    assert second["ledger_unit"] == "mL/min/m2"
    assert second["limiting_step"] == "haemoglobin"
    assert rows[0]["ledger_total"] == ""


def test_one_row_for_each_sample_and_none_for_readings_alone(run):
    _, rows, _ = run(lines(*ROWS))
    assert [row["note"] for row in rows] == ["first", "", "second", ""]
    assert rows[1]["cvo2"] == rows[0]["cvo2"]
    assert rows[1]["cao2"] == ""


def test_a_gas_without_a_site_is_arterial_with_a_finding(run):
    _, rows, _ = run(lines(*ROWS))
    assert rows[3]["findings"] == "site-not-stated"
    assert rows[3]["site"] == ""
    assert float(rows[3]["so2_from_po2"]) > 90


def test_a_saturation_without_site_and_gas_is_kept_and_not_used(run):
    _, rows, _ = run(lines("A,2025-03-01T05:40:00Z,,,,,10.0,70,,,,,"))
    assert rows[0]["findings"] == "saturation-without-site"
    assert rows[0]["cao2"] == ""


def test_input_passes_through_byte_for_byte(tmp_path):
    source, target = tmp_path / "in.csv", tmp_path / "out.csv"
    head = b"note,ph,pco2,po2,time,stay, odd name ,site"
    row = b'"say ""hi"", na\xefve",7.400,0040.0, 90 ,2025-03-01T05:40:00.5+01:00,"a,b",\xff,arterial'
    source.write_bytes(b"\xef\xbb\xbf" + head + b"\r\n" + row + b"\r\n\r\n")
    assert batch.main([str(source), "--output", str(target)]) == 0
    written = target.read_bytes().split(b"\n")
    assert written[0].startswith(head + b",cao2")
    assert written[1].startswith(row + b",")
    assert written[2:] == [b""]


def test_a_line_break_inside_quotes_stays_inside(run):
    text = lines(ROWS[0].replace("first", '"one\ntwo"'), ROWS[3].replace("96", "x"))
    code, _, said = run(text)
    assert code == 2
    assert "line 4, column so2: 'x' is not a number" in said
    _, rows, _ = run(lines(ROWS[0].replace("first", '"one\ntwo"'), ROWS[3]))
    assert rows[0]["note"] == "one\ntwo"


@pytest.mark.parametrize(
    ("text", "parts"),
    [
        (b"", ["line 1", "empty"]),
        (b"\n\n", ["line 1", "empty"]),
        ("stay;time;po2\nA;x;90\n", ["line 1", "semicolons"]),
        ("stay\ttime\tpo2\n", ["line 1", "tabs"]),
        ("A,2025-03-01T05:40:00Z,90\n", ["line 1", "no known column name"]),
        ("po2,ph,po2\n90,7.4,80\n", ["line 1, column po2", "twice"]),
        ("po2,cao2\n90,13\n", ["line 1, column cao2", "output has a column of this name"]),
        (lines(ROWS[0]).encode("utf-16"), ["line 1", "UTF-16"]),
        (lines(ROWS[0]).encode("utf-16-le"), ["line 1", "UTF-16"]),
        (lines(ROWS[0], "A,2025-03-01T05:41:00Z,arterial"), ["line 3", "3 cells", "13"]),
        (lines(ROWS[0], ROWS[1] + ",,"), ["line 3", "15 cells", "13"]),
        (lines(ROWS[0].replace("7.40", "7,40")), ["line 2", "14 cells"]),
        (lines(ROWS[0].replace("7.40", '"7,40"')), ["line 2, column ph", "'7,40'", "decimal point"]),
        (lines(ROWS[0].replace("7.40", "normal")), ["line 2, column ph", "'normal' is not a number"]),
        (lines(ROWS[0].replace("7.40", "nan")), ["line 2, column ph", "'nan' is not a number"]),
        (lines(ROWS[0].replace("7.40", "inf")), ["line 2, column ph", "'inf' is not a number"]),
        (lines(ROWS[0].replace("90", "<90", 1)), ["line 2, column po2", "'<90'"]),
        (lines(ROWS[0].replace("+01:00", "")), ["line 2, column time", "no offset"]),
        (lines(ROWS[0].replace("2025-03-01T", "2025-02-30T")), ["line 2, column time", "not a time"]),
        (lines(ROWS[0].replace("2025-03-01T05:40:00+01:00", "")), ["line 2, column time", "missing"]),
        (lines(ROWS[0].replace("A,", ",", 1)), ["line 2, column stay", "missing"]),
        (lines(ROWS[0].replace("A,", "  ,", 1)), ["line 2, column stay", "missing"]),
        (lines(ROWS[0].replace("arterial", "artery")), ["line 2, column site", "'artery'", "arterial, mixed_venous"]),
        (lines(ROWS[0] + "\x00"), ["line 2", "null character"]),
        (lines(ROWS[0].replace("first", '"open')), ["line 2", "cannot be read as CSV"]),
    ],
)
def test_bad_input_names_line_column_and_reason_and_writes_nothing(run, text, parts):
    code, rows, said = run(text)
    assert code == 2
    assert rows is None
    for part in parts:
        assert part in said
    assert "Traceback" not in said


def test_all_problems_are_counted_and_the_first_twenty_listed(run):
    bad = [f"A,2025-03-01T05:{i:02d}:00Z,arterial,x,40,90,,,,,,," for i in range(30)]
    code, rows, said = run(lines(*bad))
    assert (code, rows) == (2, None)
    assert said.count("is not a number") == 20
    assert "line 2, column ph" in said
    assert "and 10 more" in said
    assert "30 problems, nothing written" in said


def test_a_problem_far_into_the_file_leaves_no_output(run, monkeypatch):
    monkeypatch.setattr(batch_split, "PIECE", 500)
    good = [row.replace("A,", f"S{i},", 1) for i in range(40) for row in ROWS[:4]]
    code, rows, said = run(lines(*good, "Z,2025-03-01T05:40:00Z,arterial,x,,,,,,,,,"))
    assert (code, rows) == (2, None)
    assert "line 162, column ph" in said


@pytest.mark.parametrize("earlier", [None, "what was there before\n"])
def test_what_was_there_before_stays_when_the_input_is_bad(tmp_path, earlier):
    source, target = tmp_path / "in.csv", tmp_path / "out.csv"
    source.write_text(lines(ROWS[0].replace("7.40", "x")))
    if earlier:
        target.write_text(earlier)
    assert batch.main([str(source), "--output", str(target)]) == 2
    assert (target.read_text() if target.exists() else None) == earlier


def test_missing_file_missing_folder_and_same_file(tmp_path, capsys):
    source = tmp_path / "in.csv"
    assert batch.main([str(source), "--output", str(tmp_path / "out.csv")]) == 2
    source.write_text(lines(*ROWS))
    assert batch.main([str(source), "--output", str(tmp_path / "none" / "out.csv")]) == 2
    assert batch.main([str(source), "--output", str(source)]) == 2
    said = capsys.readouterr().err
    assert "No such file" in said
    assert "no such folder" in said
    assert "same file" in said
    assert source.read_text() == lines(*ROWS)


def test_impossible_values_are_not_used_and_said(run):
    code, rows, said = run(lines(ROWS[0].replace("7.40", "100").replace(",10.0,", ",300,")))
    assert code == 0
    assert {"ph-impossible", "hb-impossible"} <= set(rows[0]["findings"].split(";"))
    assert rows[0]["cao2"] == ""
    assert "impossible values not used: " in said
    assert "ph 1" in said


@pytest.mark.parametrize(
    ("fio2", "pf"), [("0.5", 180.0), ("50", 180.0), ("1", 90.0), ("1.0", 90.0), ("100", 90.0), ("0.21", 90 / 0.21)]
)
def test_fio2_of_1_or_less_is_a_fraction(run, fio2, pf):
    _, rows, _ = run(lines(ROWS[0].replace("0.5", fio2, 1)))
    assert float(rows[0]["pf_ratio"]) == pytest.approx(pf, rel=1e-5)


def test_a_saturation_of_1_or_less_is_a_finding_and_never_rescaled(run):
    _, rows, _ = run(lines(ROWS[0].replace(",97,", ",0.97,")))
    assert rows[0]["findings"] == "saturation-like-fraction"
    assert rows[0]["so2"] == "0.97"
    assert rows[0]["p50"] == ""
    assert "saturation-calculated" in rows[0]["basis"]


def test_without_stay_or_time_each_row_stands_alone(run):
    _, rows, _ = run("ph,pco2,po2,hb\n7.4,40,90,15\n7.4,40,90,\n")
    assert float(rows[0]["cao2"]) == pytest.approx(1.34 * 15 * 0.9675 + 0.279, rel=1e-3)
    assert rows[1]["cao2"] == ""


def test_a_transfusion_in_the_file_stops_haemoglobin_from_being_carried(run):
    head = "stay,time,site,ph,pco2,po2,hb,event"
    at = "A,2025-03-01T05:{}:00Z,"
    rows = [
        at.format("00") + "arterial,7.4,40,90,8,",
        at.format("10") + ",,,,,transfusion",
        at.format("20") + "arterial,7.4,40,90,,",
    ]
    _, found, _ = run(lines(*rows, head=head))
    assert found[1]["cao2"] == ""
    rows[1] = at.format("10") + ",,,,,walked about"
    _, found, _ = run(lines(*rows, head=head))
    assert float(found[1]["cao2"]) > 0


def many(stays, seed=3):
    """Rows of many stays, together, with readings between the gases."""
    random = np.random.default_rng(seed)
    rows = []
    for stay in range(stays):
        for i in range(int(random.integers(2, 9))):
            site = random.choice(["arterial", "mixed_venous", ""], p=[0.5, 0.2, 0.3])
            gas = (
                f"{7.3 + random.random() / 5:.2f},{35 + 10 * random.random():.0f},{60 + 80 * random.random():.0f}"
                if site
                else ",,"
            )
            hb = f"{7 + 6 * random.random():.1f}" if random.random() < 0.5 else ""
            time = f"2025-03-{1 + i // 3:02d}T0{i}:{random.integers(10, 59)}:00Z"
            rows.append(f"S{stay},{time},{site},{gas},{hb},,45,{5 + i},180,80,n{i}")
    return rows


def outputs(tmp_path, rows, *options):
    source, target = tmp_path / "in.csv", tmp_path / "out.csv"
    source.write_text(lines(*rows))
    assert batch.main([str(source), "--output", str(target), *options]) == 0
    return target.read_text().splitlines()


def test_pieces_make_no_difference(tmp_path, monkeypatch):
    rows = many(60)
    whole = outputs(tmp_path, rows)
    for size in (300, 1000, 5000):
        monkeypatch.setattr(batch_split, "PIECE", size)
        assert outputs(tmp_path, rows) == whole


def test_splitting_a_file_at_stays_gives_the_same_rows(tmp_path):
    rows = many(20)
    whole = outputs(tmp_path, rows)
    cut = next(i for i, row in enumerate(rows) if row.startswith("S11,"))
    assert outputs(tmp_path, rows[:cut])[1:] + outputs(tmp_path, rows[cut:])[1:] == whole[1:]


@pytest.mark.parametrize("size", [400, 3_000_000])
def test_the_order_of_rows_does_not_matter_and_is_kept(tmp_path, monkeypatch, size):
    rows = many(40)
    whole = outputs(tmp_path, rows)
    shuffled = [rows[i] for i in np.random.default_rng(5).permutation(len(rows))]
    monkeypatch.setattr(batch_split, "PIECE", size)
    scattered = outputs(tmp_path, shuffled)
    assert sorted(scattered) == sorted(whole)
    kept = [row for row in shuffled if any(line.startswith(row + ",") for line in whole)]
    assert [line[: len(row)] for line, row in zip(scattered[1:], kept, strict=True)] == kept


def test_problems_in_a_scattered_file_keep_their_line_numbers(run, monkeypatch):
    monkeypatch.setattr(batch_split, "PIECE", 300)
    rows = many(30)
    shuffled = [rows[i] for i in np.random.default_rng(5).permutation(len(rows))]
    shuffled[50] = shuffled[50].replace(",45,", ",x,")
    code, _, said = run(lines(*shuffled))
    assert code == 2
    assert "line 52, column fio2" in said
    assert "1 problem," in said


def test_two_processes_give_what_one_gives(tmp_path, monkeypatch):
    rows = many(80)
    one = outputs(tmp_path, rows, "--processes", "1")
    monkeypatch.setattr(batch, "_PARALLEL_FROM", 0)
    monkeypatch.setattr(batch_split, "PIECE", 2000)
    assert outputs(tmp_path, rows, "--processes", "2") == one


@pytest.mark.parametrize(
    ("value", "text"),
    [(412.0, "412"), (0.1 + 0.2, "0.3"), (13.123456789, "13.1235"), (1234567.0, "1234570"), (-0.0, "0"), (np.nan, None),
     (0.000123456789, "0.000123457"), (-98.76549, "-98.7655"), (0.0, "0")],
)  # fmt: skip
def test_numbers_have_six_significant_digits(value, text):
    assert texts(np.array([value])).to_pylist() == [text]


def test_rounding_loses_at_most_half_of_the_sixth_digit_and_writes_no_more():
    uniform, wide = (
        np.random.default_rng(1).uniform(-1000, 1000, 4000),
        10.0 ** np.random.default_rng(2).uniform(-4, 5, 4000),
    )
    for value, text in zip(
        [*uniform.tolist(), *wide.tolist()], texts(np.concatenate([uniform, wide])).to_pylist(), strict=True
    ):
        sixth = 10.0 ** (np.floor(np.log10(abs(value))) - 5)
        assert abs(float(text) - value) <= sixth * 0.500001
        assert len(text.lstrip("-0.").replace(".", "")) <= 6


def process(*arguments, **more):
    return subprocess.run([sys.executable, str(MANAGE), "derive", *arguments], capture_output=True, check=False, **more)


def test_standard_input_and_output_and_the_process(tmp_path):
    text = lines(*ROWS)
    source, target = tmp_path / "in.csv", tmp_path / "out.csv"
    source.write_text(text)
    piped = process("-", "--output", "-", input=text.encode())
    assert piped.returncode == 0, piped.stderr
    filed = process(str(source), "--output", str(target))
    assert filed.returncode == 0, filed.stderr
    assert piped.stdout == target.read_bytes()
    assert b"4 written to standard output" in piped.stderr
    bad = process("-", "--output", "-", input=text.replace("7.40", "x").encode())
    assert (bad.returncode, bad.stdout) == (2, b"")
    assert b"standard input: line 2, column ph" in bad.stderr
    assert target.stat().st_mode & 0o777 == 0o666 & ~_umask()


def _umask():
    mask = os.umask(0)
    os.umask(mask)
    return mask


def test_help_has_an_example_and_django_knows_the_command(tmp_path, capsys):
    shown = process("--help")
    assert shown.returncode == 0
    assert b"example:" in shown.stdout
    assert b"python manage.py derive gases.csv --output derived.csv" in shown.stdout
    source, target = tmp_path / "in.csv", tmp_path / "out.csv"
    source.write_text(lines(*ROWS))
    call_command("derive", str(source), output=str(target))
    assert len(target.read_text().splitlines()) == 5
    with pytest.raises(SystemExit) as stopped:
        call_command("derive", str(tmp_path / "none.csv"), output=str(target))
    assert stopped.value.code == 2


def test_nothing_heavy_is_imported():
    """Start-up: no Django, no plotting, no statistics, no typesetting."""
    probe = "import sys, worksheet.transfer.batch; print(sorted(sys.modules))"
    shown = subprocess.run(
        [sys.executable, "-c", probe], capture_output=True, check=True, text=True, cwd=MANAGE.parent
    ).stdout
    for name in ("django", "plotly", "scipy.stats", "typst", "pandas", "dask"):
        assert f"'{name}" not in shown, name


def test_output_names_are_unique():
    assert len(set(OUTPUT)) == len(OUTPUT)


def test_being_stopped_leaves_nothing(tmp_path):
    source, target = tmp_path / "in.csv", tmp_path / "out.csv"
    source.write_text(lines(*many(20_000)))
    running = subprocess.Popen(
        [sys.executable, str(MANAGE), "derive", str(source), "--output", str(target)], stderr=subprocess.PIPE, text=True
    )
    for _ in range(2000):
        if any(path.suffix == ".part" for path in tmp_path.iterdir()):
            break
        time.sleep(0.005)
    running.terminate()
    said = running.communicate(timeout=60)[1]
    assert running.returncode == 130
    assert said.rstrip().endswith("derive: stopped; nothing written")
    assert [path.name for path in tmp_path.iterdir()] == ["in.csv"]


def test_one_stay_longer_than_a_piece(tmp_path, monkeypatch):
    rows = [row.replace(row.split(",")[0], "S0", 1) for row in many(8)]
    rows += ["S1,2025-03-09T05:00:00Z,arterial,7.4,40,90,9.0,,45,5,180,80,last"]
    whole = outputs(tmp_path, rows)
    monkeypatch.setattr(batch_split, "PIECE", 150)
    assert outputs(tmp_path, rows) == whole
