"""The command line: one line and an exit code for every error, results on stdout, talk on stderr."""

import json
import subprocess
import sys

import foreign_files
import pytest

from pdclass.capture import write_sigmf
from pdclass.sim.scenario import Scenario, simulate_capture


def pdclass(*arguments, cwd):
    command = [sys.executable, "-c", "from pdclass.cli.app import main; main()", *map(str, arguments)]
    return subprocess.run(command, capture_output=True, text=True, cwd=cwd, check=False)


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """A folder with one good capture and one broken one."""
    path = tmp_path_factory.mktemp("cli")
    world = {"name": "one", "circuits": 1, "snr_db": [20.0, 40.0], "capture": {"duration_ms": 2.0, "pulses": [10, 10]}}
    write_sigmf(path, simulate_capture(Scenario.model_validate(world), 1, seed=1))
    (path / "bad.sigmf-meta").write_text("{")
    return path


@pytest.mark.parametrize(
    ("arguments", "code", "words"),
    [
        (["nonsense"], 2, "nonsense"),
        (["score"], 2, "INPUT"),
        (["score", "nowhere.sigmf-meta", "--out", "v"], 2, "nowhere.sigmf-meta: no such file"),
        (["score", "nowhere", "--out", "v"], 2, "nowhere: no such file or folder"),
        (["extract", "bad.sigmf-meta", "--out", "p.parquet"], 2, "bad.sigmf-meta"),
        (["extract", "one-0001.sigmf-meta", "--out", "p.csv"], 2, "ends in .parquet"),
        (["extract", "one-0001.sigmf-meta", "--out", "p.parquet", "--band-hz", "5"], 2, "LOW,HIGH"),
        (["train", "p.parquet", "--out", "b", "--error-rate", "2"], 2, "0.01 to 0.5"),
        (["train", "p.parquet", "--out", "b", "--group", "pulse"], 2, "--group"),
        (["evaluate", "nobundle", "p.parquet", "--out", "e"], 2, "nobundle"),
        (["extract", "one-0001.sigmf-meta", "--out", "p.parquet", "--map", "none.toml"], 2, "none.toml"),
        (["extract", "trace.csv", "--out", "p.parquet"], 2, "trace.csv: no such file"),
        (["import", "rows.csv", "--map", "none.toml", "--out", "p.parquet"], 2, "none.toml: not readable as TOML"),
        (["import", "rows.csv", "--out", "p.parquet"], 2, "--map"),
        (["train", "p.parquet", "--out", "b", "--classes", "cable"], 2, "--classes"),
        (["evaluate", "nobundle", "p.parquet", "--out", "e", "--classes", "a=b"], 2, "--classes"),
        (["simulate", "nothere", "--out", "w"], 2, "shipped ones are base, port-ferrow, tiny"),
        (["score", "one-0001.sigmf-meta", "--out", "."], 2, "without inputs"),
    ],
)
def test_errors_are_one_line_with_their_exit_code(folder, arguments, code, words):
    """Every wrong use ends with its exit code and a last line that says what is wrong, never with a traceback."""
    before = sorted(path.name for path in folder.iterdir())
    done = pdclass(*arguments, cwd=folder)
    assert done.returncode == code, done.stderr
    assert words in done.stderr
    assert "Traceback" not in done.stderr
    assert done.stdout == ""
    assert sorted(path.name for path in folder.iterdir()) == before


def test_a_skipped_input_ends_with_six_and_the_rest_is_done(folder, tmp_path):
    """One bad input among good ones: exit 6, its reason on stderr, the verdicts of the other in place."""
    inputs = [folder / "one-0001.sigmf-meta", folder / "bad.sigmf-meta"]
    done = pdclass("score", *inputs, "--out", tmp_path / "v", "--no-report", cwd=tmp_path)
    assert done.returncode == 6
    assert "bad.sigmf-meta" in done.stderr
    assert (tmp_path / "v" / "run.json").is_file()


def test_import_writes_a_table_and_says_what_is_in_it(tmp_path):
    """Good files are imported, a bad one is skipped with exit code 6, and the next command is named."""
    (tmp_path / "bad.csv").write_text("nothing of the kind\n")
    good, map_path = foreign_files.write_csv(tmp_path), foreign_files.write_map(tmp_path)
    done = pdclass("import", good, "bad.csv", "--map", map_path, "--out", "p.parquet", cwd=tmp_path)
    assert done.returncode == 6
    assert "bad.csv: columns.wave" in done.stderr
    assert "  crane drive: 1 pulses of 1 circuit" in done.stdout
    assert done.stdout.splitlines()[-1] == "next: pdclass score p.parquet --out verdicts"
    assert (tmp_path / "p.parquet").is_file()


def test_a_missing_extra_ends_with_five(tmp_path):
    """Where the part that reads HDF5 is not installed, the exit code is 5 and the extra is named."""
    (tmp_path / "night.h5").write_bytes(b"\x89HDF\r\n\x1a\n" + bytes(100))
    code = "import sys; sys.modules['h5py'] = None; from pdclass.cli.app import main; main()"
    command = [sys.executable, "-c", code, "extract", "night.h5", "--out", "p.parquet"]
    done = subprocess.run(command, capture_output=True, text=True, cwd=tmp_path, check=False)
    assert done.returncode == 5
    assert "pip install 'pdclass[hdf5]'" in done.stderr
    assert done.stdout == ""


def test_json_is_json(folder, tmp_path):
    """With --json stdout holds one JSON object and nothing else."""
    done = pdclass("extract", folder / "one-0001.sigmf-meta", "--out", tmp_path / "p.parquet", "--json", cwd=tmp_path)
    assert json.loads(done.stdout)["captures"][0]["capture"] == "one-0001"


def test_debug_shows_the_traceback(tmp_path):
    """--debug, and only it, shows where an error was raised."""
    assert "Traceback" in pdclass("--debug", "score", "nowhere", "--out", "v", cwd=tmp_path).stderr


def test_version(tmp_path):
    """--version prints the version."""
    assert pdclass("--version", cwd=tmp_path).stdout.strip() == "0.2.0"
