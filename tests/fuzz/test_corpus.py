"""Replays the kept inputs of the fuzzers, and mutations of honest files, through the same targets."""

import random
import sys
from pathlib import Path

import pytest

HERE = Path(__file__).parent
sys.path.insert(0, str(HERE))
import targets  # noqa: E402

HONEST = HERE.parent / "data" / "transfer"
SEEDS = {
    "csv": [HONEST / "entries-slice.csv"],
    "fhir": [HONEST / "fhir" / "f003-pco2.json", HONEST / "fhir" / "satO2.json"],
    "hl7": sorted((HONEST / "hl7v2").glob("*.hl7")),
}


@pytest.mark.parametrize("file", sorted(HERE.glob("corpus/*/*")), ids=lambda p: f"{p.parent.name}-{p.name}")
def test_kept_inputs(file):
    targets.TARGETS[file.parent.name](file.read_bytes())


@pytest.mark.parametrize("name", sorted(SEEDS))
def test_mutations_of_honest_files(name):
    chance = random.Random(7)
    for seed in SEEDS[name]:
        honest = seed.read_bytes()[:4000]
        targets.TARGETS[name](honest)
        for _ in range(150):
            data = bytearray(honest)
            for _ in range(chance.randint(1, 6)):
                at = chance.randrange(len(data))
                data[at : at + chance.randint(0, 8)] = chance.choice(
                    [b"", b"\x00", b"|", b"^", b"\r", b'"', b",", b"9" * 30, b"{", b"\xff", data[at : at + 40]]
                )
            targets.TARGETS[name](bytes(data))
