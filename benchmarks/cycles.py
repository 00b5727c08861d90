"""Mains cycles for the benchmarks of extraction: noise, broadcast carriers, and pulses of known shape and onset.

The shapes are written down here and owe nothing to the synthetic world, so that the extraction cannot have been made
for them: fast ones that ring (near the sensor), smooth wide ones (after travel along a cable), damped oscillations.
"""

import numpy as np

from pdclass.pulses import Capture, Chain

RATE_HZ, SAMPLES, SIGMA = 100e6, 2_000_000, 20.0
PULSES, PULSE_SAMPLES = 200, 600
#: Frequency [Hz] and height [deviations of the noise] of amplitude-modulated carriers.
CARRIERS = (
    (0.153e6, 1.2),
    (0.774e6, 2.2),
    (1.089e6, 1.8),
    (1.413e6, 1.4),
    (5.975e6, 0.8),
    (9.41e6, 0.6),
    (15.28e6, 0.5),
)
_T = np.arange(PULSE_SAMPLES) / RATE_HZ


def _fast(rise_s, fall_s, ring_hz):
    return (np.exp(-_T / fall_s) - np.exp(-_T / rise_s)) * (1 + 0.5 * np.sin(2 * np.pi * ring_hz * _T))


def _wide(rise_s, fall_s):
    edge = np.convolve(np.exp(-_T / fall_s) - np.exp(-_T / rise_s), np.hamming(17))[:PULSE_SAMPLES]
    return edge


def _oscillation(fall_s, ring_hz):
    return np.exp(-_T / fall_s) * np.sin(2 * np.pi * ring_hz * _T)


#: Kind and shape, height 1.
SHAPES = [
    (kind, wave / np.abs(wave).max())
    for kind, wave in (
        ("fast, ringing", _fast(10e-9, 70e-9, 20e6)),
        ("fast, ringing", _fast(15e-9, 90e-9, 13e6)),
        ("smooth, wide", _wide(60e-9, 180e-9)),
        ("smooth, wide", _wide(90e-9, 280e-9)),
        ("smooth, wide", _wide(140e-9, 450e-9)),
        ("oscillating", _oscillation(0.25e-6, 7e6)),
        ("oscillating", _oscillation(0.4e-6, 4.5e6)),
    )
]
KINDS = tuple(dict.fromkeys(kind for kind, _ in SHAPES))


def background(rng, samples=SAMPLES):
    """Noise and carriers [count], each carrier modulated by a tone of its own."""
    t = np.arange(samples) / RATE_HZ
    signal = rng.normal(0.0, SIGMA, samples)
    for hz, height in CARRIERS:
        tone, phases = rng.uniform(200.0, 4000.0), rng.uniform(0, 2 * np.pi, 2)
        envelope = 1 + 0.5 * np.sin(2 * np.pi * tone * t + phases[0])
        signal += height * SIGMA * envelope * np.cos(2 * np.pi * hz * t + phases[1])
    return signal


def plant(signal, onsets, height, rng):
    """Add a pulse of a drawn shape and polarity, `height` deviations of the noise high, at every onset; its kinds."""
    chosen = rng.integers(0, len(SHAPES), len(onsets))
    for onset, number in zip(onsets, chosen, strict=True):
        signal[onset : onset + PULSE_SAMPLES] += height * SIGMA * rng.choice([-1.0, 1.0]) * SHAPES[number][1]
    return np.array([SHAPES[number][0] for number in chosen])


def cycle(height, seed, cycles=1):
    """Counts of some cycles with 200 pulses each, their onsets and kinds; height 0 = none."""
    rng = np.random.default_rng(seed)
    signal = background(rng, cycles * SAMPLES)
    slot = SAMPLES // PULSES
    onsets = np.arange(cycles * PULSES) * slot + rng.integers(500, slot - 1200, cycles * PULSES)
    kinds = plant(signal, onsets, height, rng) if height else np.array([])
    return counted(signal), onsets if height else onsets[:0], kinds


def counted(signal):
    """A signal as counts of a 14-bit digitiser."""
    return np.clip(np.rint(signal), -8192, 8191).astype(np.int16)


def captured(counts):
    """Counts as a capture."""
    chain = Chain(RATE_HZ, 1e-4, 14, mains_hz=50.0)
    return Capture(chain=chain, counts=counts, circuit="c", sensor="s", session="1", digest="0" * 64, name="cycle")


def burst_cycle(height, seed, kind, *, planted=True):
    """A cycle with 3 us bursts, five times as high as the pulses, every 10 us; pulses begin between the bursts.

    The bursts come every 10 us give or take 0.3 us, half of them with the other polarity. `kind` is `ringing` (a
    damped oscillation at 6 MHz that lasts the 3 us) or `noisy` (band-limited noise under a flat top).
    """
    rng = np.random.default_rng(seed)
    signal = background(rng)
    period, length = round(10e-6 * RATE_HZ), round(3e-6 * RATE_HZ)
    begins = np.arange(1, SAMPLES // period - 1) * period + rng.integers(-30, 31, SAMPLES // period - 2)
    for begin in begins:
        signal[begin : begin + length] += 5 * height * SIGMA * rng.choice([-1.0, 1.0]) * _burst(kind, length, rng)
    gaps = rng.choice(len(begins) - 1, PULSES, replace=False)
    room = begins[gaps + 1] - begins[gaps] - length
    onsets = begins[gaps] + length + np.floor(rng.uniform(0, 1, PULSES) * room).astype(int)
    if planted:
        plant(signal, onsets, height, rng)
    return counted(signal), onsets


def _burst(kind, length, rng):
    t = np.arange(length) / RATE_HZ
    if kind == "ringing":
        wave = np.exp(-t / 0.6e-6) * np.sin(2 * np.pi * 6e6 * t)
    else:
        wave = np.convolve(rng.normal(size=length + 8), np.hanning(9), "valid") * np.minimum(
            1, 20 * np.sin(np.pi * t / 3e-6)
        )
    return wave / np.abs(wave).max()
