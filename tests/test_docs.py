"""The documents keep their word: commands exist, have help, and the ones shown run."""

import json
import re
import shlex
import subprocess
import sys
from pathlib import Path

import foreign_files
import numpy as np
import pandas as pd
import pytest
from typer.main import get_command

from pdclass.capture import open_capture
from pdclass.cli.app import app
from pdclass.jobs.score import base_bundle

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
COMMANDS = get_command(app).commands
MARKDOWN = sorted([*ROOT.glob("*.md"), *(ROOT / "docs").glob("*.md"), *(ROOT / "synthetic").glob("*.md")])


def pdclass(*arguments, cwd):
    return subprocess.run(
        [sys.executable, "-c", "from pdclass.cli.app import main; main()", *arguments],
        capture_output=True,
        text=True,
        cwd=cwd,
        check=False,
    )


def shown_commands(page=README):
    """Commands in a page's console blocks, without the prompt and without what they printed."""
    blocks = re.findall(r"```console\n(.*?)```", page, flags=re.DOTALL)
    lines = [line for block in blocks for line in block.replace("\\\n", " ").splitlines()]
    return [line.removeprefix("$ ") for line in lines if line.startswith("$ pdclass ")]


def test_the_command_table_lists_every_command_and_no_other():
    """The README's table and the program agree on what commands there are."""
    table = set(re.findall(r"^\| `pdclass ([a-z]+)", README, flags=re.MULTILINE))
    assert table == set(COMMANDS)


@pytest.mark.parametrize("name", sorted(COMMANDS))
def test_every_command_has_short_complete_help(name, tmp_path):
    """Help says what the command does and what every option is, within a screen and a half."""
    done = pdclass(name, "--help", cwd=tmp_path)
    assert done.returncode == 0
    assert len(done.stdout.splitlines()) <= 60
    assert COMMANDS[name].help
    assert all(getattr(parameter, "help", None) for parameter in COMMANDS[name].params if parameter.name != "help")


def test_every_command_shown_in_the_readme_runs(tmp_path):
    """The README's commands, run in their order in one folder, all succeed and name what comes next."""
    commands = shown_commands()
    assert len(commands) >= 4
    for command in commands:
        done = pdclass(*shlex.split(command)[1:], cwd=tmp_path)
        assert done.returncode == 0, (command, done.stderr)


def test_the_metadata_shown_opens_as_a_capture(tmp_path):
    """The JSON of the page on captures, with samples beside it, is a capture that the reader takes."""
    page = (ROOT / "docs" / "captures.md").read_text(encoding="utf-8")
    shown = re.search(r"```json\n(.*?)```", page, flags=re.DOTALL).group(1)
    (tmp_path / "shown.sigmf-meta").write_text(shown, encoding="utf-8")
    samples = np.random.default_rng(0).normal(0, 30, 10_000).round().astype("<i2")
    (tmp_path / "shown.sigmf-data").write_bytes(samples.tobytes())
    capture = open_capture(tmp_path / "shown.sigmf-meta")
    assert capture.circuit == "Quay Road"
    assert capture.chain.band_hz == (80e3, 28e6)
    assert np.array_equal(capture.counts, samples)


def test_the_world_shown_is_simulated_with_its_measured_cable(tmp_path):
    """Scenario and curve of the page on own worlds, written as shown, run with the command shown."""
    page = (ROOT / "docs" / "own-world.md").read_text(encoding="utf-8")
    for name, kind in (("own.toml", "toml"), ("own-cable.csv", "csv")):
        shown = re.search(rf"```{kind}\n(.*?)```", page, flags=re.DOTALL).group(1)
        (tmp_path / name).write_text(shown, encoding="utf-8")
    command = re.search(r"^pdclass simulate .*$", page, flags=re.MULTILINE).group(0)
    done = pdclass(*shlex.split(command)[1:], cwd=tmp_path)
    assert done.returncode == 0, done.stderr
    assert {path.name for path in (tmp_path / "own-world").iterdir()} >= {"pulses.parquet", "gallery.html"}
    assert open_capture(tmp_path / "own-world" / "own-0001.sigmf-meta").chain.rate_hz == 100e6


def fill_in(labels):
    """Name the pulses of a sheet as somebody would: some of them, and some left open."""
    rows = pd.read_csv(labels, dtype=str)
    words = ["interference", "cable", None]
    rows["label"] = [words[place % 3] for place in range(len(rows))]
    rows["basis"] = ["expert" if place % 3 < 2 else None for place in range(len(rows))]
    rows.to_csv(labels, index=False)


def test_the_page_on_own_labels_is_worked_through(tmp_path):
    """Maps as shown, files that fit them, and every command of the page, in order; the sheet is filled in between."""
    page = (ROOT / "docs" / "own-labels.md").read_text(encoding="utf-8")
    foreign_files.write_csv(tmp_path)
    foreign_files.write_trace(tmp_path)
    shown_maps = re.findall(r"```toml\n(.*?)```", page, flags=re.DOTALL)
    for name, text in zip(("rows.toml", "trace.toml"), shown_maps, strict=True):
        (tmp_path / name).write_text(text, encoding="utf-8")
    printed = {}
    for command in shown_commands(page):
        words = [
            word
            for part in shlex.split(command)[1:]
            for word in (sorted(map(str, tmp_path.glob(part))) if "*" in part else [part])
        ]
        done = pdclass(*words, cwd=tmp_path)
        assert done.returncode == 0, (command, done.stderr)
        printed[words[0]] = done.stdout + done.stderr
        if "--sheet" in words:
            fill_in(tmp_path / "sheet" / "labels.csv")
    assert "rows name a pulse of the tables" in printed["train"]
    assert "labelled by circuit: " in printed["train"]
    assert "  crane drive: 1 pulses of 1 circuit" in printed["import"]
    assert (tmp_path / "evaluation" / "evaluation.md").is_file()


@pytest.mark.parametrize("path", MARKDOWN, ids=lambda path: path.name)
def test_links_in_documents_lead_somewhere(path):
    """Every relative link of a document leads to a file of the project."""
    links = re.findall(r"\]\(([^)#:]+)\)", path.read_text(encoding="utf-8"))
    assert all((path.parent / link).exists() for link in links)


def test_figures_in_the_readme_are_those_of_the_shipped_bundle():
    """What the README says of the base bundle is what its manifest holds."""
    manifest = json.loads((base_bundle() / "manifest.json").read_text(encoding="utf-8"))
    metrics = manifest["account"]["metrics"]
    rows = dict(re.findall(r"^  \| ([^|]+) \| ([^|]+) \|$", README, flags=re.MULTILINE))
    dangerous = f"{metrics['switchgear_as_interference_count']} of {metrics['switchgear_pulses']} pulses"
    assert rows["switchgear decided as interference (the dangerous one)"] == dangerous
    assert rows["undecided"] == f"{metrics['share_undecided']:.2f}"
    assert rows["accuracy among the decided"] == f"{metrics['accuracy_decided']:.2f}"
    assert rows["balanced accuracy of the likeliest label"].startswith(f"{metrics['balanced_accuracy']:.2f};")
    covered = rows["the true label is in the label set (promised 0.90 on average over circuits)"]
    mean, worst = metrics["coverage_mean"], metrics["coverage_worst_group"]
    assert covered == f"{mean:.2f} on average, {worst:.2f} on the worst circuit"
    card = (base_bundle() / "card.md").read_text(encoding="utf-8")
    recalls = re.findall(r"(0\.\d+) at", rows["recall of `cable`"])
    assert len(recalls) == 3
    assert all(f"| {recall} |" in card for recall in recalls)
    assert rows["recall of `cable`"].endswith(f"about {metrics['cable_half_distance_m']:.0f} m")


def test_cautions_stand_in_the_readme():
    """The README carries the cautions that every report carries."""
    text = " ".join(README.split())
    for words in (
        "not a permit to work",
        "not proof that equipment is healthy or safe",
        "High voltage kills",
        "under the utility's own safety rules and local codes",
        "licensed, competent staff",
        "absolute magnitude means little on-line",
        "many equal labels are not many proofs",
    ):
        assert words.lower() in text.lower(), words
