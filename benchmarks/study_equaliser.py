"""How much of a sensor's influence equalisation takes away, by feature and in the labels.

`python benchmarks/study_equaliser.py [CIRCUITS]` simulates the same circuits and pulses behind transformers that end at
10, 14, 20, 28 and 40 MHz (lower corner 0.1 MHz), and one each that begins at 0.05 and at 1 MHz, extracts the pulses
behind each, and measures them as they are and equalised: to 0.3-25 MHz (what the noise allows is given back above the
corner), and down to 0.3-10 MHz (what the widest chains carry more is taken away). Printed are, by feature, the shift
that the sensor makes over the feature's spread within the labels, and the balanced accuracy with local and switchgear
merged, by circuits, where training and test have other sensors. Some minutes.
"""

from __future__ import annotations

import sys
from collections.abc import Mapping
from dataclasses import replace

import numpy as np
import pandas as pd
from equalise import equalised
from plain_features.window import prepared

from pdclass.extract import ExtractSettings
from pdclass.features import CATALOGUE, feature_table
from pdclass.features.catalogue import FAMILIES
from pdclass.jobs.simulate import labelled_pulses, scenario_path
from pdclass.model.doubt import probabilities
from pdclass.model.forest import margins
from pdclass.pulses import LABELS, FloatArray, PulseSet
from pdclass.sim.scenario import Scenario, capture_of, circuit_of, read_scenario
from pdclass.training.boost import Examples, fit_on_parts
from pdclass.training.card import markdown
from pdclass.training.settings import TrainSettings

SEED = 815
#: Lower and upper corner of the transformer [MHz]; the last of the first five is the reference.
UPPER = ((0.1, 10.0), (0.1, 14.0), (0.1, 20.0), (0.1, 28.0), (0.1, 40.0))
LOWER = ((0.05, 28.0), (1.0, 28.0))
#: Ways of measuring: the band that chains are brought to [Hz], None = as they are.
WAYS: Mapping[str, tuple[float, float] | None] = {"as it is": None, "0.3-25": (0.3e6, 25e6), "0.3-10": (0.3e6, 10e6)}
CLEAR_DB = 15.0
NEAREST_US = 0.3
#: Circuits are parted into quarters: two teach, one stops the rounds, one tests; so many turns of that.
TURNS, ROUNDS = 2, 120
#: Each pulse of the matrix pencil costs as much as all other families; it is left out here.
LEFT_OUT = ("modes",)
NAMES = [f.name for family, (features, _) in FAMILIES.items() if family not in LEFT_OUT for f in features]

Measured = dict[tuple[float, float], tuple[pd.DataFrame, dict[str, FloatArray]]]


def behind(world: Scenario, corners_mhz: tuple[float, float]) -> Scenario:
    """The world with one transformer: what else is drawn stays as it was, for each draw still takes place."""
    low, high = (corner * 1e6 for corner in corners_mhz)
    corners = {"low_corner_hz": (low * 0.9999, low), "high_corner_hz": (high * 0.9999, high)}
    return world.model_copy(update={"chain": world.chain.model_copy(update={"rates_hz": (100e6,), **corners})})


def extracted(world: Scenario, circuits: int) -> list[PulseSet]:
    """Labelled pulses of the first circuits of a world, background left out."""
    found = []
    for number in range(1, circuits + 1):
        capture = capture_of(world, circuit_of(world, number, seed=SEED), number, seed=SEED)
        pulses = labelled_pulses(capture, ExtractSettings(false_events_per_cycle=20.0)).pulses
        table = pulses.table
        clear = table["label"].notna() & table["echo_of"].isna() & (table["snr_db"] >= CLEAR_DB)
        found.append(pulses.take((clear & (table["family"] != "background")).to_numpy()))
    return [pulses for pulses in found if len(pulses.table)]


def measured(sets: list[PulseSet]) -> tuple[pd.DataFrame, dict[str, FloatArray]]:
    """Pulses and their features, one array for each of `WAYS`."""
    values: dict[str, list[FloatArray]] = {way: [] for way in WAYS}
    for pulses in sets:
        for way, band_hz in WAYS.items():
            again = pulses if band_hz is None else brought(pulses, band_hz)
            values[way].append(feature_table(again, NAMES))
    return pd.concat([pulses.table for pulses in sets]), {way: np.concatenate(each) for way, each in values.items()}


def brought(pulses: PulseSet, band_hz: tuple[float, float]) -> PulseSet:
    """Pulses of one chain as the band would show them; what the chain does not carry stays unmeasurable."""
    chain = pulses.chains[0]
    waves = pulses.waves.copy()
    for row, duration_us in enumerate(pulses.table["duration_us"].to_numpy(float)):
        window = prepared(waves[row], chain, duration_us)
        if window is not None:
            waves[row] = equalised(window, chain, band_hz)
    seen = replace(chain, band_hz=(band_hz[0], chain.band_hz[1]), response=None)
    return PulseSet(waves, (seen,), pulses.table)


def pairs(one: pd.DataFrame, other: pd.DataFrame) -> tuple[np.ndarray, np.ndarray]:
    """Places of the same planted pulses in two tables: same circuit, kind and onset."""
    key = ["circuit", "family", "label"]
    left, right = (t.reset_index()[[*key, "onset_s"]].assign(place=np.arange(len(t))) for t in (one, other))
    both = pd.merge_asof(
        left.sort_values("onset_s"), right.sort_values("onset_s"), on="onset_s", by=key, direction="nearest",
        tolerance=NEAREST_US * 1e-6,
    ).dropna(subset=["place_y"])  # fmt: skip
    return both["place_x"].to_numpy(int), both["place_y"].to_numpy(int)


def spread_within(table: pd.DataFrame, values: FloatArray) -> FloatArray:
    """Spread of every feature within the labels: interquartile range over 1.349, root mean square over labels."""
    found = []
    for label in LABELS:
        low, high = np.nanpercentile(values[(table["label"] == label).to_numpy()], (25, 75), axis=0)
        found.append(((high - low) / 1.349) ** 2)
    return np.asarray(np.sqrt(np.mean(found, axis=0)))


def shifts(found: Measured, sensor: tuple[float, float], reference: tuple[float, float], way: str) -> FloatArray:
    """Median size of the change from one sensor to another over the spread within the labels, by feature."""
    (here, values), (there, held) = found[sensor], found[reference]
    one, other = pairs(here, there)
    change = np.abs(values[way][one] - held[way][other])
    known = np.isfinite(change).any(axis=0)
    median = np.full(len(NAMES), np.nan)
    median[known] = np.nanmedian(change[:, known], axis=0)
    return np.asarray(median / spread_within(there, held[way]))


def accuracy(
    table: pd.DataFrame, values: FloatArray, taught: np.ndarray, tested: np.ndarray, stop: np.ndarray
) -> float:
    """Balanced accuracy with local and switchgear merged, classes and within a class circuits weighing equally."""
    index = table["label"].map(LABELS.index).to_numpy(np.int64)
    groups = table["circuit"].to_numpy(object)
    examples = Examples(values, index, groups)
    fitted = fit_on_parts(examples.take(taught), examples.take(stop), examples.take(stop),
                          TrainSettings(max_trees=ROUNDS))  # fmt: skip
    zero = np.zeros(len(LABELS))
    likeliest = probabilities(margins(fitted.forest, values[tested]), fitted.temperature, zero).argmax(axis=1)
    merged = np.array([0, 1, 1, 3])
    truth, hit = merged[index[tested]], merged[index[tested]] == merged[likeliest]
    of_circuit = pd.DataFrame({"truth": truth, "circuit": groups[tested], "hit": hit})
    return float(of_circuit.groupby(["truth", "circuit"])["hit"].mean().groupby("truth").mean().mean())


def label_rows(found: Measured) -> list[dict[str, object]]:
    """Accuracy for three ways of sharing out sensors between training and test, by way of measuring."""
    table = pd.concat([one.assign(upper=sensor[1]) for sensor, (one, _) in found.items() if sensor in UPPER])
    circuits = sorted(set(table["circuit"]))
    rng = np.random.default_rng(SEED)
    part = dict(zip(circuits, rng.choice(4, len(circuits)), strict=True))
    own = dict(zip(circuits, rng.choice([high for _, high in UPPER], len(circuits)), strict=True))
    quarter = table["circuit"].map(part).to_numpy()
    upper, drawn = table["upper"].to_numpy(), table["circuit"].map(own).to_numpy()
    wide, narrow, mixed = upper >= 20, upper < 20, upper == drawn
    rows = []
    for words, teach, test in (("wide on narrow", wide, narrow), ("narrow on wide", narrow, wide),
                               ("one sensor a circuit", mixed, mixed)):  # fmt: skip
        row: dict[str, object] = {"taught on, tested on": words}
        for way in WAYS:
            values = np.concatenate([each[way] for sensor, (_, each) in found.items() if sensor in UPPER])
            splits = [
                accuracy(table, values, teach & ((quarter - turn) % 4 > 1), test & (quarter == turn),
                         teach & ((quarter - turn) % 4 == 1))
                for turn in range(TURNS)
            ]  # fmt: skip
            row[way] = f"{np.mean(splits):.3f}"
        rows.append(row)
    return rows


def feature_rows(found: Measured) -> list[dict[str, object]]:
    """Shift by feature, sensor and way; features that all sensors measure alike come last."""
    rows = []
    reference = UPPER[-1]
    sensors = [(each, reference) for each in (UPPER[0], UPPER[1], UPPER[3])] + [(LOWER[1], UPPER[3])]
    moved = {(pair, way): shifts(found, *pair, way) for pair in sensors for way in WAYS}
    for column, name in enumerate(NAMES):
        row: dict[str, object] = {"feature": name}
        for pair in sensors:
            row["{:g}-{:g} MHz".format(*pair[0])] = " ".join(f"{moved[pair, way][column]:.2f}" for way in WAYS)
        rows.append(row)
    return sorted(rows, key=lambda row: -_first(row[next(key for key in row if key != "feature")]))


def _first(text: object) -> float:
    value = float(str(text).split()[0])
    return value if np.isfinite(value) else -1.0


def main(circuits: int) -> None:
    """Simulate, measure, print."""
    world = read_scenario(scenario_path("base"))
    found: Measured = {}
    for sensor in (*UPPER, *LOWER):
        found[sensor] = measured(extracted(behind(world, sensor), circuits))
        sys.stderr.write(f"{sensor}: {len(found[sensor][0])} pulses\n")
    printed(found)


def printed(found: Measured) -> None:
    """Print both tables."""
    ways = " / ".join(WAYS)
    print(f"Shift that the sensor makes over the spread within the labels ({ways}), median over the same pulses;")
    print("held against 0.1-40 MHz, the last column against 0.1-28 MHz.\n")
    print(markdown(pd.DataFrame(feature_rows(found))))
    print(f"\nBalanced accuracy, near end merged, {CLEAR_DB:g} dB and more, circuits of the test not taught.\n")
    print(markdown(pd.DataFrame(label_rows(found))))
    print(f"\n{len(CATALOGUE)} features in the catalogue, {len(NAMES)} measured here.")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 120)
