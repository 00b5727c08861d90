"""What disturbs a record all the time: noise, broadcast carriers, carrier communication on mains lines.

Shares and heights are those at the digitiser, in units of the deviation of its white analogue noise after the
anti-alias filter; a record scales the whole to the circuit's noise. What is drawn for a site (`Background`) becomes
what its sensor receives (`Reception`): the spectrum of man-made noise and the relative heights of carriers follow the
response of the strap's loop, near end and chain together. Single impulses and bursts are sources like any other
(`disturbers`): they pass through the same network as discharges.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Literal

import numpy as np
import scipy.fft
import scipy.signal
from numpy.typing import NDArray

from pdclass.pulses import FloatArray, WaveArray
from pdclass.sim.grid import ComplexArray, laplace_grid
from pdclass.sim.receiver import Receiver, anti_alias_response, sensor_response

Environment = Literal["city", "residential", "rural", "quiet-rural"]

#: c and d of F_am = c - d log10(f in MHz), in dB over k T0 b (Recommendation ITU-R P.372, man-made noise).
MAN_MADE: dict[Environment, tuple[float, float]] = {
    "city": (76.8, 27.7),
    "residential": (72.5, 27.7),
    "rural": (67.2, 27.7),
    "quiet-rural": (53.6, 28.6),
}
#: Length of the filter that shapes the noise [s]; its inverse is what the spectrum resolves.
_SHAPE_S = 40e-6
#: Images of the sampler that white noise folds back from.
_FOLDS = 4
#: Man-made noise rises no further below this frequency [Hz]: what lies there, the sensor hardly passes.
_LOWEST_HZ = 10e3
#: Samples of one transform of the noise, and transforms made at once.
_NOISE_BLOCK = 1 << 15
_BATCH = 4
_BLOCK = 16
_ENVELOPE = 256
#: Samples for which carriers are made at once.
_STRETCH = 1 << 16
#: Communication is made at least so finely [Hz], then interpolated.
_SLOW_HZ = 4e6
_REACH = 4


@dataclass(frozen=True)
class Noise:
    """The noise of a site and its digitiser, in units of the white analogue noise's deviation after the filter.

    Attributes
    ----------
    converter : deviation of the converter's own white noise, which no filter shapes, >= 0.
    low_share, low_hz : deviation of low-passed noise, >= 0, and its corner [Hz].
    field_share : deviation of the man-made noise that the strap's loop picks up, >= 0.
    environment : its kind of place.
    """

    converter: float
    low_share: float
    low_hz: float
    field_share: float
    environment: Environment


@dataclass(frozen=True)
class Carrier:
    """An amplitude-modulated broadcast carrier.

    Attributes
    ----------
    hz : frequency [Hz].
    amplitude : its peak without modulation.
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
class Communication:
    """Carrier communication on mains lines: frames of symbols, switched on and off.

    Attributes
    ----------
    kind : `ofdm`, every tone at once with a phase of its own in each symbol, or `fsk`, one of the tones a symbol.
    tones_hz : frequencies [Hz].
    gains : their amplitudes relative to each other.
    deviation : of the sum while it is on.
    symbol_s : duration of a symbol [s].
    on_s, period_s : duration of a frame and time from frame to frame [s].
    start_s : of some frame, on the clock of sample 0 [s].
    ramp_s : of the raised cosine at both ends of a frame [s].
    seed : decides what is sent.
    """

    kind: Literal["ofdm", "fsk"]
    tones_hz: tuple[float, ...]
    gains: tuple[float, ...]
    deviation: float
    symbol_s: float
    on_s: float
    period_s: float
    start_s: float
    ramp_s: float
    seed: int


@dataclass(frozen=True)
class Background:
    """What is drawn for a site: its noise, carriers and communication."""

    noise: Noise
    carriers: tuple[Carrier, ...] = ()
    communication: tuple[Communication, ...] = ()


@dataclass(frozen=True)
class Reception:
    """What a sensor receives of a site's background.

    Attributes
    ----------
    rate_hz : samples a second [Hz].
    shape : filter that makes the noise out of white noise of unit deviation, (taps,) float32.
    carriers, communication : with the heights that they have at the digitiser.
    """

    rate_hz: float
    shape: WaveArray
    carriers: tuple[Carrier, ...]
    communication: tuple[Communication, ...]


def man_made_noise_db(environment: Environment, hz: FloatArray) -> FloatArray:
    """Median man-made noise F_am over k T0 b [dB], same shape as `hz` (ITU-R P.372, 0.3 to 250 MHz)."""
    c, d = MAN_MADE[environment]
    return np.asarray(c - d * np.log10(hz / 1e6))


def noise_field_db(environment: Environment, hz: FloatArray, bandwidth_hz: float = 1.0) -> FloatArray:
    """Strength of that noise's electric field [dB over 1 uV/m], same shape as `hz`.

    E_n = F_a + 20 log10 f(MHz) + 10 log10 b - 95.5 for a short vertical monopole (ITU-R P.372, from memory).
    """
    slope = 20 * np.log10(hz / 1e6) + 10 * np.log10(bandwidth_hz)
    return np.asarray(man_made_noise_db(environment, hz) + slope - 95.5)


def medium_wave_hz(channel: int, raster_hz: float = 9e3) -> float:
    """Carrier frequency of a medium-wave channel [Hz].

    Raster 9 kHz: 0 to 119, 531 to 1602 kHz (Europe, Africa, Asia); 10 kHz: 0 to 117, 530 to 1700 kHz (Americas).
    """
    return (531e3 if raster_hz == 9e3 else 530e3) + channel * raster_hz


def received(background: Background, receiver: Receiver, field: ComplexArray) -> Reception:
    """A site's background as it comes out of a receiver.

    Parameters
    ----------
    background : of the site.
    receiver : its sensor and digitiser.
    field : a distant current's field to sampled voltage on `laplace_grid()`, (5001,), in any unit: a loop's voltage
        grows with frequency times field strength.

    The carriers keep the power that was drawn for all of them; who gets how much of it follows the response.
    """
    carriers = background.carriers
    weights = np.array([one.amplitude for one in carriers]) * _gain_at(field, np.array([one.hz for one in carriers]))
    drawn = np.sqrt(sum(one.amplitude**2 for one in carriers))
    heights = weights * (drawn / np.sqrt((weights**2).sum())) if carriers else weights
    return Reception(
        rate_hz=receiver.rate_hz,
        shape=noise_shape(background.noise, receiver, field),
        carriers=tuple(replace(one, amplitude=float(h)) for one, h in zip(carriers, heights, strict=True)),
        communication=tuple(_sensed(one, receiver) for one in background.communication),
    )


def noise_shape(noise: Noise, receiver: Receiver, field: ComplexArray) -> WaveArray:
    """Filter that makes the noise of a site out of white noise of unit deviation, (taps,) float32, symmetric."""
    taps = scipy.fft.next_fast_len(round(_SHAPE_S * receiver.rate_hz), real=True)
    hz = scipy.fft.rfftfreq(taps, 1 / receiver.rate_hz)
    density = noise_density(noise, receiver, field, hz)
    shape = np.fft.fftshift(scipy.fft.irfft(np.sqrt(density), taps)) * scipy.signal.windows.hann(taps, sym=False)
    deviation = np.sqrt(1 + noise.converter**2 + noise.low_share**2 + noise.field_share**2)
    return np.asarray(shape * (deviation / np.sqrt((shape**2).sum())), np.float32)


def noise_density(noise: Noise, receiver: Receiver, field: ComplexArray, hz: FloatArray) -> FloatArray:
    """Power of the sampled noise at evenly spaced frequencies from 0 to half the rate [Hz], same shape.

    Its mean over them is the variance; what the anti-alias filter leaves above half the rate is folded back.
    """

    def white(at_hz: FloatArray) -> FloatArray:
        s = np.asarray(2j * np.pi * at_hz, np.complex128)
        return np.asarray(np.abs(anti_alias_response(receiver.anti_alias, s)) ** 2)

    def low(at_hz: FloatArray) -> FloatArray:
        return np.asarray(white(at_hz) / (1 + (at_hz / noise.low_hz) ** 2))

    def man_made(at_hz: FloatArray) -> FloatArray:
        strength_db = noise_field_db(noise.environment, np.maximum(at_hz, _LOWEST_HZ))
        return np.asarray(10 ** (strength_db / 10) * _gain_at(field, at_hz) ** 2)

    parts = ((1.0, white), (noise.low_share, low), (noise.field_share, man_made))
    folded = [(share, _folded(part, hz, receiver.rate_hz)) for share, part in parts if share > 0]
    return np.asarray(noise.converter**2 + sum(share**2 / density.mean() * density for share, density in folded))


def background_wave(reception: Reception, first: int, samples: int, *, rng: np.random.Generator) -> WaveArray:
    """Noise, carriers and communication of a stretch, (samples,) float32.

    Parameters
    ----------
    first : global index of the stretch's first sample: carriers and frames go on over a gap, noise is drawn anew.
    samples : of the stretch.
    """
    wave = noise_wave(reception.shape, samples, rng=rng)
    for begin in range(0, samples, _STRETCH):
        part = wave[begin : begin + _STRETCH]
        if reception.carriers:
            part += carriers_wave(reception.carriers, first + begin, part.size, reception.rate_hz)
        for communication in reception.communication:
            part += communication_wave(communication, first + begin, part.size, reception.rate_hz)
    return wave


def noise_wave(shape: WaveArray, samples: int, *, rng: np.random.Generator) -> WaveArray:
    """White noise of unit deviation through a filter, (samples,) float32.

    Blocks of white noise that overlap by the filter are filtered in the frequency domain; what wraps round in each
    is left out, so that no border is seen.
    """
    fresh = _NOISE_BLOCK - shape.size + 1
    blocks = -(-samples // fresh)
    response = scipy.fft.rfft(shape, _NOISE_BLOCK)
    wave = np.empty((blocks, fresh), np.float32)
    tail = rng.standard_normal(shape.size - 1, np.float32)
    for first in range(0, blocks, _BATCH):
        count = min(_BATCH, blocks - first)
        white = np.concatenate([tail, rng.standard_normal(count * fresh, np.float32)])
        tail = white[count * fresh :]
        overlapping = np.lib.stride_tricks.sliding_window_view(white, _NOISE_BLOCK)[::fresh]
        spectra = scipy.fft.rfft(overlapping, axis=1)
        spectra *= response
        wave[first : first + count] = scipy.fft.irfft(spectra, _NOISE_BLOCK, axis=1)[:, shape.size - 1 :]
    return wave.reshape(-1)[:samples]


def carriers_wave(carriers: Sequence[Carrier], first: int, samples: int, rate_hz: float) -> WaveArray:
    """Sum of carriers from a global index on, (samples,) float32 in their own units.

    Every oscillation is exact at each 16th sample of the global count and turned from there; its envelope (audio
    below 4.5 kHz) is held for 16 samples and interpolated between every 256th.
    """
    lowest = first // _ENVELOPE * _ENVELOPE
    blocks = -(-(first - lowest + samples) // _BLOCK)
    start = lowest + _BLOCK * np.arange(blocks, dtype=np.float64)
    coarse = lowest + _ENVELOPE * np.arange(blocks * _BLOCK // _ENVELOPE + 2, dtype=np.float64)
    step = np.arange(_BLOCK) / rate_hz
    begins = np.empty((blocks, 2 * len(carriers)), np.float32)
    turning = np.empty((2 * len(carriers), _BLOCK), np.float32)
    for number, carrier in enumerate(carriers):
        height = carrier.amplitude * np.interp(start, coarse, _envelope(carrier, coarse / rate_hz))
        angle = (2 * np.pi * np.mod(start * (carrier.hz / rate_hz) + carrier.phase, 1.0)).astype(np.float32)
        begins[:, 2 * number] = height * np.cos(angle)
        begins[:, 2 * number + 1] = -height * np.sin(angle)
        turning[2 * number] = np.cos(2 * np.pi * carrier.hz * step)
        turning[2 * number + 1] = np.sin(2 * np.pi * carrier.hz * step)
    # no matrix product: its last bits depend on the number of threads
    wave = np.einsum("nk,kj->nj", begins, turning).reshape(-1)
    return np.asarray(wave[first - lowest : first - lowest + samples])


def communication_wave(communication: Communication, first: int, samples: int, rate_hz: float) -> WaveArray:
    """Samples of frames from a global index on, (samples,) in their own units.

    Made on a coarser clock that starts at global index 0, at 4 MHz or more, and interpolated.
    """
    ratio = max(1, int(rate_hz // _SLOW_HZ))
    lowest = first // ratio - _REACH
    counts = np.arange(lowest, (first + samples) // ratio + _REACH + 2, dtype=np.float64)
    coarse = _coarse_wave(communication, counts, ratio / rate_hz)
    if not coarse.any():
        return np.zeros(samples, np.float32)
    fine = scipy.signal.upfirdn(_interpolator(ratio), coarse, ratio)
    begin = first - lowest * ratio + _REACH * ratio
    return np.asarray(fine[begin : begin + samples], np.float32)


def _envelope(carrier: Carrier, time_s: FloatArray) -> FloatArray:
    envelope = np.ones_like(time_s)
    for tone_hz, (share, phase) in zip(carrier.tones_hz, carrier.tones, strict=True):
        envelope += carrier.depth * share * np.cos(2 * np.pi * (time_s * tone_hz + phase))
    return envelope


def _gain_at(field: ComplexArray, hz: FloatArray) -> FloatArray:
    return np.asarray(np.interp(hz, laplace_grid().imag / (2 * np.pi), np.abs(field), right=0.0))


def _folded(density: Callable[[FloatArray], FloatArray], hz: FloatArray, rate_hz: float) -> FloatArray:
    """What a sampler makes of a density: itself and its images round multiples of the rate."""
    images = [density(fold * rate_hz + side * hz) for fold in range(1, _FOLDS) for side in (1, -1)]
    return np.asarray(density(hz) + np.sum(images, axis=0))


def _sensed(communication: Communication, receiver: Receiver) -> Communication:
    """The same with the gains that the sensor leaves to its tones; the deviation is that at the digitiser."""
    tones = 2j * np.pi * np.array(communication.tones_hz)
    heard = np.array(communication.gains) * np.abs(sensor_response(receiver, tones))
    return replace(communication, gains=tuple(float(gain) for gain in heard / np.sqrt((heard**2).mean())))


def _frames(communication: Communication, time_s: FloatArray) -> WaveArray:
    """Envelope of the frames, 0 to 1."""
    into = np.mod(time_s - communication.start_s, communication.period_s)
    place = np.clip(np.minimum(into, communication.on_s - into) / communication.ramp_s, 0.0, 1.0)
    return np.asarray(0.5 - 0.5 * np.cos(np.pi * place), np.float32)


def _coarse_wave(communication: Communication, counts: FloatArray, step_s: float) -> WaveArray:
    """Frames at counts of a coarse clock; every symbol depends on its number alone, whoever asks for it."""
    time_s = counts * step_s
    wave = _frames(communication, time_s)
    number = np.floor(time_s / communication.symbol_s).astype(np.int64)
    for part in np.split(np.arange(time_s.size), np.flatnonzero(np.diff(number)) + 1):
        if wave[part].any():
            wave[part] *= _symbol(communication, int(number[part[0]]), time_s[part], step_s)
    return wave


def _symbol(communication: Communication, number: int, time_s: FloatArray, step_s: float) -> WaveArray:
    rng = np.random.default_rng([communication.seed, number + 1])
    tones = np.array(communication.tones_hz)
    gains = communication.deviation * np.sqrt(2) * np.array(communication.gains)
    if communication.kind == "fsk":
        sent = int(rng.integers(0, tones.size))
        return np.asarray(gains[sent] * np.cos(2 * np.pi * np.mod(tones[sent] * time_s, 1.0)), np.float32)
    begin = tones * (time_s[0] - number * communication.symbol_s) + rng.integers(0, 4, tones.size) / 4
    phasors = np.asarray(gains / np.sqrt(tones.size) * np.exp(2j * np.pi * np.mod(begin, 1.0)), np.complex64)
    longest = round(communication.symbol_s / step_s) + 2
    turning = _turning(communication.tones_hz, step_s, longest)[:, : time_s.size]
    return np.asarray(np.einsum("k,kj->j", phasors, turning).real)


@lru_cache(maxsize=4)
def _turning(tones_hz: tuple[float, ...], step_s: float, steps: int) -> NDArray[np.complex64]:
    """Phasors of tones, (tones, steps)."""
    turns = np.mod(np.outer(tones_hz, np.arange(steps) * step_s), 1.0)
    return np.asarray(np.exp(np.asarray(2j * np.pi * turns, np.complex64)), np.complex64)


@lru_cache(maxsize=16)
def _interpolator(ratio: int) -> WaveArray:
    kernel = scipy.signal.firwin(2 * _REACH * ratio + 1, 1 / ratio, window=("kaiser", 6.0)) if ratio > 1 else None
    if kernel is None:
        kernel = np.zeros(2 * _REACH + 1)
        kernel[_REACH] = 1.0
    return np.asarray(kernel * ratio, np.float32)
