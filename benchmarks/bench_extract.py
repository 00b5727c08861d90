"""Extraction against a plain wavelet detector (wavedec + MAD), in one run on one core: speed and share found.

Run with `make bench`. Figures are ratios; absolute rates depend on the machine and what else it does.
"""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "NUMBA_NUM_THREADS"):
    os.environ[name] = "1"

import time

import numpy as np
import pywt

from pdclass.extract import extract
from pdclass.pulses import Capture, Chain

RATE_HZ, SAMPLES, SIGMA = 100e6, 2_000_000, 20.0
CARRIERS = ((0.198e6, 30), (0.693e6, 40), (0.909e6, 35), (1.215e6, 45), (6.07e6, 15), (9.58e6, 12), (11.9e6, 10))
T = np.arange(600) / RATE_HZ
SHAPES = [
    np.exp(-T / 60e-9) - np.exp(-T / 12e-9),
    np.exp(-T / 250e-9) - np.exp(-T / 80e-9),
    np.exp(-T / 500e-9) - np.exp(-T / 150e-9),
    np.exp(-T / 0.3e-6) * np.sin(2 * np.pi * 8e6 * T),
]


def cycle(height, seed):
    rng = np.random.default_rng(seed)
    t = np.arange(SAMPLES) / RATE_HZ
    signal = rng.normal(0, SIGMA, SAMPLES)
    for hz, size in CARRIERS:
        signal += size * (1 + 0.4 * np.sin(2 * np.pi * 1e3 * t)) * np.cos(2 * np.pi * hz * t + rng.uniform(0, 6))
    onsets = np.arange(200) * 10_000 + rng.integers(500, 8_000, 200)
    for number, onset in enumerate(onsets):
        shape = SHAPES[number % len(SHAPES)]
        signal[onset : onset + 600] += height * SIGMA * rng.choice([-1, 1]) * shape / np.abs(shape).max()
    return np.clip(np.rint(signal), -8192, 8191).astype(np.int16), onsets


def wavelet_events(counts, threshold):
    """Events of the plain detector; the threshold gave at most one false event a cycle on noise with carriers."""
    parts = pywt.wavedec(counts.astype(np.float32), "db4", level=6, mode="periodization")[1:]
    places = []
    for level, part in zip(range(6, 0, -1), parts, strict=True):
        size = np.abs(part) / (np.median(np.abs(part[::61])) / 0.6745)
        places.append(np.flatnonzero(size > threshold) << level)
    places = np.sort(np.concatenate(places))
    return places[np.concatenate([[True], np.diff(places) > 300])] if places.size else places


def calibrated():
    """The smallest threshold of the plain detector that leaves at most one false event a cycle."""
    noise = [cycle(0.0, seed)[0] for seed in (90, 91)]
    return next(z for z in np.arange(4.5, 12, 0.25) if np.mean([wavelet_events(c, z).size for c in noise]) <= 1)


def ours(counts):
    chain = Chain(RATE_HZ, 1e-4, 14, mains_hz=50.0)
    capture = Capture(chain=chain, counts=counts, circuit="c", sensor="s", session="1", digest="0" * 64, name="n")
    return extract(capture).pulses.table["onset_sample"].to_numpy()


def share_found(events, onsets):
    return np.mean([np.any((events >= onset - 64) & (events <= onset + 450)) for onset in onsets])


def cpu(function, *arguments):
    best = np.inf
    for _ in range(3):
        start = time.process_time()
        function(*arguments)
        best = min(best, time.process_time() - start)
    return best


if __name__ == "__main__":
    threshold = calibrated()
    ours(cycle(8.0, 1)[0])
    print(f"plain detector: threshold {threshold} noise levels")
    for height in (6.0, 8.0, 12.0):
        counts, onsets = cycle(height, 2)
        plain, own = cpu(wavelet_events, counts, threshold), cpu(ours, counts)
        print(
            f"peak/sigma {height:g}: plain found {share_found(wavelet_events(counts, threshold), onsets):.0%}, "
            f"pdclass {share_found(ours(counts), onsets):.0%}; speed of the whole extraction {plain / own:.2f} x plain"
        )
    quiet = [cycle(0.0, seed)[0] for seed in (100, 101, 102)]
    print(f"false events a cycle: {np.mean([len(ours(counts)) for counts in quiet]):.1f}")
