"""The benchmarks are scripts that do nothing until they are run, and the house is free of them."""

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parent.parent
SCRIPTS = sorted((ROOT / "benchmarks").glob("*.py"))
IMPORT = """
import runpy, sys
sys.path[:0] = [{folder!r}]
for script in sys.argv[1:]:
    runpy.run_path(script, run_name="imported")
"""


def test_every_benchmark_imports_without_running():
    """All scripts import, print nothing and so measure nothing."""
    assert SCRIPTS
    done = subprocess.run(
        [sys.executable, "-c", IMPORT.format(folder=str(ROOT / "benchmarks")), *map(str, SCRIPTS)],
        capture_output=True,
        text=True,
        check=False,
    )
    assert (done.returncode, done.stdout) == (0, ""), done.stderr


@pytest.mark.parametrize("script", SCRIPTS, ids=lambda script: script.stem)
def test_every_benchmark_says_what_it_measures(script):
    """A script begins with its idea: results.py prints it above the figures."""
    assert script.read_text(encoding="utf-8").startswith('"""')


def test_results_name_only_scripts_that_exist():
    """Every benchmark that `make bench` collects is there."""
    source = (ROOT / "benchmarks" / "results.py").read_text(encoding="utf-8")
    line = next(line for line in source.splitlines() if line.startswith("BENCHES = "))
    names = [name.strip(' "()') for name in line.partition("=")[2].split(",")]
    assert len(names) >= 6
    assert all((ROOT / "benchmarks" / f"{name}.py").is_file() for name in names)


def test_the_package_knows_no_benchmark():
    """Nothing in the package imports what stands in the benchmarks."""
    own = {script.stem for script in SCRIPTS}
    for path in (ROOT / "pdclass").rglob("*.py"):
        lines = [line.split() for line in path.read_text(encoding="utf-8").splitlines()]
        assert not [line for line in lines if len(line) > 1 and line[0] in {"import", "from"} and line[1] in own], path
