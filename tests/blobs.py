"""Feature tables without a simulator: one Gaussian cloud a label, moved a little in every circuit."""

import numpy as np

from pdclass.pulses import LABELS, Chain, PulseSet, typed_table
from pdclass.training.fit import train
from pdclass.training.settings import TrainSettings

NAMES = ("rise_ns", "width_ns", "centroid_mhz", "swings", "late_energy", "empty")
DIGESTS = {name: f"{place + 1:064x}" for place, name in enumerate(NAMES)}
CHAINS = (Chain(100e6, adc_bits=14, band_hz=(0.1e6, 25e6)), Chain(62.5e6, adc_bits=12, band_hz=(0.2e6, 20e6)))
QUICK = TrainSettings(max_trees=25, max_leaf_nodes=8, min_samples_leaf=5, reference_rows=200)


def blobs(circuits=30, per_circuit=24, *, seed=0, labels=LABELS, spread=0.5, prefix="C", **columns):
    """Values (pulses, 6) with missing ones and an always missing feature, and the pulses they belong to."""
    rng = np.random.default_rng(seed)
    centre = np.random.default_rng(99).normal(0, 1.6, (len(LABELS), 5))
    n = circuits * per_circuit
    circuit = np.repeat(np.arange(circuits), per_circuit)
    index = np.tile(np.arange(per_circuit) % len(labels), circuits)
    place = np.array([LABELS.index(label) for label in labels])[index]
    moved = rng.normal(0, spread, (circuits, 5))
    values = np.full((n, 6), np.nan)
    values[:, :5] = centre[place] + moved[circuit] + rng.normal(size=(n, 5))
    values[rng.random(values.shape) < 0.08] = np.nan
    rows = {
        "circuit": [f"{prefix}{number:03d}" for number in circuit],
        "chain": circuit % 2,
        "snr_db": rng.uniform(14, 44, n),
        "label": [LABELS[k] for k in place],
        "basis": ["expert" if number % 3 == 0 else "simulated" for number in circuit],
        "distance_m": np.where(place == 0, 10 ** rng.uniform(0.5, 3.5, n), np.nan),
        **columns,
    }
    ids = [f"{seed:02x}{number:014x}" for number in range(n)]
    waves = rng.normal(size=(n, 250)).astype(np.float32)
    return values, PulseSet(waves, CHAINS, typed_table(rows, ids, simulated=True))


def trained(circuits=30, *, seed=0, settings=QUICK, **changes):
    """Bundle parts from such pulses."""
    values, pulses = blobs(circuits, seed=seed, **changes)
    return train(values, NAMES, DIGESTS, pulses, settings, feature_units={"rise_ns": "ns"})
