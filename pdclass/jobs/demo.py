"""`pdclass demo`: the main job on a fictional harbour district, with the verdicts held against what was planted."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass
from pathlib import Path

import pandas as pd

from pdclass.capture import open_capture
from pdclass.jobs.score import Scored, Truth, score_inputs, score_lines
from pdclass.jobs.simulate import Simulated, fresh_folder, simulate
from pdclass.jobs.talk import SILENT, Talk
from pdclass.report.summary import compare_with_truth
from pdclass.verdict.batch import read_verdicts

SCENARIO = "port-ferrow"
SEED = 3


@dataclass(frozen=True)
class Demo:
    """Where the demonstration stands, and how its verdicts compare with what was planted."""

    out: Path
    report: Path
    scored: Scored
    comparison: pd.DataFrame


def demo(out: Path, *, jobs: int = 1, force: bool = False, talk: Talk = SILENT) -> Demo:
    """Simulate Port Ferrow, score it with the shipped bundle, compare, and write the report.

    Raises
    ------
    InputError
        If the folder holds something else.
    """
    fresh_folder(out, force=force)
    talk.say("Port Ferrow, a fictional harbour district: simulating four circuits, three mains cycles each")
    made = simulate(SCENARIO, out / "captures", seed=SEED, jobs=jobs, force=True, talk=talk)
    talk.say("finding pulses and scoring them with the shipped bundle (a first run also compiles its kernels)")
    truth = _truth(made)
    scored = score_inputs(list(made.captures), out / "verdicts", jobs=jobs, force=True, talk=talk, truth=truth)
    verdicts = read_verdicts(scored.out)
    found = compare_with_truth(verdicts, truth.labels, scored.classes)
    return Demo(out, scored.out / "report.html", scored, found.table)


def demo_lines(done: Demo) -> list[str]:
    """What to print: what was planted against what was said, then as after any scoring."""
    lines = ["planted (down) against verdicts (across):", *done.comparison.to_string().splitlines()]
    return [*lines, *score_lines(done.scored)]


def _truth(made: Simulated) -> Truth:
    labels = pd.concat(
        pd.read_parquet(path, columns=["pulse_id", "label"]).set_index("pulse_id")["label"]
        for path in made.pulse_tables
    ).dropna()
    planted = Counter(
        note.label for path in made.captures for note in open_capture(path).annotations if note.label is not None
    )
    return Truth(labels, dict(planted))
