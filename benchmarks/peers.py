"""The detectors that the extraction is held against, and the least that each must be told: its threshold.

Every peer sees a whole mains cycle at a time and returns places of events; its threshold is the lowest on a fixed grid
that leaves at most one false event a cycle on cycles of noise with carriers.
"""

import numpy as np
import scipy.signal
from cycles import RATE_HZ, SAMPLES, captured, cycle

from pdclass.extract import ExtractSettings, background, extract
from pdclass.wavelets import DETECTOR_APART, Crossings, crossing_events, noise_level, scale_crossings

GRID = np.arange(3.5, 14.0, 0.1)
CALIBRATION_CYCLES, FRESH_CYCLES = 4, 6
_BAND = scipy.signal.butter(4, (2e6, 30e6), "bandpass", fs=RATE_HZ, output="sos").astype(np.float32)


def band_pass_crossings(counts, threshold):
    """Samples of the band 2 to 30 MHz (Butterworth, order 4) above a multiple of their own noise level."""
    wave = scipy.signal.sosfilt(_BAND, counts.astype(np.float32))
    noise, size = noise_level(wave), np.abs(wave)
    place = np.flatnonzero(size > threshold * noise)
    return Crossings(place, np.ones(place.size, np.int64), size[place] / noise)


PEERS = {
    "wavedec": scale_crossings,
    "swt": lambda counts, threshold: scale_crossings(counts, threshold, "undecimated"),
    "band-pass": band_pass_crossings,
}
WORDS = {
    "wavedec": "PyWavelets `wavedec` (db4, 6 levels) + MAD",
    "swt": "PyWavelets `swt` (db4, 6 levels) + MAD",
    "band-pass": "SciPy `sosfilt` 2-30 MHz + MAD",
    "kernel": "pdclass, detection kernel alone",
    "whole": "pdclass `extract`, whole",
}


def calibrated(crossings_of):
    """The lowest threshold [noise levels] with at most one false event a cycle."""
    quiet = [crossings_of(cycle(0.0, seed)[0], GRID[0]) for seed in range(900, 900 + CALIBRATION_CYCLES)]
    for threshold in GRID:
        if sum(crossing_events(one, threshold).size for one in quiet) <= CALIBRATION_CYCLES:
            return float(threshold)
    raise SystemExit(f"no threshold up to {GRID[-1]:g} noise levels leaves at most one false event a cycle")


def peer_events(name, threshold, counts):
    """Places of a peer's events, cycle by cycle: shorter arrays suit its caches."""
    found = [
        crossing_events(PEERS[name](counts[first : first + SAMPLES], threshold), threshold, DETECTOR_APART) + first
        for first in range(0, counts.size, SAMPLES)
    ]
    return np.concatenate(found)


def own_events(counts):
    """Onsets of the whole extraction."""
    return extract(captured(counts)).pulses.table["onset_sample"].to_numpy(np.int64)


def own_flags(counts):
    """The detection kernel alone: background, then whitening, bank and flags in one pass; the runs that left it."""
    capture = captured(counts)
    held, bounds = background.measure_background(capture, ExtractSettings()), (0, counts.size)
    return background.flagged_runs(counts, held, bounds, *bounds)
