"""Any bytes at all: `derive` answers with a table or with a sentence, never with a traceback."""

from hypothesis import given, settings
from hypothesis import strategies as st

from worksheet.transfer import batch

HEAD = b"stay,time,site,po2,hb\n"
ROW = b'S1,2026-03-01T06:00:00+00:00,arterial,90,"10"\n'


@settings(max_examples=120, deadline=None)
@given(data=st.one_of(st.binary(max_size=300), st.binary(max_size=60).map(lambda tail: HEAD + ROW + tail)))
def test_any_bytes(data, tmp_path_factory):
    folder = tmp_path_factory.mktemp("bytes")
    (folder / "in.csv").write_bytes(data)
    code = batch.main([str(folder / "in.csv"), "--output", str(folder / "out.csv")])
    assert code in (0, 2)
    assert (folder / "out.csv").exists() == (code == 0)


def test_a_binary_header_is_told(tmp_path, capsys):
    (tmp_path / "in.csv").write_bytes(b"ab\rcd,\x01\x02\n1,2\n")
    assert batch.main([str(tmp_path / "in.csv"), "--output", str(tmp_path / "out.csv")]) == 2
    assert "no CSV file" in capsys.readouterr().err
