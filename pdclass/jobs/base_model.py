"""The shipped bundle: `python -m pdclass.jobs.base_model FOLDER` makes it from the base world (`make model`)."""

from __future__ import annotations

import sys
from pathlib import Path

from pdclass.extract import ExtractSettings
from pdclass.jobs.simulate import by_rate, labelled_pulses, scenario_path
from pdclass.jobs.talk import SILENT, Silent, Talk, each
from pdclass.jobs.train import fit, measured
from pdclass.model.bundle import BundleParts, write_bundle
from pdclass.model.decision import decide
from pdclass.pulses import FloatArray, PulseSet
from pdclass.sim.scenario import SIMULATOR_VERSION, Scenario, capture_count, read_scenario, simulate_capture
from pdclass.training.card import with_card
from pdclass.training.evaluate import evaluate
from pdclass.training.settings import TrainSettings

SEED = 20_250
#: The circuits of the card's figures come from the same distributions by another seed.
TEST_SEED = 90_210
#: So many further circuits are drawn for the card, or a third of the training world's where that is fewer.
TEST_CIRCUITS = 400
#: So many false events a cycle are let through, so that bare crossings of the background are learned as such.
FALSE_EVENTS = 20.0


def make_base(
    out: Path, *, scenario: str = "base", jobs: int = 1, replace_old: bool = True, talk: Talk = SILENT
) -> str:
    """Simulate the world, train on it, evaluate on circuits it has not seen, write the bundle; returns its digest.

    Parameters
    ----------
    out : folder of the bundle.
    scenario : shipped scenario, or a path.
    jobs : processes; does not change a byte.
    """
    path = scenario_path(scenario)
    world = read_scenario(path)
    count = capture_count(world)
    values, pulses = drawn_pulses(world, range(1, count + 1), SEED, jobs=jobs, talk=talk)
    provenance = {
        "scenario": path.stem,
        "seed": SEED,
        "simulator_version": SIMULATOR_VERSION,
        "false_events_per_cycle": FALSE_EVENTS,
        "circuits": count,
    }
    parts = fit(values, pulses, TrainSettings(), provenance=provenance, world=path.read_text(encoding="utf-8"))
    tested = min(TEST_CIRCUITS, max(8, count // 3))
    test_values, test_pulses = drawn_pulses(world, range(1, tested + 1), TEST_SEED, jobs=jobs, talk=talk)
    found = evaluate(parts, test_values, test_pulses)
    low, high = world.snr_db
    parts = with_card(
        parts,
        found,
        title="The base bundle",
        tested_on=f"Tested on {tested} simulated circuits of the same distributions (seed {TEST_SEED}), none of which "
        "it was trained on. Simulated pulses only: how it does on field pulses has not been measured. "
        + _neighbours(parts, test_values, test_pulses),
        trained_on=f"Trained on simulated pulses alone: {count} circuits of the world `{path.stem}` "
        f"(seed {SEED}, simulator version {SIMULATOR_VERSION}), each with its own cable, near end, "
        "sensor, rate and interference. "
        f"The height of planted pulses over the recorded noise is uniform in decibels from {low:g} to {high:g} dB, the "
        f"same law for every label; pulses were found by the extractor at {FALSE_EVENTS:g} false events a cycle.",
    )
    return write_bundle(out, parts, replace=replace_old)


def _neighbours(parts: BundleParts, values: FloatArray, pulses: PulseSet) -> str:
    """What becomes of pulses from a neighbour's cable: they come over the busbar, as those of the switchgear do."""
    decisions = decide(parts, values, pulses)
    table = pulses.table[pulses.table["echo_of"].isna()]
    theirs = ((table["label"] == "cable") & table["distance_m"].isna()).to_numpy()
    as_switchgear = decisions.decided & (decisions.likeliest == parts.classes.index("switchgear"))
    return (
        f"Of the cable pulses, {theirs.sum()} come from a neighbour's cable over the busbar; "
        f"{(theirs & as_switchgear).sum()} of these are decided as switchgear."
    )


def drawn_pulses(world: Scenario, numbers: range, seed: int, *, jobs: int, talk: Talk) -> tuple[FloatArray, PulseSet]:
    """Features and pulses of simulated captures, each found by the extractor as in real captures."""
    calls = [(world, number, seed) for number in numbers]
    found = each(_pulses_of, calls, jobs=jobs, talk=talk, words="circuits simulated")
    return measured(list(by_rate(found).values()))


def _pulses_of(world: Scenario, number: int, seed: int) -> PulseSet:
    capture = simulate_capture(world, number, seed=seed)
    pulses = labelled_pulses(capture, ExtractSettings(false_events_per_cycle=FALSE_EVENTS)).pulses
    return pulses.take((pulses.table["label"].notna() | pulses.table["echo_of"].notna()).to_numpy())


class _Lines(Silent):
    """Says each stage on stderr."""

    def say(self, line: str, /) -> None:
        sys.stderr.write(f"{line}\n")


if __name__ == "__main__":
    folder = Path(sys.argv[1])
    sys.stdout.write(f"{folder}: digest {make_base(folder, jobs=2, talk=_Lines())}\n")
