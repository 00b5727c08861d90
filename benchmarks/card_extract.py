"""What the extraction finds in the synthetic world: share found by class and height, and by what disturbs the record.

A planted pulse counts as found if an event begins within a microsecond of its onset; pulses that begin within 5 us of
another are left out, for which of two overlapping ones was found cannot be said. Run by hand; prints tables.
"""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "NUMBA_NUM_THREADS"):
    os.environ[name] = "1"

import sys

import numpy as np
import pandas as pd

from pdclass.extract import extract
from pdclass.jobs.simulate import scenario_path
from pdclass.sim.scenario import capture_of, circuit_of, read_scenario

EDGES_DB = (8, 12, 15, 18, 24, 30, 60)
NEAR_S, APART_S = 1e-6, 5e-6
SEED = 31


def planted(world, number):
    """Planted pulses of a capture that stand apart: class, family, height, and whether each was found."""
    circuit = circuit_of(world, number, seed=SEED)
    capture = capture_of(world, circuit, number, seed=SEED)
    rate_hz = capture.chain.rate_hz
    found = np.sort(extract(capture).pulses.table["onset_sample"].to_numpy(np.int64))
    onsets = np.array([note.onset_sample for note in capture.annotations])
    gaps = np.diff(onsets, prepend=-(10**12), append=10**12) / rate_hz
    rows = []
    for place in np.flatnonzero(np.minimum(gaps[:-1], gaps[1:]) > APART_S):
        note = capture.annotations[place]
        hit = bool(found.size and np.abs(found - note.onset_sample).min() <= NEAR_S * rate_hz)
        height_db = float(note.comment.split()[1])
        rows.append(
            (note.label, note.family, height_db, hit, circuit.traits["interference"], len(circuit.reception.carriers))
        )
    return rows


def false_events(world, number):
    """Of a circuit's background alone: events found, mains cycles looked at, whether carrier communication is in it."""
    circuit = circuit_of(world, number, seed=SEED)
    capture = capture_of(world, circuit, number, seed=SEED, pulses=0)
    cycles = capture.duration_s * capture.chain.mains_hz
    return len(extract(capture).pulses.table), cycles, bool(circuit.reception.communication)


def main(count):
    world = read_scenario(scenario_path("base"))
    rows = [row for number in range(1, count + 1) for row in planted(world, number)]
    table = pd.DataFrame(rows, columns=["label", "family", "height_db", "found", "beside", "carriers"])
    band = pd.cut(table["height_db"], EDGES_DB, right=False)
    print(f"{len(table)} planted pulses that stand apart, {count} circuits; share found by class and height [dB]\n")
    print(table.pivot_table("found", "label", band, "mean", observed=True).round(3).to_string(), "\n")
    print("by family, of heights from 12 dB\n")
    high = table[table["height_db"] >= 12]
    print(high.groupby(["label", "family"])["found"].agg(["mean", "size"]).round(3).to_string(), "\n")
    print("discharges from 12 dB beside each family of interference, and by number of carriers\n")
    discharge = high[high["label"] != "interference"]
    beside = discharge.assign(beside=discharge["beside"].str.split("|")).explode("beside")
    print(beside.groupby("beside")["found"].agg(["mean", "size"]).round(3).to_string(), "\n")
    print(discharge.groupby("carriers")["found"].agg(["mean", "size"]).round(3).to_string(), "\n")
    columns = ["events", "cycles", "communication"]
    alone = pd.DataFrame([false_events(world, number) for number in range(1, count + 1)], columns=columns)
    print("false events in the background alone, with and without carrier communication in it\n")
    sums = alone.groupby("communication").sum()
    print(sums.assign(a_cycle=sums["events"] / sums["cycles"]).round(2).to_string())


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 60)
