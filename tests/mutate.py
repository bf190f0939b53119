"""Mutation testing of modules of ``worksheet/oxygen``: ``python -m tests.mutate delivery content``.

mutmut leaves decorated functions alone, and the equations carry ``@quiet``. So it works on a copy of the equations and
their tests in which that decorator is taken off and numpy is kept silent for the whole run; nothing else differs.
Prints how many mutants were killed and the change that each survivor makes.
"""

import re
import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
LEDGER = {"ledger", "comparison", "ledger_noise", "ledger_table", "shapley", "factors", "footing"}
LEDGER_TESTS = ("test_ledger*.py",)
EQUATION_TESTS = (
    "test_acidbase.py", "test_constants.py", "test_content.py", "test_cross_checks.py", "test_curve.py",
    "test_delivery.py", "test_exchange.py", "test_oximetry.py", "test_properties_equations.py",
)  # fmt: skip
CONFIG = """
[tool.pytest.ini_options]
testpaths = ["tests"]
pythonpath = ["."]
addopts = "-W error --import-mode=importlib -p no:cacheprovider -p no:django -x -q"

[tool.mutmut]
source_paths = ["worksheet/oxygen/{module}.py"]
also_copy = ["worksheet", "tests"]
pytest_add_cli_args_test_selection = ["tests"]
"""
SILENT = 'import numpy as np\n\nnp.seterr(all="ignore")\n'


def prepare(module: str, to: Path) -> None:
    """The copy that mutmut works on."""
    ignore = shutil.ignore_patterns("__pycache__")
    shutil.copytree(ROOT / "worksheet/oxygen", to / "worksheet/oxygen", ignore=ignore)
    shutil.copytree(ROOT / "tests/data", to / "tests/data", ignore=ignore)
    (to / "tests/oxygen").mkdir()
    for package in (to / "worksheet", to / "tests", to / "tests/oxygen"):
        (package / "__init__.py").touch()
    wanted = LEDGER_TESTS if module in LEDGER else EQUATION_TESTS
    helpers = [path.name for path in (ROOT / "tests/oxygen").glob("*.py") if not path.name.startswith("test_")]
    for pattern in (*wanted, *helpers):
        for path in (ROOT / "tests/oxygen").glob(pattern):
            shutil.copy(path, to / "tests/oxygen")
    if module not in LEDGER:
        shutil.copytree(ROOT / "tests/published", to / "tests/published", ignore=ignore)
    for path in (to / "worksheet/oxygen").glob("*.py"):
        text = re.sub(r"^@quiet\n", "", path.read_text(encoding="utf-8"), flags=re.M)
        path.write_text(re.sub(r", quiet$", "", text, flags=re.M), encoding="utf-8")
    (to / "tests/conftest.py").write_text(SILENT, encoding="utf-8")
    (to / "pyproject.toml").write_text(CONFIG.format(module=module), encoding="utf-8")


def mutmut(at: Path, *arguments: str) -> str:
    done = subprocess.run(["mutmut", *arguments], cwd=at, capture_output=True, text=True, timeout=3600, check=False)
    return done.stdout


def run(module: str) -> float:
    """Share of the module's mutants that its tests kill."""
    with tempfile.TemporaryDirectory() as folder:
        prepare(module, Path(folder))
        progress = re.findall(r"(\d+)/(\d+)  \S+ (\d+)", mutmut(Path(folder), "run", "--max-children", "1"))
        if not progress:
            raise SystemExit(f"{module}: mutmut did not run; do the tests pass?")
        _, total, killed = (int(number) for number in progress[-1])
        print(f"{module}: {killed} of {total} killed")
        for name in re.findall(r"(\S+): survived", mutmut(Path(folder), "results")):
            changed = [
                line for line in mutmut(Path(folder), "show", name).splitlines() if re.match(r"[-+](?![-+])", line)
            ]
            print("", name, *changed, sep="\n")
    return killed / total


if __name__ == "__main__":
    if not sys.argv[1:]:
        raise SystemExit(__doc__)
    sys.exit(any(run(module) < 0.9 for module in sys.argv[1:]))
