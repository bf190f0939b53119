"""Small tables for tests of pairing, derivation and findings: one dict a row, canonical units, minutes for time."""

import numpy as np

from worksheet.oxygen.align import align
from worksheet.oxygen.constants import DEFAULT
from worksheet.oxygen.derive import derive
from worksheet.oxygen.plausibility import findings, without_impossible
from worksheet.oxygen.quantities import MEASURED
from worksheet.oxygen.readings import Readings, Site

CODES = ("stay", "minute", "site", "device", "flow_method", "event")


def readings(*rows):
    """Readings from dicts; ``minute`` is the time, ``stay`` 1 and ``site`` arterial unless said."""
    names = {name for row in rows for name in row if name in MEASURED}
    unknown = {name for row in rows for name in row if name not in MEASURED and name not in CODES}
    assert not unknown, unknown
    return Readings.build(
        [row.get("stay", 1) for row in rows],
        [400_000.0 + row.get("minute", 0) / 60 for row in rows],
        [row.get("site", Site.ARTERIAL) for row in rows],
        {name: [row.get(name, np.nan) for row in rows] for name in names},
        *([int(row.get(name, 0)) for row in rows] for name in ("device", "flow_method", "event")),
    )


def snapshots(*rows):
    return align(readings(*rows))


def derived(*rows, constants=DEFAULT):
    return derive(snapshots(*rows), constants)


def codes(*rows, row=0, **more):
    """Codes of the findings of one row, as the batch command would list them."""
    possible, refused = without_impossible(readings(*rows))
    table = align(possible)
    found = findings(table, derive(table), refused=refused, **more)
    return set(filter(None, found.codes()[row].split(";")))
