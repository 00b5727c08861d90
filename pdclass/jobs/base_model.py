"""The shipped bundle: `python -m pdclass.jobs.base_model FOLDER` makes it from the base world (`make model`)."""

from __future__ import annotations

import sys
from collections.abc import Sequence
from functools import partial
from pathlib import Path

import numpy as np
import pandas as pd

from pdclass.extract import ExtractSettings
from pdclass.jobs.simulate import joined, labelled_pulses, scenario_path
from pdclass.jobs.talk import SILENT, Silent, Talk, each
from pdclass.jobs.train import fit, measured
from pdclass.model.bundle import BundleParts, write_bundle
from pdclass.model.decision import decide
from pdclass.pulses import FloatArray, PulseSet
from pdclass.sim.scenario import (
    SIMULATOR_VERSION,
    Scenario,
    capture_count,
    capture_of,
    circuit_of,
    read_scenario,
)
from pdclass.training.card import markdown, with_card
from pdclass.training.evaluate import confused, evaluate, judge
from pdclass.training.settings import TrainSettings
from pdclass.training.study import CLEAR_DB, Family, Measured, Trainer, clear, learning_curve, left_out

SEED = 20_250
#: The circuits of the card's figures come from the same distributions by another seed.
TEST_SEED = 90_210
#: So many further circuits are drawn for the card, or a third of the training world's where that is fewer.
TEST_CIRCUITS = 500
#: Worlds with fewer circuits are too small for the studies of the card.
STUDY_CIRCUITS = 400
#: So many false events a cycle are let through, so that bare crossings of the background are learned as such.
FALSE_EVENTS = 20.0
_CLEAR = (
    "Classes weigh equally, within a class its circuits. Near end merged: `local` and `switchgear` count as one, and a "
    "label set of nothing else as decided."
)
_LEFT_OUT = (
    "For each family the circuits of the test in which it is met, scored by the bundle (known) and by one trained "
    "alike without it (left out)."
)
#: What is left out of training, one at a time, and scored when met.
FAMILIES = (
    Family("paper-insulated cable, belted too", circuits=lambda traits: traits["cable"] in ("paper", "belted")),
    Family("EPR cable", circuits=lambda traits: traits["cable"] == "EPR"),
    Family("stations of 6 panels and more", circuits=lambda traits: traits["panels"] >= 6),
    Family("chains that end below 14 MHz", circuits=lambda traits: traits["high_hz"] < 14e6),
    Family("interference: converter", pulses="converter"),
    Family("interference: arc", pulses="arc"),
    Family("interference: switch-mode", pulses="switch-mode"),
)


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
    taught = drawn_pulses(world, range(1, count + 1), SEED, jobs=jobs, talk=talk)
    provenance = {
        "scenario": path.stem,
        "seed": SEED,
        "simulator_version": SIMULATOR_VERSION,
        "false_events_per_cycle": FALSE_EVENTS,
        "circuits": count,
    }
    text = path.read_text(encoding="utf-8")
    parts = fit(taught.values, taught.pulses, TrainSettings(), provenance=provenance, world=text)
    many = min(TEST_CIRCUITS, max(8, count // 3))
    tested = drawn_pulses(world, range(1, many + 1), TEST_SEED, jobs=jobs, talk=talk)
    low, high = world.snr_db
    parts = with_card(
        parts,
        evaluate(parts, tested.values, tested.pulses),
        title="The base bundle",
        tested_on=f"Tested on {many} simulated circuits of the same distributions (seed {TEST_SEED}), none of which "
        "it was trained on. Simulated pulses only: how it does on field pulses has not been measured. "
        + _neighbours(parts, tested),
        trained_on=f"Trained on simulated pulses alone: {count} circuits of the world `{path.stem}` "
        f"(seed {SEED}, simulator version {SIMULATOR_VERSION}), each with its own cable, near end, "
        "sensor, rate and interference. "
        f"The height of planted pulses over the recorded noise is uniform in decibels from {low:g} to {high:g} dB, or "
        f"to {world.capture.clipped_db:g} dB over the circuit's full scale where that is less: the same law for every "
        "label of a circuit. Pulses were found by the extractor with its limit set for "
        f"{FALSE_EVENTS:g} false events a cycle.",
        studies=_studies(parts, taught, tested, talk, partial(_trained, jobs=jobs)),
    )
    return write_bundle(out, parts, replace=replace_old)


def _neighbours(parts: BundleParts, tested: Measured) -> str:
    """What becomes of pulses from a neighbour's cable: they come over the busbar, as those of the switchgear do."""
    decisions = decide(parts, tested.values, tested.pulses)
    table = tested.pulses.table[tested.pulses.table["echo_of"].isna()]
    theirs = ((table["label"] == "cable") & table["distance_m"].isna()).to_numpy()
    as_switchgear = decisions.decided & (decisions.likeliest == parts.classes.index("switchgear"))
    return (
        f"Of the cable pulses, {theirs.sum()} come from a neighbour's cable over the busbar; "
        f"{(theirs & as_switchgear).sum()} of these are decided as switchgear."
    )


def _studies(
    parts: BundleParts,
    taught: Measured,
    tested: Measured,
    talk: Talk,
    train: Trainer,
    *,
    least: int = STUDY_CIRCUITS,
) -> list[str]:
    """Sections of the card: clear pulses, more circuits, families left out; none for fewer than `least` circuits."""
    count = len(taught.traits)
    if count < least:
        return []
    judged = judge(parts, tested.values, tested.pulses)
    talk.say("learning curve")
    curve = learning_curve(taught, tested, [count // 8, count // 4, count // 2, count], train)
    talk.say("families left out of training")
    without = left_out(taught, tested, FAMILIES, train, parts)
    return [
        f"## Clear pulses: {CLEAR_DB:g} dB and more over the noise",
        _CLEAR,
        markdown(
            pd.DataFrame([{"figure": key.replace("_", " "), "value": value} for key, value in clear(judged).items()])
        ),
        "### Which pairs fail",
        markdown(confused(judged.where(judged.snr_db >= CLEAR_DB)).reset_index()),
        "### More circuits",
        "Trained on the first so many circuits, the same figures of clear pulses.",
        markdown(curve),
        "### Families left out of training",
        _LEFT_OUT,
        markdown(without),
    ]


def _trained(sets: Sequence[Measured], *, jobs: int) -> list[BundleParts]:
    calls = [(one.values, one.pulses) for one in sets]
    return each(_fitted, calls, jobs=jobs, talk=SILENT, words="trainings")


def _fitted(values: FloatArray, pulses: PulseSet) -> BundleParts:
    return fit(values, pulses, TrainSettings(), provenance={})


def drawn_pulses(world: Scenario, numbers: range, seed: int, *, jobs: int, talk: Talk) -> Measured:
    """Features and pulses of simulated captures, each found by the extractor as in real captures."""
    calls = [(world, number, seed) for number in numbers]
    found = each(_pulses_of, calls, jobs=jobs, talk=talk, words="circuits simulated")
    values = np.concatenate([one.values for one in found])
    traits = pd.concat([one.traits for one in found])
    return Measured(values, joined([one.pulses for one in found]), traits[~traits.index.duplicated()])


def _pulses_of(world: Scenario, number: int, seed: int) -> Measured:
    circuit = circuit_of(world, number, seed=seed)
    capture = capture_of(world, circuit, number, seed=seed)
    pulses = labelled_pulses(capture, ExtractSettings(false_events_per_cycle=FALSE_EVENTS)).pulses
    kept = pulses.take((pulses.table["label"].notna() | pulses.table["echo_of"].notna()).to_numpy())
    values, thinned = measured([kept])
    return Measured(values, thinned, pd.DataFrame(circuit.traits, index=pd.Index([circuit.name], name="circuit")))


class _Lines(Silent):
    """Says each stage on stderr."""

    def say(self, line: str, /) -> None:
        sys.stderr.write(f"{line}\n")


if __name__ == "__main__":
    folder = Path(sys.argv[1])
    sys.stdout.write(f"{folder}: digest {make_base(folder, jobs=2, talk=_Lines())}\n")
