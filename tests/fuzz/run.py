"""Coverage-guided fuzzing by hand: ``python tests/fuzz/run.py csv -max_total_time=600 FOLDER`` (needs atheris).

The folder gathers what the fuzzer finds; inputs worth keeping go to ``corpus/`` and are replayed by the test suite.
"""

import os
import sys
from pathlib import Path

import atheris

sys.path[:0] = [str(Path(__file__).parents[2]), str(Path(__file__).parent)]
os.environ.setdefault("DJANGO_SETTINGS_MODULE", "worksheet.settings")

import django  # noqa: E402

django.setup()

with atheris.instrument_imports(include=["worksheet.transfer", "hl7", "csv"]):
    import targets


if __name__ == "__main__":
    name = sys.argv.pop(1)
    atheris.Setup(sys.argv, targets.TARGETS[name])
    atheris.Fuzz()
