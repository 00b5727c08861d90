"""The catalogue measured in batches against the same features measured plainly, pulse by pulse, on one core.

Pulses are extracted from circuits of the base world at 100 MS/s. Both ways take turns in one run, the best of several
rounds each. Run with `make bench`. Figures are ratios; absolute rates depend on the machine and what else it does.
"""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "NUMBA_NUM_THREADS"):
    os.environ[name] = "1"

import time

import numpy as np
from plain_features import plain_table

from pdclass.extract import extract
from pdclass.features import CATALOGUE, FAMILIES, feature_table
from pdclass.features.table import BATCH
from pdclass.features.window import chain_band_hz, prepared
from pdclass.jobs.simulate import joined, scenario_path
from pdclass.sim.scenario import capture_of, circuit_of, read_scenario

PULSES, PLAINLY, ROUNDS, SEED = 4096, 64, 12, 77


def extracted():
    """Pulses of as many circuits as it takes."""
    base = read_scenario(scenario_path("base"))
    world = base.model_copy(update={"chain": base.chain.model_copy(update={"rates_hz": (100e6,)})})
    sets, number = [], 0
    while sum(len(found.table) for found in sets) < PULSES:
        number += 1
        sets.append(extract(capture_of(world, circuit_of(world, number, seed=SEED), number, seed=SEED)).pulses)
    return joined(sets).take(np.arange(PULSES))


def cpu_s(function, *arguments):
    start = time.process_time()
    result = function(*arguments)
    return time.process_time() - start, result


def by_family(pulses):
    """Microseconds a pulse of each step, best of several rounds."""
    duration_us = pulses.table["duration_us"].to_numpy(np.float64)
    low_hz, reach_hz = chain_band_hz(pulses.chains)[:, pulses.table["chain"].to_numpy(np.int64)]
    spent = []
    for _ in range(ROUNDS):
        steps = dict.fromkeys(("windows", "own spectrum", *FAMILIES), 0.0)
        for first in range(0, PULSES, BATCH):
            batch = slice(first, first + BATCH)
            seconds, (windows, _) = cpu_s(
                prepared, pulses.waves[batch], duration_us[batch], reach_hz[batch], low_hz[batch]
            )
            steps["windows"] += seconds
            steps["own spectrum"] += cpu_s(lambda: windows.own_power)[0]
            for family, (_, measure) in FAMILIES.items():
                steps[family] += cpu_s(measure, windows)[0]
        spent.append(steps)
    return {step: min(each[step] for each in spent) / PULSES * 1e6 for step in spent[0]}


def main():
    pulses = extracted()
    few = pulses.take(np.arange(0, PULSES, PULSES // PLAINLY))
    feature_table(few)
    rounds = [(cpu_s(plain_table, few)[0] / PLAINLY, cpu_s(feature_table, pulses)[0] / PULSES) for _ in range(ROUNDS)]
    plain, own = (min(column) for column in zip(*rounds, strict=True))
    print(f"{len(CATALOGUE)} features: plainly {plain * 1e3:.2f} ms a pulse, in batches {1 / own:.0f} pulses a second")
    print(f"ratio {plain / own:.0f} (of the rounds, median {np.median([one / two for one, two in rounds]):.0f})")
    print("; ".join(f"{step} {spent:.1f}" for step, spent in by_family(pulses).items()), "[us a pulse]")


if __name__ == "__main__":
    main()
