"""The batch command with Parquet at its ends, and on a Dask cluster: the same numbers as from CSV in one process."""

import csv
import io

import numpy as np
import pyarrow as pa
import pytest
from pyarrow import csv as arrow_csv
from pyarrow import parquet

from worksheet.transfer import batch, batch_split

HEAD = "stay,time,site,ph,pco2,po2,hb,so2,fio2,note,bed"
TEXT = "\n".join([
    HEAD,
    'A,2025-03-01T05:40:00+01:00,arterial,7.40,40,90,10.0,97,50,"one, two",4',
    'A,2025-03-01T05:45:00+01:00,mixed_venous,7.36,46,38,10.0,70,,"say ""hi""",4',
    "A,2025-03-01T06:30:00+01:00,arterial,7.38,41,88,,96,,,5",
    "B,2025-03-01T04:45:00Z,,7.41,39,80,,,,,6",
    "",
])  # fmt: skip


def derive(tmp_path, source, target):
    assert batch.main([str(tmp_path / source), "--output", str(tmp_path / target)]) == 0
    return tmp_path / target


def as_parquet(tmp_path, *, categorical=False):
    table = arrow_csv.read_csv(
        io.BytesIO(TEXT.encode()),
        convert_options=arrow_csv.ConvertOptions(
            column_types={"time": pa.timestamp("us", tz="UTC"), "bed": pa.int16()}, strings_can_be_null=True
        ),
    )
    if categorical:
        table = table.set_column(2, "site", table["site"].dictionary_encode())
    parquet.write_table(table, tmp_path / "in.parquet")
    return table


def rows(path):
    with open(path, newline="") as file:
        return list(csv.DictReader(file))


@pytest.mark.parametrize("categorical", [False, True])
def test_parquet_in_gives_the_numbers_of_csv(tmp_path, categorical):
    (tmp_path / "in.csv").write_text(TEXT)
    as_parquet(tmp_path, categorical=categorical)
    one, other = rows(derive(tmp_path, "in.csv", "a.csv")), rows(derive(tmp_path, "in.parquet", "b.csv"))
    given = set(HEAD.split(","))
    assert [{k: v for k, v in row.items() if k not in given} for row in one] == [
        {k: v for k, v in row.items() if k not in given} for row in other
    ]
    assert [row["note"] for row in other] == ["one, two", 'say "hi"', "", ""]


def test_parquet_out_keeps_types_and_values(tmp_path):
    table = as_parquet(tmp_path)
    (tmp_path / "in.csv").write_text(TEXT)
    text = rows(derive(tmp_path, "in.csv", "a.csv"))
    found = parquet.read_table(derive(tmp_path, "in.parquet", "b.parquet"))
    assert found.select(table.column_names).equals(table)
    assert found.schema.field("cao2").type == pa.float64()
    assert found.schema.field("findings").type == pa.string()
    assert found["cao2"].to_pylist() == [float(row["cao2"]) if row["cao2"] else None for row in text]
    assert found["findings"].to_pylist()[3] == "site-not-stated"


def test_csv_to_parquet_keeps_text_that_is_not_a_number_of_the_contract(tmp_path):
    (tmp_path / "in.csv").write_text(TEXT)
    found = parquet.read_table(derive(tmp_path, "in.csv", "b.parquet"))
    assert found["time"].to_pylist()[0] == "2025-03-01T05:40:00+01:00"
    assert found["bed"].to_pylist() == ["4", "4", "5", "6"]
    assert found["ph"].to_pylist() == [7.40, 7.36, 7.38, 7.41]


def test_nan_of_a_data_frame_is_not_measured(tmp_path):
    table = as_parquet(tmp_path)
    hb = pa.array([10.0, 10.0, float("nan"), float("nan")])
    parquet.write_table(table.set_column(6, "hb", hb), tmp_path / "in.parquet")
    found = parquet.read_table(derive(tmp_path, "in.parquet", "b.parquet"))
    assert "hb-carried" in found["basis"].to_pylist()[2]


def test_parquet_that_cannot_be_derived_says_why_and_leaves_nothing(tmp_path, capsys):
    target = tmp_path / "out.parquet"
    (tmp_path / "in.parquet").write_bytes(b"PAR1 but not really")
    assert batch.main([str(tmp_path / "in.parquet"), "--output", str(target)]) == 2
    naive = as_parquet(tmp_path)
    times = pa.array(naive["time"].to_pylist(), type=pa.timestamp("us"))
    parquet.write_table(naive.set_column(1, "time", times), tmp_path / "in.parquet")
    assert batch.main([str(tmp_path / "in.parquet"), "--output", str(target)]) == 2
    parquet.write_table(naive.append_column("nested", pa.array([[1]] * 4)), tmp_path / "in.parquet")
    assert batch.main([str(tmp_path / "in.parquet"), "--output", str(target)]) == 2
    said = capsys.readouterr().err
    assert "not a Parquet table" in said
    assert "no offset from UTC" in said
    assert sorted(path.name for path in tmp_path.iterdir()) == ["in.parquet"]


def many(stays=60):
    random = np.random.default_rng(4)
    made = []
    for stay in range(stays):
        for i in range(6):
            gas = f"{7.3 + random.random() / 5:.2f},{35 + 9 * random.random():.0f},{60 + 80 * random.random():.0f}"
            made.append(f"S{stay},2025-03-01T0{i}:10:00Z,arterial,{gas},{8 + 4 * random.random():.1f},,50,,")
    return HEAD + "\n" + "\n".join(made) + "\n"


@pytest.mark.slow
@pytest.mark.filterwarnings("ignore")  # the cluster's own
def test_a_cluster_gives_byte_for_byte_what_one_process_gives(tmp_path, monkeypatch):
    distributed = pytest.importorskip("distributed")
    monkeypatch.setattr(batch_split, "PIECE", 3000)
    (tmp_path / "in.csv").write_text(many())
    alone = derive(tmp_path, "in.csv", "alone.csv").read_bytes()
    with distributed.LocalCluster(
        n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None, host="127.0.0.1", scheduler_port=0
    ) as cluster:
        address = cluster.scheduler_address
        target = tmp_path / "cluster.csv"
        assert batch.main([str(tmp_path / "in.csv"), "--output", str(target), "--dask", address]) == 0
        assert target.read_bytes() == alone
        (tmp_path / "bad.csv").write_text(many().replace("arterial", "artery", 1))
        assert batch.main([str(tmp_path / "bad.csv"), "--output", str(tmp_path / "none.csv"), "--dask", address]) == 2
        assert not (tmp_path / "none.csv").exists()


def test_a_cluster_that_is_not_there(tmp_path, capsys):
    pytest.importorskip("distributed")
    (tmp_path / "in.csv").write_text(TEXT)
    source, target = str(tmp_path / "in.csv"), str(tmp_path / "o.csv")
    assert batch.main([source, "--output", target, "--dask", "tcp://127.0.0.1:9"]) == 2
    assert "nothing written" in capsys.readouterr().err
    assert not (tmp_path / "o.csv").exists()
