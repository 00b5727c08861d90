"""Pulses made ready for measuring: analysis band and rate, carriers reduced, own samples marked; batch by batch."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.features.carriers import fitted_tones, without_tones
from pdclass.features.kernels import median, median_size, place_of_largest
from pdclass.features.transforms import spectra, waves_of
from pdclass.pulses import ONSET_SHARE, WINDOW_S, Chain, FloatArray, IntArray, WaveArray

ANALYSIS_BAND_HZ = (0.1e6, 25e6)
ANALYSIS_RATE_HZ = 100e6
SAMPLES = round(WINDOW_S * ANALYSIS_RATE_HZ)
ONSET = round(ONSET_SHARE * SAMPLES)
STEP_NS = 1e9 / ANALYSIS_RATE_HZ
#: What lies just before the onset may already belong to the pulse.
GUARD = 20
#: Spectra of the own samples and of the noise have this many samples; the band's bins and their frequencies.
SPECTRUM_FFT = 2048
_BINS_HZ = np.arange(SPECTRUM_FFT // 2 + 1) * ANALYSIS_RATE_HZ / SPECTRUM_FFT
BAND = slice(*np.searchsorted(_BINS_HZ, (ANALYSIS_BAND_HZ[0], np.nextafter(ANALYSIS_BAND_HZ[1], np.inf))).tolist())
BAND_HZ = _BINS_HZ[BAND]
#: The smallest share of a window that must be recorded.
_LEAST_KNOWN = 4
#: A pulse of which so few samples were recorded, though it goes on, is not measured as a whole.
_SHORTEST_RECORD = 100
#: An excursion of so many noise levels before the onset is another event.
_BUSY_LEVELS = 9.0
_BUSY_MARGIN = 30
#: The noise is not known from fewer samples than these.
_SHORTEST_QUIET = 100
_SPECTRUM_SMOOTHING = 33
#: The median of the size of normal noise.
_MEDIAN_SIZE = 0.6744898


@dataclass(frozen=True)
class Windows:
    """Pulses ready for measuring, one row a pulse; polarity and gain are gone (each peak is +1).

    Attributes
    ----------
    wave : (pulses, SAMPLES) carriers reduced, in units of the peak.
    raw : (pulses, SAMPLES) the same with its carriers.
    end : (pulses,) one past the last of the pulse's own samples, which begin at `ONSET`.
    last : (pulses,) one past the last recorded sample.
    peak : (pulses,) place of the largest excursion among the own samples.
    height_v : (pulses,) the peak that was made 1, with its sign [V].
    noise : (pulses,) noise level beside the pulse, in units of the peak; NaN without a quiet stretch before it.
    noise_power : (pulses, bins) noise spectrum scaled to the own samples, on the grid of `own_power`; NaN likewise.
    reach_hz : (pulses,) highest frequency that the chain carries [Hz].
    low_hz : (pulses,) lower corner of the chain [Hz]; NaN = unknown.
    """

    wave: WaveArray
    raw: WaveArray
    end: IntArray
    last: IntArray
    peak: IntArray
    height_v: FloatArray
    noise: FloatArray
    noise_power: WaveArray
    reach_hz: FloatArray
    low_hz: FloatArray

    def __len__(self) -> int:
        return len(self.wave)

    @property
    def snr_db(self) -> FloatArray:
        """Peak over noise after the carriers are reduced [dB], (pulses,); NaN where the noise is unknown."""
        known = np.where(self.noise > 0, self.noise, np.nan)
        return np.asarray(-20 * np.log10(known))

    @property
    def cut_short(self) -> NDArray[np.bool_]:
        """Where the record ends within the pulse's own samples and less than 1 us after its onset, (pulses,)."""
        return np.asarray((self.end == self.last) & (self.last - ONSET < _SHORTEST_RECORD))

    @cached_property
    def own(self) -> WaveArray:
        """The own samples with a short lead, (pulses, SPECTRUM_FFT), faded out so that the cut adds nothing."""
        return _own(self.wave, self.end)

    @cached_property
    def own_spectrum(self) -> NDArray[np.complex64]:
        """Spectrum of the own samples, (pulses, SPECTRUM_FFT // 2 + 1)."""
        return spectra(self.own, SPECTRUM_FFT)

    @cached_property
    def own_power(self) -> WaveArray:
        """Power of the own samples, (pulses, SPECTRUM_FFT // 2 + 1); `BAND` are the bins of the analysis band."""
        return _power(self.own_spectrum.view(np.float32))

    def take(self, places: NDArray[np.intp] | NDArray[np.bool_]) -> Windows:
        """Some of the pulses."""
        return Windows(*(getattr(self, field.name)[places] for field in fields(self)))


def chain_band_hz(chains: Sequence[Chain]) -> FloatArray:
    """Lowest and highest frequency that chains carry [Hz], (2, chains); NaN = an unknown lower corner.

    The highest is the upper corner, and at most 0.4 of the rate (anti-alias).
    """
    bands = [chain.band_hz or (np.nan, np.inf) for chain in chains]
    return np.array([(low, min(high, 0.4 * chain.rate_hz)) for (low, high), chain in zip(bands, chains, strict=True)]).T


def counting_noise_v(chains: Sequence[Chain]) -> FloatArray:
    """Noise that rounding to whole counts adds within the analysis band [V], (chains,); 0 = size of a count unknown.

    volts_per_count/√12 for white noise up to half the rate, of which the low-pass keeps a share. The median size of
    a pre-trigger that mostly stands on one count would tell of less.
    """
    found = np.zeros(len(chains))
    for place, chain in enumerate(chains):
        top_hz = chain.rate_hz / 2
        kept = np.exp(-np.log(2) * (np.linspace(0, top_hz, 257) / ANALYSIS_BAND_HZ[1]) ** 2).mean()
        found[place] = abs(chain.volts_per_count or 0.0) * np.sqrt(kept / 12)
    return found


def prepared(
    waves_v: WaveArray, duration_us: FloatArray, reach_hz: FloatArray, low_hz: FloatArray, least_v: FloatArray
) -> tuple[Windows, IntArray]:
    """Make stored windows ready for measuring, and say which: those with nothing to measure are left out.

    Parameters
    ----------
    waves_v : (pulses, samples) 20 us windows with the onset a quarter in [V]; NaN = not recorded.
    duration_us : (pulses,) length of the own samples [us]; NaN or not positive = to the end of the window.
    reach_hz, low_hz : (pulses,) what their chains carry, as of `chain_band_hz`.
    least_v : (pulses,) the noise is no lower than this, as of `counting_noise_v` [V].
    """
    samples = waves_v.shape[1]
    filled, known, first, last, slope = _filled(np.ascontiguousarray(waves_v, np.float32))
    first, last = (np.rint(edge / samples * SAMPLES).astype(np.int64) for edge in (first, last))
    length = np.where(duration_us > 0, np.rint(duration_us * ANALYSIS_RATE_HZ / 1e6), SAMPLES)
    end = np.minimum(np.maximum(ONSET + length, ONSET + 8), last).astype(np.int64)
    rows = np.flatnonzero((known >= samples // _LEAST_KNOWN) & (end > ONSET + 4) & (first <= ONSET))
    if rows.size < len(filled):
        filled, slope = filled[rows], slope[rows]
    raw = _to_analysis_band(filled, slope)
    wave, start, stop, (level, noise_v) = _background(raw, first[rows], least_v[rows])
    peak, height_v, before = _scaled(wave, raw, start, stop, end[rows], level)
    measurable = height_v != 0
    noise = noise_v / np.where(measurable, np.abs(height_v), np.nan)
    share = np.where(np.isfinite(noise), (end[rows] - ONSET + GUARD) / np.maximum(stop - start, 1), np.nan)
    noise_power = _smoothed_power(spectra(before, SPECTRUM_FFT).view(np.float32), share)
    places = end[rows], last[rows], peak
    windows = Windows(wave, raw, *places, height_v, noise, noise_power, reach_hz[rows], low_hz[rows])
    return (windows, rows) if measurable.all() else (windows.take(measurable), rows[measurable])


@compiled
def _filled(
    waves: WaveArray,
) -> tuple[WaveArray, IntArray, IntArray, IntArray, FloatArray]:  # pragma: no cover - compiled
    """Waves on the line through their ends, so that the ends do not ring: they, what is known of them, the line's rise.

    Samples that were not recorded become the median of those that were. Returns (waves, samples), and per wave the
    number of recorded samples, the first, one past the last, and by how much the line rises over the window.
    """
    rows, samples = waves.shape
    filled, rise = np.zeros((rows, samples), np.float32), np.zeros(rows)
    known, first, last = np.zeros(rows, np.int64), np.zeros(rows, np.int64), np.zeros(rows, np.int64)
    edge = max(4, samples // 200)
    for r in range(rows):
        recorded = np.int32(0)
        for i in range(samples):
            recorded += np.int32(abs(waves[r, i]) < np.inf)
        known[r] = recorded
        if recorded == 0:
            continue
        first[r], last[r] = 0, samples
        wave = waves[r]
        if recorded < samples:
            wave = waves[r].copy()
            first[r], last[r] = _fill(wave)
        begin, finish = np.float64(wave[:edge].mean()), np.float64(wave[samples - edge :].mean())
        rise[r] = finish - begin
        for i in range(samples):
            filled[r, i] = wave[i] - (begin + rise[r] * (i / samples))
    return filled, known, first, last, rise


@compiled
def _fill(wave: WaveArray) -> tuple[int, int]:  # pragma: no cover - compiled
    """Put the median where nothing was recorded; the first recorded sample, and one past the last."""
    recorded = np.abs(wave) < np.inf
    middle = np.float32(median(wave[recorded]))
    first, last = wave.size, 0
    for i in range(wave.size):
        if recorded[i]:
            first, last = min(first, i), i + 1
        else:
            wave[i] = middle
    return first, last


def _to_analysis_band(filled: WaveArray, rise: FloatArray) -> WaveArray:
    """Waves at the analysis rate, low-passed smoothly (Gaussian, -3 dB at the band's upper edge), their line put back.

    The change of rate is by Fourier series; the level of the waves is lost.
    """
    samples = filled.shape[1]
    spectrum = spectra(filled, samples)[:, : SAMPLES // 2 + 1]
    frequency_hz = np.arange(spectrum.shape[1]) / WINDOW_S
    gain = np.exp(-0.5 * np.log(2) * (frequency_hz / ANALYSIS_BAND_HZ[1]) ** 2) * (SAMPLES / samples)
    spectrum *= gain.astype(np.float32)
    raw = waves_of(spectrum, SAMPLES)
    _put_back(raw, rise)
    return raw


@compiled
def _put_back(waves: WaveArray, rise: FloatArray) -> None:  # pragma: no cover - compiled
    """Add to each wave a line from 0 that rises by so much over the window."""
    for r in range(len(waves)):
        step = np.float32(rise[r] / SAMPLES)
        for i in range(SAMPLES):
            waves[r, i] += step * np.float32(i)


def _background(
    raw: WaveArray, first: IntArray, least_v: FloatArray
) -> tuple[WaveArray, IntArray, IntArray, FloatArray]:
    """The waves without carriers, the quiet stretch before each onset (start, stop), its level and noise (2, pulses).

    Carriers are fitted to the whole pre-trigger; where another event then stands out of what is left, to its
    longest stretch without one. The stretch is empty where that is too short to know anything from.
    """
    start, stop = np.minimum(first + GUARD, ONSET - GUARD), np.full(len(raw), ONSET - GUARD)
    wave = without_tones(raw, fitted_tones(raw, start, stop))
    level, begin, length = _quiet(wave, start, stop, least_v)
    busy = np.flatnonzero(length < stop - start)
    start, stop = start + begin, start + begin + length
    if busy.size:
        again = raw[busy]
        left = without_tones(again, fitted_tones(again, start[busy], stop[busy]))
        wave[busy] = left
        beside = np.where(length > 0, start, first)[busy]
        level[:, busy] = _quiet(left, beside, np.where(length > 0, stop, ONSET)[busy], least_v[busy])[0]
    level[1, length < _SHORTEST_QUIET] = np.nan
    return wave, start, stop, level


@compiled
def _quiet(
    waves: WaveArray, start: IntArray, stop: IntArray, least: FloatArray
) -> tuple[FloatArray, IntArray, IntArray]:  # pragma: no cover - compiled
    """Level and noise of stretches, (2, rows), and their longest parts without an event (beginning, length).

    The noise is `least` at the least. A margin beside each excursion is left out, too; a part is empty where it is
    shorter than 100 samples.
    """
    rows = len(waves)
    level, begin, length = np.zeros((2, rows)), np.zeros(rows, np.int64), np.zeros(rows, np.int64)
    for r in range(rows):
        before = waves[r, start[r] : stop[r]]
        if not before.size:
            continue
        level[0, r] = median(before)
        deviation = before - np.float32(level[0, r])
        level[1, r] = max(median_size(deviation) / _MEDIAN_SIZE, least[r])
        limit, loud = np.float32(_BUSY_LEVELS * level[1, r]), np.int32(0)
        for i in range(before.size):
            loud += np.int32(abs(deviation[i]) > limit)
        length[r] = before.size
        if loud:
            begin[r], length[r] = _widest_gap(deviation, float(limit))
        if length[r] < _SHORTEST_QUIET:
            begin[r], length[r] = 0, 0
    return level, begin, length


@compiled
def _widest_gap(deviation: WaveArray, limit: float) -> tuple[int, int]:  # pragma: no cover - compiled
    """Beginning and length of the widest gap between excursions, less the margin beside each."""
    begin, length, former = 0, 0, -_BUSY_MARGIN
    for i in range(deviation.size + 1):
        here = i if i < deviation.size else i + _BUSY_MARGIN
        if (i == deviation.size or abs(deviation[i]) > limit) and here - former - 2 * _BUSY_MARGIN > length:
            begin, length = former + _BUSY_MARGIN, here - former - 2 * _BUSY_MARGIN
        if i < deviation.size and abs(deviation[i]) > limit:
            former = i
    return begin, length


@compiled
def _scaled(
    wave: WaveArray, raw: WaveArray, start: IntArray, stop: IntArray, end: IntArray, level: FloatArray
) -> tuple[IntArray, FloatArray, WaveArray]:  # pragma: no cover - compiled
    """Bring waves to level 0 and peak 1 in place: the peak, its height [V], and the quiet samples about their mean."""
    rows = len(wave)
    peak, height, before = np.zeros(rows, np.int64), np.zeros(rows), np.zeros((rows, ONSET), np.float32)
    for r in range(rows):
        earliest, base = ONSET - GUARD // 2, np.float32(level[r])
        peak[r] = earliest + place_of_largest(wave[r, earliest : end[r]] - base)
        height[r] = wave[r, peak[r]] - base
        if height[r] == 0:
            continue
        scale = np.float32(1 / height[r])
        for i in range(SAMPLES):
            wave[r, i] = (wave[r, i] - base) * scale
            raw[r, i] = (raw[r, i] - base) * scale
        mean = np.float64(0.0)
        for i in range(start[r], stop[r]):
            mean += wave[r, i]
        mean /= max(stop[r] - start[r], 1)
        for i in range(start[r], stop[r]):
            before[r, i - start[r]] = wave[r, i] - np.float32(mean)
    return peak, height, before


@compiled
def _smoothed_power(spectrum: WaveArray, share: FloatArray) -> WaveArray:  # pragma: no cover - compiled
    """Power of spectra given as pairs of floats, times a share each, as a running mean over 33 bins, mirrored."""
    rows, bins = len(spectrum), spectrum.shape[1] // 2
    half = _SPECTRUM_SMOOTHING // 2
    smooth = np.empty((rows, bins), np.float32)
    power, total = np.empty(bins + 2 * half, np.float32), np.empty(bins + 2 * half, np.float32)
    for r in range(rows):
        for k in range(bins):
            real, imag = spectrum[r, 2 * k], spectrum[r, 2 * k + 1]
            power[half + k] = real * real + imag * imag
        for k in range(half):
            power[half - 1 - k], power[half + bins + k] = power[half + 1 + k], power[half + bins - 2 - k]
        total[:] = power
        for reach in (1, 2, 4, 8, 16):
            for k in range(total.size - reach):
                total[k] += total[k + reach]
        scale = np.float32(share[r] / _SPECTRUM_SMOOTHING)
        for k in range(bins):
            smooth[r, k] = (total[k] + power[k + 2 * half]) * scale
    return smooth


@compiled
def _power(spectrum: WaveArray) -> WaveArray:  # pragma: no cover - compiled
    """Power of spectra given as pairs of floats."""
    power = np.empty((len(spectrum), spectrum.shape[1] // 2), np.float32)
    for r in range(len(spectrum)):
        for k in range(power.shape[1]):
            real, imag = spectrum[r, 2 * k], spectrum[r, 2 * k + 1]
            power[r, k] = real * real + imag * imag
    return power


@compiled
def _own(wave: WaveArray, end: IntArray) -> WaveArray:  # pragma: no cover - compiled
    own = np.zeros((len(wave), SPECTRUM_FFT), np.float32)
    for r in range(len(wave)):
        size = end[r] - ONSET + GUARD
        fade = min(GUARD, size // 4)
        own[r, :size] = wave[r, ONSET - GUARD : end[r]]
        for k in range(fade):
            own[r, size - fade + k] *= np.float32(0.5 + 0.5 * np.cos(np.pi * (k + 0.5) / fade))
    return own
