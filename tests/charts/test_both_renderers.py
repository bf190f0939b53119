"""One description, two renderers: both hold the same numbers, axis titles, units and order."""

import json
import math
import re
from dataclasses import replace

import numpy as np
import plotly.graph_objects as go
import plotly.offline
import pytest
from django.conf import settings

from tests.charts import build
from worksheet.charts import plotly as page_renderer
from worksheet.charts import table
from worksheet.charts.printed import printed
from worksheet.charts.steps import DARK, LIGHT, recolouring
from worksheet.oxygen.readings import Event, Site

CASES = {
    "full": build.readings(),
    "hb carried": build.readings(hb_every=3),
    "no flow": build.readings(flow=False),
    "no venous": build.readings(venous=False),
    "one gas": build.readings(1),
    "empty": build.readings(0),
    "many": build.readings(90, every=0.7),
}


@pytest.fixture(scope="module", params=CASES)
def charts(request):
    return build.all_charts(build.sheet_of(CASES[request.param]))


def close(a, b):
    if a is None or b is None:
        return a is b
    return math.isclose(a, b, rel_tol=1e-9, abs_tol=1e-6)


def traces_of(chart):
    """Plotly traces by (name, axis), contours and lower edges of bands left out."""
    found = page_renderer.figure(chart)
    names = {s.name for s in chart.series}
    data = [trace | {"name": trace["name"].replace("<br>", " ")} for trace in found["data"]]
    return [trace for trace in data if trace["name"] in names], found["layout"]


def test_plotly_accepts_every_figure(charts):
    for chart in charts:
        for theme in ("light", "dark"):
            figure = page_renderer.figure(chart, theme)
            go.Figure({"data": figure["data"], "layout": figure["layout"]})


def test_both_hold_the_same_series_in_the_same_order(charts):
    for chart in charts:
        traces, _ = traces_of(chart)
        paper = printed(chart)["series"]
        assert [t["name"] for t in traces] == [s["name"] for s in paper] == [s.name for s in chart.series]
        for trace, series, own in zip(traces, paper, chart.series, strict=True):
            for got, wanted in ((trace["x"], series["x"]), (trace["y"], series["y"])):
                assert len(got) == len(wanted)
                assert all(close(a, b) for a, b in zip(got, wanted, strict=True))
            finite = [None if math.isnan(v) else v for v in own.y]
            assert all(close(a, b) for a, b in zip(trace["y"], finite, strict=True))


def test_both_hold_the_same_axes(charts):
    for chart in charts:
        _, layout = traces_of(chart)
        paper = printed(chart)
        assert layout["xaxis"]["title"]["text"] == paper["x"]["title"] == chart.x.title
        for n, axis in enumerate(paper["y"]):
            drawn = layout[f"yaxis{n + 1 if n else ''}"]
            assert drawn["title"]["text"].replace("<br>", " ") == axis["title"]
            assert drawn["range"] == [axis["low"], axis["high"]]
            assert drawn["ticktext"] == [text for _, text in axis["ticks"]]
            assert drawn["domain"] == pytest.approx(axis["domain"], abs=1e-6)


def test_both_hold_the_same_bands_contours_and_events(charts):
    for chart in charts:
        _, layout = traces_of(chart)
        paper = printed(chart)
        said = [a["text"] for a in layout["annotations"]]
        for label in [c["label"] for c in paper["contours"]] + [e["label"] for e in paper["events"]]:
            assert label in said
        rectangles = [s for s in layout["shapes"] if s["type"] == "rect"]
        assert [(s["y0"], s["y1"]) for s in rectangles] == [(b["low"], b["high"]) for b in paper["bands"]]
        lines = [s["x0"] for s in layout["shapes"] if s["type"] == "line"]
        assert lines == [e["x"] for e in paper["events"]]


def test_every_point_lies_inside_its_panel(charts):
    for chart in charts:
        for s in chart.series:
            axis = chart.axis(s.axis)
            low = s.low or (0.0,) * len(s.y)
            edges = [a + b for a, b in zip(low, s.y, strict=True)] if s.kind == "bar" else [*s.y, *s.low]
            for v in edges:
                assert math.isnan(v) or axis.low - 1e-9 <= v <= axis.high + 1e-9, (chart.key, s.name, v)
            assert all(chart.x.low <= x <= chart.x.high for x in s.x), (chart.key, s.name)


def test_json_is_valid_and_closed_to_script(charts):
    for chart in charts:
        text = page_renderer.page_json(chart)
        assert "<" not in text
        assert json.loads(text)["layout"]["height"] == chart.height


def test_recolouring_the_light_figure_gives_the_dark_one(charts):
    def walk(part):
        if isinstance(part, str):
            return recolouring().get(part, part)
        if isinstance(part, list):
            return [walk(item) for item in part]
        return {k: walk(v) for k, v in part.items()} if isinstance(part, dict) else part

    for chart in charts:
        assert walk(page_renderer.figure(chart)) == page_renderer.figure(chart, "dark")


def test_numbers_of_the_table_are_those_of_the_figure(charts):
    for chart in charts:
        shown = table(chart)
        cells = " ".join(cell for row in shown.rows for cell in row)
        for s in chart.series:
            if s.tabled and s.kind != "band":
                decimals = chart.axis(s.axis).decimals
                for v in s.y:
                    if math.isfinite(v):
                        assert f"{v:.{decimals}f}".replace("-", "−" if round(v, decimals) else "") in cells


def test_words_are_there(charts):
    for chart in charts:
        assert all((chart.alt, chart.summary, chart.title))
        assert not re.search(r"\bnan\b|\bNone\b", chart.alt + chart.summary)


def test_decimal_comma_reaches_every_text():
    display = replace(build.DISPLAY, decimal_comma=True)
    for chart in build.all_charts(build.sheet_of(CASES["full"]), display):
        assert page_renderer.figure(chart)["layout"]["separators"] == ",."
        texts = [text for axis in chart.y for _, text in axis.ticks] + [c for row in table(chart).rows for c in row]
        assert not [text for text in texts if re.search(r"\d\.\d", text)]


def test_kilopascal_changes_titles_and_numbers_alike():
    display = replace(build.DISPLAY, units={"po2": "kPa"})
    plain, kpa = (build.strip(build.sheet_of(CASES["full"]), d) for d in (build.DISPLAY, display))
    assert "PaO2, P/F (kPa)" in [axis.title for axis in kpa.y]
    one, other = (next(s for s in c.series if s.name == "PaO2") for c in (plain, kpa))
    assert np.allclose(np.array(one.y) / 7.500617, other.y)  # NIST SP 811 (2008), table B.8


def test_vendored_bundle_is_the_version_that_validates():
    bundle = (settings.BASE_DIR / "static/vendor/plotly-basic.min.js").read_text(encoding="utf-8")
    assert f"v{plotly.offline.get_plotlyjs_version()}" in bundle[:200]


def test_stylesheet_holds_the_rules_of_the_bundle():
    """The bundle would insert them by script, which the content policy forbids."""
    bundle = (settings.BASE_DIR / "static/vendor/plotly-basic.min.js").read_text(encoding="utf-8")
    rules = re.search(r'\{"X,X div":.*?\}', bundle).group()
    sheet = (settings.BASE_DIR / "static/vendor/plotly.css").read_text(encoding="utf-8")
    found = re.findall(r'"?([^"{},][^"]*?|X[^"]*)"?:"([^"]*)"', rules[1:-1])
    assert len(found) > 40
    for selector, body in found:
        name = selector.strip('"').replace("X", ".js-plotly-plot .plotly").replace("Y", ".plotly-notifier")
        assert body.replace("'", '"') in sheet.replace("'", '"'), name


def test_colours_keep_contrast_with_their_background():
    """WCAG 2.2, 1.4.11: three to one for what carries meaning."""

    def luminance(colour):
        parts = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
        linear = [p / 12.92 if p <= 0.04045 else ((p + 0.055) / 1.055) ** 2.4 for p in parts]
        return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]

    for theme in (LIGHT, DARK):
        for role in ("lung", "haemoglobin", "function", "flow", "use", "residual", "ink", "soft", "contour"):
            pair = sorted((luminance(theme[role]), luminance(theme["paper"])), reverse=True)
            assert (pair[0] + 0.05) / (pair[1] + 0.05) >= 3, role


def test_the_time_axis_lies_under_the_last_panel_even_where_that_is_empty():
    """Plotly knows no axis without a line on it: anchored there, the times went under the first panel."""
    got = build.table([(build.START + 2 * n, Site.ARTERIAL, {"ph": 7.4, "pco2": 40.0, "po2": 90.0, "hb": 10.0},
                        Event.NONE) for n in range(3)])  # fmt: skip
    without, full = (build.strip(build.sheet_of(r)) for r in (got, build.readings()))
    bare, axis = (page_renderer.figure(chart)["layout"]["xaxis"] for chart in (without, full))
    assert bare["anchor"] == "free"
    assert bare["position"] == pytest.approx(without.y[-1].domain[0])
    assert axis["anchor"] == f"y{len(full.y)}"
