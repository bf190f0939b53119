"""Laws of the readers, for inputs nobody thought of: no crash, no guess, and what was written comes back."""

import csv
import io
import json
import math
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from worksheet.oxygen.quantities import CATALOGUE, MEASURED
from worksheet.transfer import fhir_in, hl7_in, limits, tabular, times
from worksheet.transfer.cells import number, to_cell
from worksheet.transfer.csv_text import safe, unsafe
from worksheet.transfer.group import drafts_of
from worksheet.transfer.hl7_message import acknowledge, header, unescape
from worksheet.transfer.names import column_named, contradicts, fold, site_named
from worksheet.transfer.rows import Refused

settings.register_profile("busy", deadline=None)  # other work on the machine is no fault of the readers
settings.load_profile("busy")

NOW = datetime(2026, 3, 1, tzinfo=UTC)
RULES = times.TimeRules(ZoneInfo("Europe/Zurich"), now=NOW)
measured = st.sampled_from(MEASURED).map(CATALOGUE.__getitem__)
moments = st.datetimes(datetime(1995, 1, 1), datetime(2026, 2, 1)).map(lambda t: t.replace(microsecond=0))


def said(refusal):
    """A refusal is a sentence."""
    assert len(str(refusal)) > 10
    assert str(refusal).rstrip().endswith((".", "?"))


def accounted(parsed, *, observations):
    for row in parsed.rows:
        assert row.fate is not None or (row.patient and row.time and (row.cells or row.note or row.event))
    drafts_of(parsed.rows, observations=observations)


@given(st.floats(-1e5, 1e5).map(lambda v: round(v, 4)), st.booleans())
def test_numbers_are_read_as_written_with_either_decimal_sign(value, comma):
    text = f"{value:.4f}".replace(".", "," if comma else ".")
    read, comparator, rest = number(text, comma)
    assert read is not None
    assert math.isclose(read, value, abs_tol=1e-9)
    assert (comparator, rest) == ("", "")


@given(st.text(max_size=60))
def test_any_text_is_a_number_or_none(text):
    value, comparator, _ = number(text)
    assert value is None or math.isfinite(value)
    assert comparator in ("", "<", ">", "<=", ">=", "~")


@given(measured, st.data())
def test_a_likely_value_in_any_unit_is_kept_and_an_impossible_one_never(quantity, data):
    unit = data.draw(st.sampled_from(quantity.units))
    low, high = quantity.unlikely
    canonical = data.draw(st.floats(low, high))
    written = f"{float(unit.from_canonical(canonical)):.9g}"
    cell = to_cell(quantity, written, unit)
    assert cell is not None
    if not cell.problem:
        near = math.isclose(cell.value, canonical, rel_tol=1e-6, abs_tol=1e-6)
        assert near or quantity.name == "fio2"
    beyond = data.draw(st.sampled_from([v for v in quantity.impossible if math.isfinite(v)]))
    outside = beyond + (1 if beyond == quantity.impossible[1] else -1) * (1 + abs(beyond))
    refused = to_cell(quantity, f"{float(unit.from_canonical(outside)):.9g}", unit)
    assert refused is not None
    assert refused.value is None
    assert "impossible" in refused.problem


@given(moments, st.sampled_from(["Europe/Zurich", "America/New_York", "Asia/Kolkata", "UTC"]))
def test_local_times_come_back_or_say_why(moment, zone):
    rules = times.TimeRules(ZoneInfo(zone), "dmy", now=NOW)
    for text in (moment.isoformat(), f"{moment:%d.%m.%Y %H:%M:%S}", f"{moment:%Y-%m-%d %H:%M:%S}"):
        utc, problem = times.parse(text, rules)
        if utc is None:
            assert "comes twice" in problem or "does not exist" in problem
            again = times.parse(text, times.TimeRules(ZoneInfo(zone), "dmy", "later", NOW))
            assert again[0] is not None or "does not exist" in again[1]
        else:
            assert utc.astimezone(ZoneInfo(zone)).replace(tzinfo=None) == moment


@given(moments, st.integers(-14 * 60, 14 * 60))
def test_hl7_times_with_offset(moment, minutes):
    sign = "-" if minutes < 0 else "+"
    text = f"{moment:%Y%m%d%H%M%S}{sign}{abs(minutes) // 60:02d}{abs(minutes) % 60:02d}"
    utc, problem = times.parse_hl7(text, RULES)
    assert problem == ""
    assert utc == moment.replace(tzinfo=UTC) - timedelta(minutes=minutes)


@given(st.text(max_size=40))
def test_any_text_is_a_time_or_a_reason(text):
    for read in (times.parse, times.parse_hl7):
        moment, problem = read(text, RULES)
        assert (moment is None) == bool(problem)


@given(st.text(max_size=80))
def test_names_never_fail(text):
    assert fold(fold(text)) == fold(text)
    column_named(text)
    site_named(text)
    contradicts("po2", text)
    assert unsafe(safe(text)) == " ".join(text.split())


@given(st.binary(max_size=2000))
@settings(max_examples=150, deadline=None)
def test_any_bytes_are_read_or_refused(data):
    for read, observations in (
        (lambda d: tabular.parse_csv(d, tabular.TableOptions(RULES)), False),
        (lambda d: tabular.parse_xlsx(d, tabular.TableOptions(RULES)), False),
        (lambda d: fhir_in.parse(d, RULES, {}), True),
        (lambda d: hl7_in.parse(d, RULES, {}), True),
    ):
        try:
            accounted(read(data), observations=observations)
        except Refused as refusal:
            said(refusal)
    try:
        assert limits.format_of("x", data) in ("csv", "xlsx", "fhir", "hl7v2")
    except Refused as refusal:
        said(refusal)
    assert acknowledge(header(data), "AE", "reason").startswith(b"MSH|")


cells = st.one_of(
    st.text(max_size=12), st.sampled_from(["", "7.3", "90", ">500", "arterial", "2026-02-11T05:40:00Z", "A"])
)


@given(st.lists(st.lists(cells, min_size=5, max_size=5), max_size=12), st.sampled_from([",", ";", "\t"]))
@settings(max_examples=150, deadline=None)
def test_every_line_of_a_well_formed_table_is_accounted_for(rows, delimiter):
    rows = [[c.replace("\x00", "").replace("\r", " ").replace("\n", " ") for c in row] for row in rows]
    out = io.StringIO()
    writer = csv.writer(out, delimiter=delimiter, lineterminator="\n")
    writer.writerow(["stay", "time", "site", "ph", "po2"])
    writer.writerows(rows)
    data = out.getvalue().encode("utf-8", "replace")
    parsed = tabular.parse_csv(data, tabular.TableOptions(RULES, confirmed=True))
    accounted(parsed, observations=False)
    filled = [row for row in rows if any(c.strip() for c in row)]
    assert len(parsed.rows) == len(filled)


leaf = st.one_of(
    st.none(),
    st.booleans(),
    st.integers(-(10**6), 10**6),
    st.floats(allow_nan=False),
    st.text(max_size=8),
    st.sampled_from(["http://loinc.org", "2703-7", "2708-6", "final", "kPa", "mm[Hg]", "Patient/1"]),
)
KEYS = [
    "resourceType",
    "status",
    "code",
    "coding",
    "system",
    "subject",
    "reference",
    "identifier",
    "value",
    "valueQuantity",
    "unit",
    "component",
    "specimen",
    "effectiveDateTime",
    "effectivePeriod",
    "start",
    "end",
    "category",
    "method",
]
trees = st.recursive(
    leaf,
    lambda inner: st.one_of(st.lists(inner, max_size=3), st.dictionaries(st.sampled_from(KEYS), inner, max_size=5)),
    max_leaves=15,
)


@given(st.dictionaries(st.sampled_from(KEYS), trees, max_size=8))
@settings(max_examples=200, deadline=None)
def test_any_json_is_read_or_refused(tree):
    item = {**tree, "resourceType": "Observation"}
    try:
        accounted(fhir_in.parse(json.dumps(item).encode(), RULES, {}), observations=True)
    except Refused as refusal:
        said(refusal)


field = st.one_of(
    st.text("^~&\\|ABC019. >", max_size=12),
    st.sampled_from(["NM", "2703-7^pO2^LN", "12.4", "kPa", "F", "20260211054000"]),
)


@given(
    st.lists(
        st.tuples(st.sampled_from(["PID", "OBR", "OBX", "SPM", "NTE", "ZZZ"]), st.lists(field, max_size=16)), max_size=8
    )
)
@settings(max_examples=200, deadline=None)
def test_any_segments_are_read_or_refused(segments):
    lines = ["MSH|^~\\&|A|B|C|D|20260211||ORU^R01|1|P|2.5", *("|".join([name, *fields]) for name, fields in segments)]
    parsed = hl7_in.parse("\r".join(lines).encode(), RULES, {})
    accounted(parsed, observations=True)
    assert parsed.rows


@given(st.text("FSTRE\\Xab09.", max_size=40))
def test_unescaping_never_fails(text):
    unescape(text)


@pytest.mark.parametrize("name", MEASURED)
def test_every_quantity_is_recognised_by_its_own_name_and_symbol(name):
    quantity = CATALOGUE[name]
    assert column_named(name)[0] == name
    if name not in ("so2", "so2_calculated", "vo2_measured"):
        assert not contradicts(name, quantity.label)
