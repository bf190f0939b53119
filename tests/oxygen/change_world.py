"""Little worlds for the tests of change: tables of readings made of plain numbers, and a mass of random ones."""

import csv
import json
from pathlib import Path

import numpy as np

from worksheet.oxygen import align, derive
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.curve import saturation
from worksheet.oxygen.readings import FlowMethod, Readings, Site
from worksheet.oxygen.shapley import Factors

USUAL = {
    "ph": 7.40, "pco2": 40.0, "po2": 90.0, "hb": 10.0, "so2": 0.965, "cohb": 0.01, "methb": 0.01, "fio2": 0.40,
    "cardiac_output": 6.0, "height": 172.0, "weight": 75.0, "lactate": 1.5,
}  # fmt: skip


def table(*rows: dict, method: int = FlowMethod.THERMODILUTION):
    """Readings of one or more stays from dicts: USUAL with what is given; None takes a value away."""
    filled = []
    for n, row in enumerate(rows):
        bare = row.get("site", Site.ARTERIAL) != Site.ARTERIAL
        filled.append({"stay": 1, "time": 4.0 * n, "site": Site.ARTERIAL, **({} if bare else USUAL), **row})
    names = {name for row in filled for name in row} - {"stay", "time", "site", "event", "method"}
    values = {name: [np.nan if row.get(name) is None else row[name] for row in filled] for name in names}
    return Readings.build(
        [row["stay"] for row in filled], [row["time"] for row in filled], [row["site"] for row in filled], values,
        flow_method=[row.get("method", method) for row in filled], event=[row.get("event", 0) for row in filled],
    )  # fmt: skip


def derived(readings, constants=DEFAULT):
    snapshots = align.align(readings, constants.carry)
    return snapshots, derive.derive(snapshots, constants)


def crowd(stays=40, gases=6, seed=0, venous=True, flow=True):
    """Random readings of many stays: plausible values, measured saturation near the curve's."""
    random = np.random.default_rng(seed)
    n = stays * gases
    stay = np.repeat(np.arange(stays), gases)
    time = np.tile(np.arange(gases) * 3.0, stays) + random.uniform(0, 1, n)
    person = {"height": random.uniform(155, 190, stays), "weight": random.uniform(55, 100, stays)}
    values = {
        "ph": random.normal(7.36, 0.07, n), "pco2": random.normal(41, 6, n), "po2": random.uniform(50, 180, n),
        "hb": random.uniform(6.5, 13, n), "cohb": random.uniform(0, 0.02, n), "methb": random.uniform(0, 0.015, n),
        "fio2": random.uniform(0.3, 0.9, n), "lactate": random.uniform(0.8, 6, n),
        **{name: np.repeat(column, gases) for name, column in person.items()},
    }  # fmt: skip
    curve = saturation(values["po2"], values["ph"], values["pco2"], 37.0, 0.0, 0.0, DEFAULT)
    values["so2"] = np.clip(curve + random.normal(0, 0.008, n), 0.3, 1.0)
    if flow:
        values["cardiac_output"] = random.uniform(3.5, 8, n)
    site, method = np.full(n, Site.ARTERIAL), np.repeat(random.integers(1, 4, stays), gases)
    if venous:
        nothing = np.full(n, np.nan)
        beside = dict.fromkeys(values, nothing) | {
            "ph": values["ph"] - 0.04, "pco2": values["pco2"] + 5, "po2": random.uniform(32, 42, n),
            "so2": random.uniform(0.55, 0.75, n), "height": values["height"], "weight": values["weight"],
        }  # fmt: skip
        values = {name: np.concatenate([values[name], beside[name]]) for name in values}
        stay, time, method = np.tile(stay, 2), np.concatenate([time, time + 0.05]), np.tile(method, 2)
        site = np.concatenate([site, np.full(n, Site.MIXED_VENOUS)])
    return Readings.build(stay, time, site, values, flow_method=method)


def random_factors(random, n, cohb=True):
    """Random factors of supply, hypoxia and anaemia included; no relation between PO2 and saturation is needed."""
    return Factors.of(
        random.uniform(1, 6, n), random.uniform(3, 16, n), random.uniform(0.5, 1, n), random.uniform(0.4, 1, n),
        random.uniform(25, 400, n), random.uniform(6.9, 7.7, n), random.uniform(20, 90, n),
        random.uniform(0, 0.3, n) if cohb else 0.0, random.uniform(0, 0.3, n),
    )  # fmt: skip


def checks(prefix):
    """Rows of the check values whose quantity begins so: (quantity, inputs, value as printed)."""
    path = Path(__file__).parents[1] / "data" / "change_checks.csv"
    with path.open(newline="", encoding="utf-8") as file:
        rows = list(csv.DictReader(line for line in file if not line.startswith("#")))
    return [(r["quantity"], json.loads(r["inputs"]), r["value"]) for r in rows if r["quantity"].startswith(prefix)]


def printed_rounding(text):
    """Half a unit of the last printed digit; the values were printed with six significant digits."""
    digits = len(text.partition(".")[2]) if "." in text else 0
    return 0.5 * 10.0**-digits * (1 + 1e-9)
