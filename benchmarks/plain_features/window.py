"""One pulse made ready for measuring: analysis band and rate, carriers reduced, own samples marked."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import scipy.fft

from pdclass.pulses import ONSET_SHARE, WINDOW_S, Chain, FloatArray, IntArray, WaveArray

ANALYSIS_BAND_HZ = (0.1e6, 25e6)
ANALYSIS_RATE_HZ = 100e6
SAMPLES = round(WINDOW_S * ANALYSIS_RATE_HZ)
ONSET = round(ONSET_SHARE * SAMPLES)
STEP_NS = 1e9 / ANALYSIS_RATE_HZ
#: What lies just before the onset may already belong to the pulse.
GUARD = 20
MOST_TONES = 4
_TONE_FFT = 4096
#: A line this far above the median of the pre-trigger's periodogram is a carrier, not noise.
_TONE_POWER = 20.0
#: An excursion of so many noise levels before the onset is another event.
_BUSY_LEVELS = 9.0
_BUSY_MARGIN = 30
#: The noise is not known from fewer samples than these; carriers are fitted to no fewer either.
_SHORTEST_QUIET = 100
_SHORTEST_FOR_CARRIERS = 200
_SPECTRUM_FFT = 2048
_SPECTRUM_SMOOTHING = 33


@dataclass(frozen=True)
class Window:
    """A pulse ready for measuring; polarity and gain are gone (the peak is +1).

    Attributes
    ----------
    wave : (SAMPLES,) carriers reduced, in units of the peak.
    raw : (SAMPLES,) the same with its carriers.
    end : one past the last of the pulse's own samples, which begin at `ONSET`.
    last : one past the last recorded sample.
    peak : place of the largest excursion among the own samples.
    height_v : the peak that was made 1, with its sign [V].
    noise : noise level beside the pulse, in units of the peak; NaN where the pre-trigger has no quiet stretch.
    noise_power : (bins,) noise spectrum scaled to the own samples; NaN likewise.
    reach_hz : highest frequency that the chain carries [Hz].
    low_hz : lower corner of the chain [Hz]; NaN = unknown.
    snr_db : peak over noise [dB].
    """

    wave: FloatArray
    raw: FloatArray
    end: int
    last: int
    peak: int
    height_v: float
    noise: float
    noise_power: FloatArray
    reach_hz: float
    low_hz: float = float("nan")

    @property
    def snr_db(self) -> float:
        """Peak over noise after the carriers are reduced [dB]; NaN where the noise is unknown."""
        return float(-20 * np.log10(self.noise)) if self.noise > 0 else float("nan")

    @property
    def own(self) -> FloatArray:
        """The own samples with a short lead, faded out at the end so that the cut adds nothing."""
        piece = self.wave[ONSET - GUARD : self.end].copy()
        fade = min(GUARD, piece.size // 4)
        piece[piece.size - fade :] *= 0.5 + 0.5 * np.cos(np.pi * (np.arange(fade) + 0.5) / max(fade, 1))
        return piece

    @property
    def edge(self) -> FloatArray:
        """The own samples with twice the lead: where an edge may be looked for, and nowhere else."""
        return self.wave[ONSET - 2 * GUARD : self.end]

    @property
    def noise_density(self) -> FloatArray:
        """Noise spectrum for one sample, (bins,) on the grid of `power` from 0 Hz on; NaN where it is unknown."""
        return self.noise_power / (self.end - ONSET + GUARD)

    def power(self) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Frequencies [Hz], power of the own samples and of the noise, within the analysis band.

        The noise is that beside the pulse, scaled to the own samples; zeros where it is unknown.
        """
        spectrum = np.abs(scipy.fft.rfft(self.own, _SPECTRUM_FFT)) ** 2
        noise = np.where(np.isfinite(self.noise_power), self.noise_power, 0.0)
        frequency_hz = scipy.fft.rfftfreq(_SPECTRUM_FFT, 1 / ANALYSIS_RATE_HZ)
        inside = (frequency_hz >= ANALYSIS_BAND_HZ[0]) & (frequency_hz <= ANALYSIS_BAND_HZ[1])
        return frequency_hz[inside], spectrum[inside], noise[inside]


def chance_energy(floor: float, samples: int) -> float:
    """Three deviations of the energy of so many samples of noise of a power known as from 200 samples."""
    return float(3 * floor * np.sqrt(2 * samples * (1 + samples / 200)))


def chain_reach_hz(chain: Chain) -> float:
    """Highest frequency that a chain carries: its upper corner, and at most 0.4 of the rate (anti-alias) [Hz]."""
    corner = chain.band_hz[1] if chain.band_hz else np.inf
    return float(min(corner, 0.4 * chain.rate_hz))


def prepared(wave_v: WaveArray, chain: Chain, duration_us: float) -> Window | None:
    """Make a stored window ready for measuring; None where there is nothing to measure.

    Parameters
    ----------
    wave_v : (samples,) one 20 us window with its onset a quarter in [V]; NaN = not recorded.
    chain : its chain.
    duration_us : length of the pulse's own samples [us]; NaN or not positive = to the end of the window.
    """
    known = np.flatnonzero(np.isfinite(wave_v))
    if known.size < wave_v.size // 4:
        return None
    first, last = (round(edge / wave_v.size * SAMPLES) for edge in (known[0], known[-1] + 1))
    raw = to_analysis_band(np.asarray(wave_v, np.float64))
    least_v = _counting_noise_v(chain)
    carried, quiet = _background(raw, first, least_v)
    clean = raw - carried
    beside = clean[quiet] if quiet.stop > quiet.start else clean[first:ONSET]
    level = float(np.median(beside)) if beside.size else 0.0
    clean, raw = clean - level, raw - level
    length = duration_us * ANALYSIS_RATE_HZ / 1e6 if duration_us > 0 else SAMPLES
    end = int(min(max(ONSET + round(length), ONSET + 8), last, SAMPLES))
    if end <= ONSET + 4 or first > ONSET:
        return None
    peak = ONSET - GUARD // 2 + int(np.argmax(np.abs(clean[ONSET - GUARD // 2 : end])))
    height = float(clean[peak])
    if height == 0:
        return None
    clean, raw, before = clean / height, raw / height, clean[quiet] / height
    known_noise = quiet.stop - quiet.start >= _SHORTEST_QUIET
    noise = max(float(np.median(np.abs(before)) / 0.6744898), least_v / abs(height)) if known_noise else np.nan
    noise_power = _noise_power(before, end - ONSET + GUARD, known=known_noise)
    low_hz = chain.band_hz[0] if chain.band_hz else float("nan")
    return Window(clean, raw, end, last, peak, height, noise, noise_power, chain_reach_hz(chain), low_hz)


def to_analysis_band(wave_v: FloatArray) -> FloatArray:
    """A 20 us window at the analysis rate, low-passed smoothly (Gaussian, -3 dB at the band's upper edge).

    Samples that were not recorded become the median of those that were. The change of rate is by Fourier
    series; a straight line through the ends is taken out first and put back, so that the ends do not ring.
    """
    filled = np.where(np.isfinite(wave_v), wave_v, np.nanmedian(wave_v))
    edge = max(4, filled.size // 200)
    begin, finish = filled[:edge].mean(), filled[-edge:].mean()
    ramp = np.linspace(begin, finish, filled.size, endpoint=False)
    spectrum = scipy.fft.rfft(filled - ramp)
    frequency_hz = np.arange(spectrum.size) / WINDOW_S
    spectrum *= np.exp(-0.5 * np.log(2) * (frequency_hz / ANALYSIS_BAND_HZ[1]) ** 2)
    bins = SAMPLES // 2 + 1
    resized = np.zeros(bins, np.complex128)
    shared = min(bins, spectrum.size)
    resized[:shared] = spectrum[:shared]
    wave = scipy.fft.irfft(resized, SAMPLES) * (SAMPLES / filled.size)
    return np.asarray(wave + np.linspace(begin, finish, SAMPLES, endpoint=False), np.float64)


def _counting_noise_v(chain: Chain) -> float:
    """Noise of rounding to whole counts that the low-pass keeps [V]; 0 where their size is unknown."""
    frequency_hz = np.linspace(0, chain.rate_hz / 2, 257)
    kept = np.mean(2.0 ** -((frequency_hz / ANALYSIS_BAND_HZ[1]) ** 2))
    return float(abs(chain.volts_per_count or 0.0) * np.sqrt(kept / 12))


def _background(raw: FloatArray, first: int, least_v: float) -> tuple[FloatArray, slice]:
    """The carriers through the window, and the quiet stretch before the onset that tells of the noise.

    Carriers are fitted to the whole pre-trigger; where another event then stands out of what is left, to its
    longest stretch without one. The stretch is empty where that is too short to know anything from.
    """
    before = slice(min(first + GUARD, ONSET - GUARD), ONSET - GUARD)
    carried = carriers(raw[before], before.start)
    quiet = _longest_quiet((raw - carried)[before], least_v)
    stretch = slice(before.start + quiet.start, before.start + quiet.stop)
    if stretch == before:
        return carried, before
    if stretch.stop - stretch.start < _SHORTEST_QUIET:
        return np.zeros(SAMPLES), slice(ONSET, ONSET)
    return carriers(raw[stretch], stretch.start), stretch


def _longest_quiet(before: FloatArray, least_v: float) -> slice:
    """The longest stretch of a pre-trigger without an event; a margin beside each excursion is left out, too."""
    if before.size < _SHORTEST_QUIET:
        return slice(0, 0)
    deviation = np.abs(before - np.median(before))
    loud = np.flatnonzero(deviation > _BUSY_LEVELS * max(np.median(deviation) / 0.6744898, least_v))
    if not loud.size:
        return slice(0, before.size)
    edges = np.concatenate([[-_BUSY_MARGIN], loud, [before.size + _BUSY_MARGIN]])
    gap = int(np.argmax(np.diff(edges)))
    start, stop = int(edges[gap]) + _BUSY_MARGIN, int(edges[gap + 1]) - _BUSY_MARGIN
    return slice(start, max(stop, start))


def carriers(before: FloatArray, start: int) -> FloatArray:
    """The carriers of the pre-trigger, continued through the window; zeros where no line stands out.

    Lines are taken one by one from the periodogram and fitted together by least squares.

    Parameters
    ----------
    before : (n,) pre-trigger.
    start : place of its first sample in the window.
    """
    if before.size < _SHORTEST_FOR_CARRIERS:
        return np.zeros(SAMPLES)
    place = np.arange(start, start + before.size, dtype=np.int64) - ONSET
    everywhere = np.arange(SAMPLES, dtype=np.int64) - ONSET
    tones: list[float] = []
    rest, fitted = before - before.mean(), np.zeros(SAMPLES)
    for _ in range(MOST_TONES):
        tone = _strongest_line(rest)
        if tone is None:
            break
        tones.append(tone)
        basis = _tone_basis(tones, place)
        weights = np.linalg.lstsq(basis, before, rcond=1e-6)[0]
        rest = before - basis @ weights
        fitted = _tone_basis(tones, everywhere)[:, 1:] @ weights[1:]
    return fitted


def _tone_basis(tones: list[float], place: IntArray) -> FloatArray:
    angle = 2 * np.pi * np.outer(place, tones)
    return np.concatenate([np.ones((place.size, 1)), np.cos(angle), np.sin(angle)], axis=1)


def _strongest_line(rest: FloatArray) -> float | None:
    """Frequency [cycles a sample] of a line that stands out of the noise, else None."""
    power = np.abs(scipy.fft.rfft((rest - rest.mean()) * np.hanning(rest.size), _TONE_FFT)) ** 2
    top = round(ANALYSIS_BAND_HZ[1] / ANALYSIS_RATE_HZ * _TONE_FFT)
    low = max(2, round(_TONE_FFT / rest.size))
    k = low + int(np.argmax(power[low:top]))
    if power[k] < _TONE_POWER * np.median(power[low:top]):
        return None
    left, middle, right = np.log(power[k - 1 : k + 2] + 1e-300)
    bend = left - 2 * middle + right
    return float((k + (0.5 * (left - right) / bend if bend else 0.0)) / _TONE_FFT)


def _noise_power(before: FloatArray, own_samples: int, *, known: bool) -> FloatArray:
    if not known:
        return np.full(_SPECTRUM_FFT // 2 + 1, np.nan)
    power = np.abs(scipy.fft.rfft(before - before.mean(), _SPECTRUM_FFT)) ** 2 * own_samples / before.size
    pad = _SPECTRUM_SMOOTHING // 2
    mirrored = np.concatenate([power[pad:0:-1], power, power[-2 : -pad - 2 : -1]])
    return np.convolve(mirrored, np.full(_SPECTRUM_SMOOTHING, 1 / _SPECTRUM_SMOOTHING), "valid")
