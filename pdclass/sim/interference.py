"""What disturbs a record all the time: white and low-passed noise, broadcast carriers; and when converters switch.

Single impulses and converter bursts are sources like any other (`circuit`), so that they pass through the same
near end, sensor and digitiser as discharges.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.signal

from pdclass.pulses import FloatArray, WaveArray

_BLOCK = 16
_RASTER_HZ = 9e3
#: Short-wave broadcast bands [Hz] (International Telecommunication Union allotments, from memory).
_SHORT_WAVE_HZ = (
    (3.9e6, 4.0e6),
    (5.9e6, 6.2e6),
    (7.2e6, 7.45e6),
    (9.4e6, 9.9e6),
    (11.6e6, 12.1e6),
    (13.57e6, 13.87e6),
    (15.1e6, 15.8e6),
)


@dataclass(frozen=True)
class Carrier:
    """An amplitude-modulated broadcast carrier.

    Attributes
    ----------
    hz : frequency [Hz].
    amplitude : in units of the white noise's deviation.
    depth : modulation depth, 0 to 1.
    phase : at the first sample, in turns.
    tones_hz, tones : audio tones [Hz] and their (share, phase in turns).
    """

    hz: float
    amplitude: float
    depth: float
    phase: float
    tones_hz: tuple[float, ...]
    tones: tuple[tuple[float, float], ...]


@dataclass(frozen=True)
class Background:
    """Carriers and noise of one site, in units of the white noise's deviation.

    Attributes
    ----------
    carriers : every broadcast carrier.
    low_share : deviation of the low-passed noise relative to the white noise.
    low_hz : its corner [Hz].
    """

    carriers: tuple[Carrier, ...]
    low_share: float
    low_hz: float


def medium_wave_hz(channel: int) -> float:
    """Carrier frequency of a medium-wave channel, 0 to 119: 531 kHz to 1602 kHz every 9 kHz [Hz]."""
    return 531e3 + channel * _RASTER_HZ


def draw_carrier(amplitude: float, *, hz: float | None = None, rng: np.random.Generator) -> Carrier:
    """A carrier of the given amplitude; without a frequency seven in ten are medium, the rest long or short wave."""
    frequency = _draw_channel_hz(rng=rng) if hz is None else hz
    tones = tuple(float(tone) for tone in rng.uniform(100.0, 4000.0, 4))
    weights = rng.dirichlet(np.ones(4))
    phases = rng.uniform(0.0, 1.0, 4)
    pairs = tuple((float(weight), float(phase)) for weight, phase in zip(weights, phases, strict=True))
    return Carrier(frequency, amplitude, rng.uniform(0.2, 0.6), rng.uniform(0.0, 1.0), tones, pairs)


def _draw_channel_hz(*, rng: np.random.Generator) -> float:
    band = rng.uniform()
    if band < 0.7:
        return medium_wave_hz(int(rng.integers(0, 120)))
    if band < 0.8:
        return 153e3 + _RASTER_HZ * int(rng.integers(0, 15))
    low, high = _SHORT_WAVE_HZ[int(rng.integers(0, len(_SHORT_WAVE_HZ)))]
    return low + 5e3 * int(rng.integers(0, int((high - low) / 5e3) + 1))


def carrier_wave(carrier: Carrier, first: int, samples: int, rate_hz: float) -> WaveArray:
    """Samples of a carrier from a global index on, (samples,) in its own units.

    The envelope (audio below 4.5 kHz) is held for 16 samples, the oscillation is exact.
    """
    blocks = -(-samples // _BLOCK)
    start = first + _BLOCK * np.arange(blocks, dtype=np.float64)
    envelope = np.ones(blocks)
    for tone_hz, (share, phase) in zip(carrier.tones_hz, carrier.tones, strict=True):
        envelope += carrier.depth * share * np.cos(2 * np.pi * (start * (tone_hz / rate_hz) + phase))
    turns = np.mod(start * (carrier.hz / rate_hz) + carrier.phase, 1.0)
    step = np.arange(_BLOCK) * (2 * np.pi * carrier.hz / rate_hz)
    real = (carrier.amplitude * envelope * np.cos(2 * np.pi * turns)).astype(np.float32)
    imaginary = (carrier.amplitude * envelope * np.sin(2 * np.pi * turns)).astype(np.float32)
    wave = real[:, None] * np.cos(step).astype(np.float32)
    wave -= imaginary[:, None] * np.sin(step).astype(np.float32)
    return np.asarray(wave.reshape(-1)[:samples])


def background_wave(
    background: Background, first: int, samples: int, rate_hz: float, *, rng: np.random.Generator
) -> WaveArray:
    """Noise and carriers of a stretch, (samples,) float32 in units of the white noise's deviation."""
    wave = rng.standard_normal(samples, np.float32)
    if background.low_share > 0:
        pole = np.exp(-2 * np.pi * background.low_hz / rate_hz)
        gain = background.low_share * np.sqrt(1 - pole**2)
        drive = rng.standard_normal(samples, np.float32)
        low = scipy.signal.lfilter(np.array([gain], np.float32), np.array([1, -pole], np.float32), drive)
        wave += low
    for carrier in background.carriers:
        wave += carrier_wave(carrier, first, samples, rate_hz)
    return wave


def switching_times(duration_s: float, switching_hz: float, jitter: float, *, rng: np.random.Generator) -> FloatArray:
    """Instants at which a converter switches: two edges a period, with slowly varying duty and jitter [s], sorted.

    Parameters
    ----------
    duration_s : length of the stretch [s].
    switching_hz : switching frequency [Hz].
    jitter : standard deviation of each edge as a share of the period.
    """
    period = 1 / switching_hz
    starts = np.arange(-1, np.ceil(duration_s / period) + 1) * period + rng.uniform(0, period)
    duty = 0.5 + 0.35 * np.sin(2 * np.pi * (starts * rng.uniform(20.0, 60.0) + rng.uniform()))
    edges = np.concatenate([starts, starts + duty * period])
    edges = np.sort(edges + jitter * period * rng.standard_normal(edges.size))
    return np.asarray(edges[(edges >= 0) & (edges < duration_s)])
