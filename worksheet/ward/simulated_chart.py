"""What would have been charted of a simulated course: noise, rounding, gaps; and the files that hold it."""

from __future__ import annotations

import csv
from collections.abc import Iterator
from dataclasses import dataclass, replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from .simulated import METHODS, Courses, Random
from .simulated_body import PER_GRAM, PER_MMHG, STEPS, Floats, po2_for

# (random, fixed for one analyser or method) SD, absolute then relative: the published figures of the catalogue
_NOISE = {
    "ph": (0.008, 0.0, 0.0, 0.0), "pco2": (1.0, 0.0, 0.02, 0.0), "po2": (2.5, 0.0, 0.03, 0.0),
    "hb": (0.0, 0.0, 0.01, 0.0173), "so2": (0.0044, 0.0067, 0.0, 0.0), "cohb": (0.0028, 0.0028, 0.0, 0.0),
    "methb": (0.0028, 0.0028, 0.0, 0.0), "spo2": (0.014, 0.014, 0.0, 0.0), "lactate": (0.15, 0.0, 0.05, 0.0),
}  # fmt: skip
_FLOW = {"thermodilution": (0.05, 0.10), "pulse_contour": (0.075, 0.13), "ultrasound": (0.075, 0.13)}
_DECIMALS = {
    "ph": 2, "pco2": 0, "po2": 0, "hb": 1, "so2": 1, "cohb": 1, "methb": 1, "spo2": 0, "lactate": 1, "fio2": 0,
    "temperature": 1, "cardiac_output": 1, "height": 0, "weight": 0, "age": 0,
}  # fmt: skip
_PERCENT = ("so2", "cohb", "methb", "spo2", "fio2")
QUANTITIES = tuple(_DECIMALS)
_TAILS = 8.0  # degrees of freedom of Student's t: real errors have heavier tails than the normal distribution


@dataclass(frozen=True)
class Chart:
    """Entries as they would be exported: one row each, edge units of the batch contract, NaN where not charted.

    ``course`` counts from 0; ``time`` is in h since the epoch; ``site`` and ``flow_method`` are words or empty.
    """

    course: NDArray[np.int64]
    time: Floats
    site: NDArray[np.str_]
    flow_method: NDArray[np.str_]
    values: dict[str, Floats]

    def __len__(self) -> int:
        return len(self.course)


def chart(made: Courses, seed: int) -> Chart:
    """Chart simulated courses; the same seed charts the same."""
    random = np.random.default_rng([seed, 1])
    n, shape = len(made), made.time.shape
    needs = {name: np.isin(made.cause, (name, "mixed"))[:, np.newaxis] for name in STEPS}
    truth = _truth(made)
    seen = {name: _measured(name, value, random) for name, value in truth.items()}
    oximeter = (random.random((n, 1)) < 0.8) | needs["function"]
    monitored = (random.random((n, 1)) < 0.75) | needs["flow"]
    venous_line = random.random((n, 1)) < 0.5
    # a slip without its co-oximetry, or a gas nobody wrote a flow beside
    slip = oximeter & (random.random(shape) > 0.04)
    tables = [
        _gases(made, seen, slip, random),
        _flows(made, monitored & (random.random(shape) < 0.85), random),
        _venous(made, venous_line & (random.random(shape) < 0.6), random),
        _counts(made, ~oximeter & (random.random(shape) < 0.5), random),
    ]
    return _sorted(tables)


def _truth(made: Courses) -> dict[str, Floats]:
    body = made.body
    need = made.vo2_index[:, np.newaxis] / body.delivery
    return {
        "ph": body.ph, "pco2": body.pco2, "po2": body.po2, "hb": body.hb, "so2": body.saturation, "cohb": body.cohb,
        "methb": body.methb, "spo2": np.clip(body.saturation, 0.0, 1.0),
        "lactate": 1.2 + 14.0 * np.maximum(need - 0.42, 0.0),
    }  # fmt: skip


def _measured(name: str, true: Floats, random: Random) -> Floats:
    """A value as an analyser gives it [unit of the truth]."""
    scatter, fixed, relative, relative_fixed = _NOISE[name]
    tail = random.standard_t(_TAILS, true.shape) / np.sqrt(_TAILS / (_TAILS - 2.0))
    own = random.standard_normal((len(true), 1))
    value = true + np.maximum(scatter, relative * true) * tail + np.maximum(fixed, relative_fixed * true) * own
    value = np.minimum(value, 1.0) if name in ("so2", "spo2") else value
    return np.asarray(np.maximum(value, 0.3 if name == "lactate" else 0.0))


def _gases(made: Courses, seen: dict[str, Floats], slip: NDArray[np.bool_], random: Random) -> Chart:
    """Arterial slips; without a co-oximeter neither haemoglobin nor saturation."""
    shape = made.time.shape
    hidden = {name: np.where(slip, seen[name], np.nan) for name in ("hb", "so2", "cohb", "methb")}
    ratio = np.exp(random.normal(np.log(250.0), 0.25, (len(made), 1)))
    values = seen | hidden | {
        "fio2": np.clip(np.round(made.body.po2 / ratio, 2), 0.21, 1.0),
        "temperature": 37.0 + 0.5 * random.standard_normal(shape),
        "spo2": np.where(random.random(shape) < 0.9, seen["spo2"], np.nan),
        "lactate": np.where(random.random(shape) < 0.8, seen["lactate"], np.nan),
    }  # fmt: skip
    first = np.zeros(shape, dtype=np.bool_)
    first[:, 0] = True
    for name, spread in (("height", 0.01), ("weight", 0.03), ("age", 0.0)):
        measured = getattr(made, name) * (1.0 + spread * random.standard_normal(len(made)))
        values[name] = np.where(first, measured[:, np.newaxis], np.nan)
    return _table(made, made.drawn, np.zeros(shape), "arterial", values)


def _flows(made: Courses, where: NDArray[np.bool_], random: Random) -> Chart:
    """Cardiac output near the gases, by one method a course."""
    method = random.choice(METHODS, size=(len(made), 1), p=(0.5, 0.35, 0.15))
    precision, accuracy = (np.vectorize(lambda m, i=i: _FLOW[m][i])(method) for i in (0, 1))
    surface = np.sqrt(made.height * made.weight / 3600.0)[:, np.newaxis]  # Mosteller 1987
    tail = random.standard_t(_TAILS, made.time.shape) / np.sqrt(_TAILS / (_TAILS - 2.0))
    error = 1.0 + precision * tail + accuracy * random.standard_normal((len(made), 1))
    later = random.uniform(-40.0, 20.0, made.time.shape) / 60.0
    values = {"cardiac_output": np.maximum(made.body.index * surface * error, 0.4)}
    table = _table(made, made.drawn & where, later, "", values)
    return replace(table, flow_method=method[table.course, 0])


def _venous(made: Courses, where: NDArray[np.bool_], random: Random) -> Chart:
    """Central-venous samples within ten minutes of the gas."""
    body = made.body
    content = body.content - made.vo2_index[:, np.newaxis] / (10.0 * body.index)
    capacity = PER_GRAM * body.hb * (1.0 - body.cohb - body.methb)
    true = np.clip((content - 35.0 * PER_MMHG) / capacity + 0.03, 0.10, 0.92)
    po2 = po2_for(replace(body, ph=body.ph - 0.03, pco2=body.pco2 + 5.0), true)
    values = {
        "ph": _measured("ph", body.ph - 0.03, random), "pco2": _measured("pco2", body.pco2 + 5.0, random),
        "po2": _measured("po2", po2, random), "so2": _measured("so2", true, random),
    }  # fmt: skip
    later = random.uniform(-10.0, 10.0, made.time.shape) / 60.0
    return _table(made, made.drawn & where, later, "central_venous", values)


def _counts(made: Courses, where: NDArray[np.bool_], random: Random) -> Chart:
    """Blood counts where the gas analyser has no co-oximeter; the first gas always has one beside it."""
    where = where.copy()
    where[:, 0] |= where.any(axis=1)
    later = -random.uniform(5.0, 40.0, made.time.shape) / 60.0
    return _table(made, made.drawn & where, later, "", {"hb": _measured("hb", made.body.hb, random)})


def _table(made: Courses, where: NDArray[np.bool_], later: Floats, site: str, values: dict[str, Floats]) -> Chart:
    """Rows of what was charted, in edge units and rounded as on a slip."""
    course, column = np.nonzero(where)
    columns = {}
    for name in QUANTITIES:
        if name in values:
            factor = 100.0 if name in _PERCENT else 1.0
            columns[name] = np.round(values[name][course, column] * factor, _DECIMALS[name])
        else:
            columns[name] = np.full(len(course), np.nan)
    words = np.full(len(course), site, dtype="<U16")
    return Chart(course, (made.time + later)[course, column], words, np.full(len(course), "", dtype="<U16"), columns)


def _sorted(tables: list[Chart]) -> Chart:
    course, time, site, method = (
        np.concatenate([getattr(t, name) for t in tables]) for name in ("course", "time", "site", "flow_method")
    )
    values = {name: np.concatenate([t.values[name] for t in tables]) for name in QUANTITIES}
    order = np.lexsort((time, course))
    return Chart(course[order], time[order], site[order], method[order], {k: v[order] for k, v in values.items()})


def stay_name(course: int) -> str:
    """Name of a simulated stay: it says that it is one."""
    return f"SIM-{course + 1:05d}"


def write(made: Courses, charted: Chart, folder: Path) -> tuple[Path, Path]:
    """Write ``entries.csv`` (columns of the batch contract) and ``truth.csv`` (one row a course); both or neither."""
    folder.mkdir(parents=True, exist_ok=True)
    written = []
    for name, rows in (("entries.csv", _entry_rows(charted)), ("truth.csv", _truth_rows(made))):
        part = folder / f"{name}.part"
        with part.open("w", newline="", encoding="utf-8") as out:
            csv.writer(out).writerows(rows)
        written.append((part, folder / name))
    for part, final in written:
        part.replace(final)
    return written[0][1], written[1][1]


def _stamp(hours: float) -> str:
    return (datetime(1970, 1, 1, tzinfo=UTC) + timedelta(seconds=round(hours * 3600.0))).isoformat()


def _entry_rows(charted: Chart) -> Iterator[list[str]]:
    yield ["stay", "time", "site", *QUANTITIES, "flow_method"]
    columns = [charted.values[name] for name in QUANTITIES]
    formats = [f"{{:.{_DECIMALS[name]}f}}" for name in QUANTITIES]
    for i in range(len(charted)):
        cells = [f.format(c[i]) if c[i] == c[i] else "" for f, c in zip(formats, columns, strict=True)]
        name = stay_name(int(charted.course[i]))
        yield [name, _stamp(float(charted.time[i])), str(charted.site[i]), *cells, str(charted.flow_method[i])]


def _truth_rows(made: Courses) -> Iterator[list[str]]:
    yield ["stay", "cause", "detail", "larger_step", "first_gas", "last_gas", "do2i_first", "do2i_last",
           "fall_percent", *(f"{name}_percent" for name in STEPS)]  # fmt: skip
    delivery, fall, larger = made.body.delivery, made.fall, made.larger
    for i in range(len(made)):
        last = int(made.last[i])
        yield [
            stay_name(i), str(made.cause[i]), str(made.detail[i]), str(larger[i]), _stamp(float(made.time[i, 0])),
            _stamp(float(made.time[i, last])), f"{delivery[i, 0]:.2f}", f"{delivery[i, last]:.2f}",
            f"{100.0 * fall[i]:.2f}", *(f"{100.0 * made.parts[name][i]:.2f}" for name in STEPS),
        ]  # fmt: skip
