"""One pulse in its window, without extraction, and its features."""

import numpy as np

from pdclass.features import CATALOGUE, feature_table
from pdclass.pulses import Chain, PulseSet, typed_table, window_samples


def single(wave, *, rate_hz=100e6, height_v=1.0, noise_v=0.002, seed=0, band_hz=(0.1e6, 40e6), duration_us=3.0):
    """One pulse in its window with white noise, without extraction."""
    samples = window_samples(rate_hz)
    window = np.random.default_rng(seed).normal(0, noise_v, samples)
    lead = samples // 4
    window[lead : lead + wave.size] += height_v * wave[: samples - lead]
    table = typed_table({"duration_us": [duration_us], "peak_v": [height_v], "chain": [0]}, ["a" * 16])
    return PulseSet(window[None].astype(np.float32), (Chain(rate_hz, band_hz=band_hz),), table)


def features_of(pulses):
    """Values of the first pulse by name."""
    return {feature.name: value for feature, value in zip(CATALOGUE, feature_table(pulses)[0], strict=True)}
