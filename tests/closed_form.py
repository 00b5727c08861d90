"""Closed-form waves, a background of noise and carriers, and a capture of them."""

import numpy as np

from pdclass.pulses import Capture, Chain

RATE_HZ = 100e6
CARRIERS = ((0.198e6, 30), (0.693e6, 40), (0.909e6, 35), (6.07e6, 15))


def double_exponential(rise_s, fall_s, rate_hz=RATE_HZ, span_s=6e-6):
    t = np.arange(round(span_s * rate_hz)) / rate_hz
    wave = np.exp(-t / fall_s) - np.exp(-t / rise_s)
    return wave / np.abs(wave).max()


def damped_sine(frequency_hz, decay_s, rate_hz=RATE_HZ, span_s=6e-6):
    t = np.arange(round(span_s * rate_hz)) / rate_hz
    wave = np.exp(-t / decay_s) * np.sin(2 * np.pi * frequency_hz * t)
    return wave / np.abs(wave).max()


def background(rng, samples, *, sigma=20.0, carriers=CARRIERS, rate_hz=RATE_HZ):
    t = np.arange(samples) / rate_hz
    signal = rng.normal(0, sigma, samples)
    for frequency_hz, height in carriers:
        depth = 1 + 0.4 * np.sin(2 * np.pi * 1e3 * t + rng.uniform(0, 6))
        signal += height * depth * np.cos(2 * np.pi * frequency_hz * t + rng.uniform(0, 6))
    return signal


def as_capture(signal, *, rate_hz=RATE_HZ, chain=None, dtype=np.int16, **fields):
    counts = np.rint(signal).astype(dtype) if np.issubdtype(dtype, np.integer) else np.asarray(signal, dtype)
    chain = chain or Chain(rate_hz, 1e-4, 14, mains_hz=50.0)
    named = {"circuit": "Quay Road", "sensor": "strap 1", "session": "one", "digest": "d" * 64, "name": "record"}
    return Capture(chain=chain, counts=counts, **{**named, **fields})
