"""Every kind of series, marker, dash and hatch a description may use is drawn by both renderers."""

import json
from typing import get_args

import plotly.graph_objects as go
import pytest
from django.conf import settings

from worksheet.charts import table
from worksheet.charts.description import Axis, Chart, Dash, Hatch, Kind, Marker, Series, Style
from worksheet.charts.plotly import figure
from worksheet.charts.printed import printed
from worksheet.report.typeset import compile_document

TEMPLATE = """#import "chart.typ": chart
#set document(title: "t")
#set text(font: "Source Sans 3", lang: "en")
#chart(json(bytes(sys.inputs.payload)))
"""
GAP = float("nan")


def chart_of(*series: Series) -> Chart:
    x = Axis("x", "Time (h)", 0, 10, ((0, "0"), (10, "10")))
    y = Axis("y", "Value (1)", 0, 10, ((0, "0"), (10, "10")), decimals=1)
    return Chart("k", "Kinds", "What it shows.", "What it says.", x, (y,), series)


def set_on_paper(chart: Chart, tmp_path) -> bytes:
    """Set by the print template beside its own file, as a document would."""
    folder = tmp_path / "print"
    folder.mkdir()
    (folder / "chart.typ").write_text((settings.BASE_DIR / "templates/report/chart.typ").read_text())
    (folder / "t.typ").write_text(TEMPLATE)
    pdf, warnings = compile_document(str(folder / "t.typ"), json.dumps(printed(chart)), 0)
    assert warnings == []
    return pdf


@pytest.mark.parametrize("kind", get_args(Kind))
@pytest.mark.parametrize("values", [(1.0, 5.0, 3.0), (1.0, GAP, 3.0), (GAP, GAP, GAP), (4.0,), ()])
def test_each_kind_with_and_without_gaps(kind, values, tmp_path):
    x = tuple(float(i) for i in range(len(values)))
    low = tuple(v / 2 for v in values) if kind in ("band", "bar") else ()
    chart = chart_of(Series(kind, "one", "y", x, values, Style(marker="circle"), low=low))
    drawn = figure(chart)
    go.Figure({"data": drawn["data"], "layout": drawn["layout"]})
    assert set_on_paper(chart, tmp_path).startswith(b"%PDF-")
    assert len(table(chart).rows) == (0 if kind == "band" else len(values))


def test_steps_hold_a_value_until_the_next(tmp_path):
    chart = chart_of(Series("steps", "FiO2", "y", (0.0, 4.0, 10.0), (3.0, 5.0, 5.0)))
    assert figure(chart)["data"][0]["line"]["shape"] == "hv"
    assert set_on_paper(chart, tmp_path).startswith(b"%PDF-")


@pytest.mark.parametrize("marker", [m for m in get_args(Marker) if m])
@pytest.mark.parametrize("carried", [(), (False, True)])
def test_each_marker_filled_and_hollow(marker, carried, tmp_path):
    chart = chart_of(Series("points", "one", "y", (1.0, 2.0), (3.0, 4.0), Style(marker=marker), carried=carried))
    fill = figure(chart)["data"][0]["marker"]["color"]
    assert isinstance(fill, list) == bool(carried)
    assert set_on_paper(chart, tmp_path).startswith(b"%PDF-")


def test_dashes_and_hatches_are_known_to_both(tmp_path):
    lines = [Series("line", d, "y", (0.0, 9.0), (float(i), 1.0), Style(dash=d)) for i, d in enumerate(get_args(Dash))]
    bars = [
        Series("bar", f"h{h}", "y", (float(i),), (2.0,), Style(hatch=h), low=(0.0,))
        for i, h in enumerate(get_args(Hatch))
    ]
    chart = chart_of(*lines, *bars)
    drawn = figure(chart)
    go.Figure({"data": drawn["data"], "layout": drawn["layout"]})
    assert set_on_paper(chart, tmp_path).startswith(b"%PDF-")
    assert len({json.dumps(trace.get("line")) for trace in drawn["data"][: len(lines)]}) == len(lines)
