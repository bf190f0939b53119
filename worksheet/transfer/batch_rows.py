"""One block of the batch file, derived: the same pass that the pages use, then text again.

The cells of the input come out as they went in, byte for byte; the derived columns follow.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

from worksheet.oxygen import judgement, ledger, uncertainty
from worksheet.oxygen.align import CARRIED, align
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.derive import derive
from worksheet.oxygen.finding_case import Hit
from worksheet.oxygen.ledger_table import UNITS
from worksheet.oxygen.plausibility import findings, without_impossible
from worksheet.oxygen.quantities import CATALOGUE, DERIVED, WITH_SD
from worksheet.oxygen.readings import Bools, Derived, Flag, Floats, Ints, Site, Snapshots

from .batch_cells import Block, Header
from .batch_read import Table, table_of

STEPS = ("lung", "haemoglobin", "function", "flow")
OUTPUT = (
    *DERIVED, *(f"{name}_sd" for name in WITH_SD), *(f"ledger_{step}" for step in STEPS), "ledger_total", "ledger_unit",
    "limiting_step", "findings", "basis",
)  # fmt: skip
"""The derived columns in the order in which they follow the input's."""
TYPES = {
    name: pa.string() if name in ("ledger_unit", "limiting_step", "findings", "basis") else pa.float64()
    for name in OUTPUT
}
"""Their types in a Parquet file."""
_DIGITS = 6  # significant: a thousandth of the noise of any of these numbers
_BASIS = {
    Flag.DYSHAEMOGLOBINS_ASSUMED: "dyshaemoglobins-assumed", Flag.SATURATION_CALCULATED: "saturation-calculated",
    Flag.SATURATION_FROM_FINGER: "saturation-from-finger", Flag.CENTRAL_VENOUS: "central-venous",
    Flag.TEMPERATURE_ASSUMED: "temperature-assumed", Flag.BAROMETRIC_STANDARD: "barometric-pressure-assumed",
    Flag.VENOUS_HB_SHARED: "venous-hb-shared", Flag.VO2_MEASURED: "vo2-measured",
    Flag.DISSOLVED_NOT_COUNTED: "dissolved-not-counted", Flag.FIO2_ESTIMATED: "fio2-estimated",
}  # fmt: skip


@dataclass
class Derivation:
    """What came of a block.

    Attributes
    ----------
    read : int
        How many records the block has.
    lines : list of bytes
        Output rows, without line end.
    kept : ndarray of int64
        Which records of the block they belong to.
    stays : list of bytes
        Stays of the block, where rows belong together.
    refused : Counter
        How many impossible values of each quantity were not used.
    found : Counter
        How many rows have each finding, those without an output row included.
    """

    read: int
    lines: list[bytes]
    kept: Ints
    stays: list[bytes]
    refused: Counter[str]
    found: Counter[str]


def derive_block(header: Header, block: Block) -> Derivation:
    """Derive the rows of a block that holds whole stays."""
    table = table_of(header, block)
    readings, refused = without_impossible(table.readings)
    snapshots = align(readings, DEFAULT.carry)
    derived = derive(snapshots, DEFAULT)
    extra = {"site-not-stated": Hit(table.site_assumed, {}), "saturation-without-site": Hit(table.site_unknown, {})}
    found = findings(snapshots, derived, DEFAULT, refused=refused, extra=extra)
    kept = np.flatnonzero((readings.site != Site.NONE) | table.site_unknown)
    columns = _numbers(snapshots, derived, kept) + _ledger(snapshots, derived, kept)
    codes = found.codes()
    columns += [pa.array([codes[i] for i in kept.tolist()], type=pa.string()), _basis(snapshots, derived, table, kept)]
    tails = pc.binary_join_element_wise(*columns, ",", null_handling="replace", null_replacement="").to_pylist()
    lines = [block.records[i] + b"," + tail.encode() for i, tail in zip(kept.tolist(), tails, strict=True)]
    counts = Counter({name: int(np.count_nonzero(~np.isnan(column))) for name, column in refused.items()})
    return Derivation(
        len(block.records),
        lines,
        kept,
        table.stays,
        counts,
        Counter({code: len(rows) for code, rows in found.rows.items()}),
    )


def _numbers(snapshots: Snapshots, derived: Derived, kept: Ints) -> list[pa.Array]:
    columns = [texts(CATALOGUE[name].unit.from_canonical(derived[name][kept])) for name in DERIVED]
    sds = uncertainty.standard_uncertainties(snapshots, derived, DEFAULT)
    return columns + [texts(sds[name][kept] / CATALOGUE[name].unit.factor) for name in WITH_SD]


def _ledger(snapshots: Snapshots, derived: Derived, kept: Ints) -> list[pa.Array]:
    changes = ledger.consecutive(snapshots, derived, DEFAULT)
    steps = [texts(changes.step(step)[kept]) for step in STEPS]
    units = np.array([UNITS[level] for level in sorted(UNITS)])[changes.level[kept]]
    limiting = judgement.limiting_steps(snapshots, derived, changes)[kept]
    return [*steps, texts(changes.total[kept]), pa.array(units, type=pa.string()), pa.array(limiting, type=pa.string())]


def texts(values: Floats) -> pa.Array:
    """Numbers as text with six significant digits, empty for NaN, vectorised.

    Rounded by multiplying and dividing with exact powers of ten, so that the shortest text is the rounded number.
    """
    with np.errstate(all="ignore"):
        size = np.floor(np.log10(np.abs(values)))
        decimals = np.where(np.isfinite(size), np.clip(_DIGITS - 1 - size, -15, 15), 0.0)
        up = np.power(10.0, np.maximum(decimals, 0.0))
        down = np.power(10.0, np.maximum(-decimals, 0.0))
        rounded = np.rint(values * up / down) * down / up + 0.0
    finite = np.isfinite(rounded)
    return pc.cast(pa.array(rounded, mask=~finite), pa.string())


def _basis(snapshots: Snapshots, derived: Derived, table: Table, kept: Ints) -> pa.Array:
    """On what each row's numbers rest: assumptions, and carried values with their age in minutes."""
    parts = [_where((derived.flags[kept] & flag) != 0, word) for flag, word in _BASIS.items()]
    for name in CARRIED:
        age, source = snapshots.age[name][kept], snapshots.source[name][kept]
        parts.append(_carried(name, (source >= 0) & (source != kept) & (np.abs(age) > 0.0), age))
    present = [part for part in parts if part is not None]
    if not present:
        return pa.array([""] * len(kept), type=pa.string())
    joined = pc.binary_join_element_wise(*present, "", null_handling="replace", null_replacement="")
    return pc.utf8_slice_codeunits(joined, 1)  # each part begins with a semicolon


def _where(rows: Bools, word: str) -> pa.Array | None:
    if not np.any(rows):
        return None
    return pc.if_else(pa.array(rows), pa.scalar(f";{word}"), pa.scalar(None, type=pa.string()))


def _carried(name: str, rows: Bools, age: Floats) -> pa.Array | None:
    """``;name-carried:minutes``; a value that was read later has a negative age."""
    if name in ("height", "weight", "age") or not np.any(rows):
        return None
    minutes = pa.array(np.where(rows, np.rint(np.nan_to_num(age) * 60.0), 0.0), mask=~rows)
    return pc.binary_join_element_wise(f";{name.replace('_', '-')}-carried:", pc.cast(minutes, pa.string()), "")


def summary(counts: Mapping[str, int]) -> str:
    """Counts in words, the most frequent first."""
    return ", ".join(f"{name} {n}" for name, n in sorted(counts.items(), key=lambda item: -item[1]))
