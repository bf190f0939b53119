"""The timeline of 100 entries against the bare floor: the same panels by matplotlib, set by Typst with one table."""

import io
import json
from datetime import timedelta

import matplotlib as mpl
import pytest
import typst

from tests.bench.conftest import median_seconds
from tests.report import world
from worksheet import charts
from worksheet.charts import Chart
from worksheet.charts.plotly import figure, page_json
from worksheet.oxygen.readings import Site
from worksheet.report.order import Order
from worksheet.report.timeline import timeline_pdf
from worksheet.report.typeset import FONTS, STANDARDS
from worksheet.report.unit import unit_pdf, window_since
from worksheet.ward import record
from worksheet.ward.display import Display

pytestmark = [pytest.mark.django_db, pytest.mark.slow]

FLOOR = """#set document(title: "floor")
#set text(font: "Source Sans 3", lang: "en", size: 8pt)
#let d = json(bytes(sys.inputs.payload))
= Floor
#for n in range(5) { figure(image("c" + str(n) + ".svg", width: 16cm, alt: "a chart"), outlined: false) }
#table(columns: 12, table.header(..range(12).map(n => [h#n])), ..d.rows.join())
"""


def hundred_entries() -> Order:
    """Eighty gases and twenty venous samples."""
    stay = world.make_stay("B-100")
    world.add_gases(stay, 80)
    for n in range(20):
        values = {"ph": 7.35, "pco2": 46.0, "po2": 35.0, "so2": 0.66}
        when = world.START + timedelta(hours=8 * n, minutes=4)
        record.record(stay, world.nurse(), record.NewEntry(when, Site.CENTRAL_VENOUS, values))
    return world.order(stay)


def described(order: Order) -> list[Chart]:
    """The five charts as descriptions."""
    sheet, rows, display = order.sheet, order.rows, order.display
    return [
        charts.time_strip(sheet, order.stay, rows, display),
        charts.change_ledger(charts.changes_of(sheet, rows), display),
        charts.content_map(sheet, order.stay, rows, display),
        charts.delivery_map(sheet, order.stay, rows, display),
        charts.curve_chart(sheet, order.stay, rows, display),
    ]


def drawn_by_matplotlib(chart: Chart) -> bytes:
    """The same panels with the same points, nothing more."""
    from matplotlib.figure import Figure

    figure = Figure(figsize=(7, chart.height / 96))
    for axis, place in zip(chart.y, figure.subplots(len(chart.y), 1, squeeze=False)[:, 0], strict=True):
        for s in chart.series_of(axis.key):
            if s.kind == "bar":
                place.bar(s.x, s.y, bottom=s.low, width=0.7, label=s.name)
            elif s.kind == "band":
                place.fill_between(s.x, s.low, s.y, label=s.name)
            else:
                place.plot(s.x, s.y, marker="o", label=s.name)
        place.set_ylabel(axis.title)
        place.set_ylim(axis.low, axis.high)
        place.legend()
    out = io.BytesIO()
    figure.savefig(out, format="svg")
    return out.getvalue()


def test_timeline_against_the_bare_floor(ratio_row, tmp_path):
    order = hundred_entries()
    five = described(order)
    template = tmp_path / "floor.typ"
    template.write_text(FLOOR)
    rows = json.dumps({"rows": [[f"{n}.{m}" for m in range(12)] for n in range(100)]})
    fonts = typst.Fonts(include_system_fonts=False, include_embedded_fonts=False, font_paths=[str(FONTS)])

    def floor():
        with mpl.rc_context({"svg.fonttype": "path"}):
            for n, chart in enumerate(five):
                (tmp_path / f"c{n}.svg").write_bytes(drawn_by_matplotlib(chart))
        typst.compile(str(template), font_paths=fonts, sys_inputs={"payload": rows}, pdf_standards=STANDARDS)

    def whole():
        timeline_pdf(Order(order.stay, order.display, order.printed_at, "bench"))

    seconds, reference = median_seconds(whole, repeats=3), median_seconds(floor, repeats=3)
    ratio = ratio_row(
        "timeline PDF, 100 entries, whole", seconds, "matplotlib and Typst, same panels", reference, "≤ 1.5"
    )
    assert ratio <= 1.5


def test_one_page_of_a_unit(ratio_row):
    order = hundred_entries()
    unit, now = order.stay.unit, world.START + timedelta(hours=160)
    window = window_since(unit, now - timedelta(hours=24), now)
    one = median_seconds(lambda: unit_pdf(unit, window, Display.of(None, unit), "bench"), repeats=3)
    whole = median_seconds(lambda: timeline_pdf(Order(order.stay, order.display, order.printed_at, "bench")), repeats=3)
    assert ratio_row("unit review PDF, one bed", one, "timeline PDF, 100 entries", whole, "≤ 1.5") <= 1.5


def test_plain_dicts_against_the_plotly_package(ratio_row):
    """Why figures are plain dicts: the package validates every figure anew on each request."""
    import plotly.graph_objects as go

    five = described(hundred_entries())

    def plain():
        for chart in five:
            page_json(chart)

    def package():
        for chart in five:
            drawn = figure(chart)
            go.Figure({"data": drawn["data"], "layout": drawn["layout"]}).to_json()

    ratio = ratio_row("five figures as plain dicts to JSON", median_seconds(plain), "by Plotly's Python package",
                      median_seconds(package), "≤ 0.5")  # fmt: skip
    assert ratio <= 0.5
