"""One continuous record: background everywhere, and pulses of every source planted at their times."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from pdclass.pulses import Annotation, FloatArray, IntArray, WaveArray, window_samples
from pdclass.sim.circuit import ONSET_SHARE_OF_PEAK, Circuit, Source
from pdclass.sim.disturbers import disturber_signs, disturber_times
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.interference import background_wave
from pdclass.sim.phase import Activity, activity_phases
from pdclass.sim.ranges import CaptureRanges
from pdclass.sim.receiver import saturated, saturation_at
from pdclass.sim.source import source_spectrum

#: MAD of Gaussian noise of unit deviation.
_MAD_OF_GAUSSIAN = 0.6745
#: Spread of the logarithm of a source's width from pulse to pulse.
_WIDTH_JITTER = 0.08
#: Share of a discharge's pulses with the polarity of the other half cycle.
_STRAY_POLARITY = 0.1
_BATCH = 32
_NOISE_PROBES = 60_000


@dataclass(frozen=True)
class Timeline:
    """When a capture was taken: rate, length, segments and the phase at its first sample.

    Attributes
    ----------
    rate_hz : samples a second [Hz].
    samples : recorded samples, gaps not counted.
    segments : (segments, 2) first sample in the file, global index.
    clock : sample of the site's carriers and communication at global index 0: they do not begin with the visit.
    start_deg : phase of the reference voltage at the first sample [deg].
    deg_per_sample : advance of the phase [deg].
    """

    rate_hz: float
    samples: int
    segments: IntArray
    clock: int
    start_deg: float
    deg_per_sample: float

    def bounds(self) -> list[tuple[int, int]]:
        """First sample and one past the last of every segment."""
        starts = [*self.segments[:, 0].tolist(), self.samples]
        return list(pairwise(starts))

    def home(self, sample: FloatArray) -> IntArray:
        """Segment in which (fractional) samples of the file lie, same shape."""
        return np.searchsorted(self.segments[:, 0], sample, side="right").astype(np.int64) - 1

    def phase(self, sample: FloatArray) -> FloatArray:
        """Unwrapped phase at samples of the file [deg], same shape."""
        place = self.home(sample)
        clock = sample - self.segments[place, 0] + self.segments[place, 1]
        return np.asarray(self.start_deg + self.deg_per_sample * clock)


@dataclass(frozen=True)
class Plan:
    """Pulses of one source before they are planted, each array (pulses,).

    Attributes
    ----------
    onset : sample of the file at which the response is to begin, with its fraction.
    snr_db : peak over noise [dB].
    sign : +1 or -1.
    stretch : width over the source's nominal width.
    """

    onset: FloatArray
    snr_db: FloatArray
    sign: FloatArray
    stretch: FloatArray

    def batches(self) -> list[Plan]:
        """The same pulses, few at a time, so that memory stays small."""
        parts = [slice(first, first + _BATCH) for first in range(0, self.onset.size, _BATCH)]
        return [Plan(self.onset[p], self.snr_db[p], self.sign[p], self.stretch[p]) for p in parts]


def draw_timeline(ranges: CaptureRanges, circuit: Circuit, *, rng: np.random.Generator) -> Timeline:
    """Segments as the scenario says, and a phase at the first sample drawn evenly from the cycle."""
    rate_hz = circuit.receiver.rate_hz
    samples = round(ranges.duration_ms * 1e-3 * rate_hz)
    first = np.arange(ranges.segments) * (samples // ranges.segments)
    gap = round(ranges.gap_ms * 1e-3 * rate_hz)
    segments = np.stack([first, first + gap * np.arange(first.size)], axis=1).astype(np.int64)
    clock, start_deg = int(rng.integers(0, 1 << 32)), rng.uniform(0.0, 360.0)
    return Timeline(rate_hz, samples, segments, clock, start_deg, 360.0 * circuit.mains_hz / rate_hz)


def draw_signal(circuit: Circuit, timeline: Timeline, *, rng: np.random.Generator) -> WaveArray:
    """Noise and carriers of the whole record, (samples,) [V]; MAD/0.6745 of it is the circuit's noise."""
    parts = [
        background_wave(circuit.reception, timeline.clock + int(index), end - first, rng=rng)
        for (first, end), index in zip(timeline.bounds(), timeline.segments[:, 1], strict=True)
    ]
    signal = np.concatenate(parts)
    probe = signal[:: max(1, signal.size // _NOISE_PROBES)]
    deviation = np.median(np.abs(probe - np.median(probe))) / _MAD_OF_GAUSSIAN
    signal *= np.float32(circuit.noise_v / deviation)
    return signal


def draw_plan(source: Source, count: int, timeline: Timeline, *, rng: np.random.Generator) -> Plan:
    """Times, heights, polarities and widths of `count` pulses; a switching device has no more than its edges."""
    stretches = timeline.bounds()
    lengths = np.array([end - first for first, end in stretches])
    shares = rng.multinomial(count, lengths / lengths.sum())
    drawn = [
        _onsets(source, int(share), first, end, timeline, rng=rng)
        for (first, end), share in zip(stretches, shares, strict=True)
    ]
    onset = np.concatenate([onsets for onsets, _ in drawn])
    sign = rng.choice([-1.0, 1.0]) * np.concatenate([signs for _, signs in drawn])
    snr_db = rng.uniform(*source.snr_db, onset.size)
    return Plan(onset, snr_db, sign, np.exp(_WIDTH_JITTER * rng.standard_normal(onset.size)))


def _onsets(
    source: Source, count: int, first: int, end: int, timeline: Timeline, *, rng: np.random.Generator
) -> tuple[FloatArray, FloatArray]:
    """Onsets in one segment [samples of the file], sorted, and the signs that belong to them."""
    start_deg = float(timeline.phase(np.array([float(first)]))[0])
    if source.repetition is not None:
        deg_per_s = timeline.deg_per_sample * timeline.rate_hz
        times_s = disturber_times(
            source.repetition,
            (end - first) / timeline.rate_hz,
            count,
            start_deg=start_deg,
            deg_per_s=deg_per_s,
            rng=rng,
        )
        signs = disturber_signs(source.repetition, times_s, rng=rng)
        return np.minimum(first + times_s * timeline.rate_hz, end - 1), signs
    activity = Activity(None) if source.activity is None else source.activity
    span_deg = (end - first) * timeline.deg_per_sample
    found = activity_phases(activity, count, start_deg, span_deg, rng=rng)
    onset = np.clip(first + (found.phase_deg - start_deg) / timeline.deg_per_sample, first, end - 1)
    stray = np.where(rng.uniform(size=onset.size) < _STRAY_POLARITY, -1.0, 1.0)
    return onset, stray * np.sign(found.charge)


def plant(
    signal: WaveArray, circuit: Circuit, timeline: Timeline, plans: list[tuple[Source, Plan]]
) -> tuple[Annotation, ...]:
    """Add every response to the record (in place) and say where each begins, in the order of their onsets."""
    annotations = []
    for source, plan in plans:
        for batch in plan.batches():
            annotations += _plant_batch(signal, circuit, timeline, source, batch)
    return tuple(sorted(annotations, key=lambda planted: (planted.onset_sample, str(planted.label))))


def _plant_batch(
    signal: WaveArray, circuit: Circuit, timeline: Timeline, source: Source, plan: Plan
) -> list[Annotation]:
    s = laplace_grid()
    begin = plan.onset - source.delay_s * timeline.rate_hz
    places = np.floor(begin).astype(np.int64)
    late_s = LEAD_S + (begin - places) / timeline.rate_hz
    currents = np.array([source_spectrum(source.current.stretched(factor), s) for factor in plan.stretch])
    core = saturated(circuit.sensitivity, saturation_at(circuit.receiver, timeline.phase(plan.onset)))
    waves = to_samples(currents * source.response * core * np.exp(-s * late_s[:, None]), timeline.rate_hz)
    scales = circuit.noise_v * 10 ** (plan.snr_db / 20) / np.abs(waves).max(axis=1)
    waves *= (scales * plan.sign)[:, None]
    bounds = [timeline.bounds()[int(home)] for home in timeline.home(plan.onset)]
    for wave, place, inside in zip(waves, places, bounds, strict=True):
        _add(signal, wave, int(place), inside)
    return [
        _annotation(wave, int(place), inside, source, float(scale), circuit)
        for wave, place, inside, scale in zip(waves, places, bounds, scales, strict=True)
    ]


def _add(signal: WaveArray, response: FloatArray, place: int, bounds: tuple[int, int]) -> None:
    """Add what of the response lies within its segment."""
    first, end = max(place, bounds[0]), min(place + response.size, bounds[1])
    signal[first:end] += response[first - place : end - place].astype(np.float32)


def _annotation(
    response: FloatArray, place: int, bounds: tuple[int, int], source: Source, charge_c: float, circuit: Circuit
) -> Annotation:
    """The truth of one pulse; it begins where the noiseless response leaves 2 % of its peak or half the noise."""
    height = np.abs(response)
    peak = float(height.max())
    begun = int(np.argmax(height > max(ONSET_SHARE_OF_PEAK * peak, 0.5 * circuit.noise_v)))
    heard = int(np.flatnonzero(height > max(0.05 * peak, circuit.noise_v))[-1])
    onset = min(max(place + begun, bounds[0]), bounds[1] - 1)
    last = min(place + heard, onset + window_samples(circuit.receiver.rate_hz) - 1, bounds[1] - 1)
    return Annotation(
        onset_sample=onset,
        sample_count=max(1, last - onset + 1),
        label=source.label,
        basis="simulated",
        labelled_by="simulated",
        comment=f"planted {20 * np.log10(peak / circuit.noise_v):.1f} dB over the noise",
        family=source.family,
        distance_m=source.distance_m,
        charge_pc=None if source.label == "interference" else charge_c * 1e12,
    )
