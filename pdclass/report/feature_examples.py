"""Example pulses on which features are drawn, with what the drawings show: spectra, echograms, energies."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping
from typing import Any, NamedTuple

import numpy as np
import scipy.fft

from pdclass.features import CATALOGUE, feature_table, measured_edges
from pdclass.features.modes import MOST, oscillations
from pdclass.features.scales import scale_gains
from pdclass.pulses import FloatArray, PulseSet

#: Samples before the onset that count as the pulse's lead [us].
LEAD_US = 0.2
_FFT, _GRAM_FFT = 2048, 4096
_LEVELS, _PADDED = 7, 2048
#: The echogram is drawn up to here [us]; its smoothing [MHz], and what counts little in the division.
GRAM_US = 5.0
#: Length of the first arrival whose tilt is drawn [us].
_ARRIVAL_US = 1.2
_BEGINNING_US, _SMOOTH_MHZ, _REGULAR = 0.8, 6.0, 0.01


class FirstArrival(NamedTuple):
    """Frequencies [MHz], level over their mean power [dB] and delay from the first sample [ns], all (bins,)."""

    mhz: FloatArray
    level_db: FloatArray
    delay_ns: FloatArray


class FeatureExample(NamedTuple):
    """One pulse with its features.

    Attributes
    ----------
    label, title : of the pulse.
    time_us, wave : from the onset [us], and over the peak (which is +1), both (samples,).
    at : crossings and end [us], as of `measured_edges`.
    noise : level beside the pulse, over the peak.
    values : every feature by name; NaN = unmeasurable.
    """

    label: str
    title: str
    time_us: FloatArray
    wave: FloatArray
    at: Mapping[str, float]
    noise: float
    values: Mapping[str, float]

    def between(self, first_us: float, last_us: float) -> FloatArray:
        """The samples of a stretch."""
        return self.wave[(self.time_us >= first_us) & (self.time_us < last_us)]

    @property
    def own(self) -> FloatArray:
        """The pulse's own samples with a short lead."""
        return self.between(-LEAD_US, self.at["end"])

    @property
    def step_us(self) -> float:
        """Time from sample to sample [us]."""
        return float(self.time_us[1] - self.time_us[0])


def feature_example(pulses: PulseSet, place: int, title: str) -> FeatureExample:
    """The pulse at a place of its set, ready to be drawn."""
    found: Mapping[str, Any] = measured_edges(pulses, place)
    height = float(found["height_v"])
    wave, time_us = np.asarray(found["wave_v"]) / height, np.asarray(found["time_us"])
    at = {name: float(value) for name, value in found.items() if np.ndim(value) == 0}
    before = wave[time_us < -LEAD_US]
    values = feature_table(pulses.take(np.array([place])))[0]
    names = [feature.name for feature in CATALOGUE]
    return FeatureExample(
        label=str(pulses.table["label"].iloc[place]),
        title=title,
        time_us=time_us,
        wave=wave,
        at=at,
        noise=float(np.median(np.abs(before)) / 0.6744898),
        values=dict(zip(names, values.tolist(), strict=True)),
    )


def levels_db(example: FeatureExample) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Frequencies [MHz], and level of the own samples and of the noise in as many [dB over the largest]."""
    mhz = scipy.fft.rfftfreq(_FFT, example.step_us)
    before = example.between(-5.0, -LEAD_US)
    power = np.abs(scipy.fft.rfft(example.own, _FFT)) ** 2
    noise = np.abs(scipy.fft.rfft(before, _FFT)) ** 2 * example.own.size / before.size
    noise = np.convolve(noise, np.full(33, 1 / 33), "same")
    shown = (mhz >= 0.1) & (mhz <= 25)
    top = power[shown].max()
    return mhz[shown], 10 * np.log10(power[shown] / top), 10 * np.log10(noise[shown] / top)


def echogram(example: FeatureExample) -> tuple[FloatArray, FloatArray]:
    """Delays [us], and the window deconvolved by its pulse's beginning; 1 at delay 0."""
    whole = example.wave[example.time_us >= -LEAD_US].copy()
    beginning = example.between(-LEAD_US, _BEGINNING_US).copy()
    fade = beginning.size // 2
    beginning[-fade:] *= 0.5 + 0.5 * np.cos(np.pi * np.arange(fade) / fade)
    spectrum, reference = (scipy.fft.rfft(each, _GRAM_FFT) for each in (whole, beginning))
    power = np.abs(reference) ** 2
    mhz = scipy.fft.rfftfreq(_GRAM_FFT, example.step_us)
    noise = example.noise**2 * whole.size
    smooth = np.exp(-0.5 * (mhz / _SMOOTH_MHZ) ** 2)
    ratio = spectrum * np.conj(reference) / (power + noise + _REGULAR * power.max()) * smooth
    gram = scipy.fft.irfft(ratio, _GRAM_FFT)[: round(GRAM_US / example.step_us)]
    return np.arange(gram.size) * example.step_us, gram / np.abs(gram[:5]).max()


def scale_shares(example: FeatureExample) -> tuple[FloatArray, FloatArray]:
    """Wavelet levels from 2 on, and the share of the energy of the own samples in each."""
    power = np.abs(np.fft.rfft(example.own, _PADDED)) ** 2
    energies = (scale_gains(_LEVELS, power.size) @ power)[1:]
    return np.arange(2.0, 2 + energies.size), energies / energies.sum()


def first_arrival(example: FeatureExample) -> FirstArrival:
    """Level and delay of the first 1.2 µs, its end faded out, bin by bin."""
    piece = example.between(-LEAD_US, min(example.at["end"], _ARRIVAL_US)).copy()
    fade = round(0.4 * (piece.size - LEAD_US / example.step_us))
    piece[piece.size - fade :] *= 0.5 + 0.5 * np.cos(np.pi * (np.arange(fade) + 0.5) / fade)
    spectrum = scipy.fft.rfft(piece, _FFT)
    moment = scipy.fft.rfft(piece * np.arange(piece.size), _FFT)
    power = np.abs(spectrum) ** 2
    mhz = scipy.fft.rfftfreq(_FFT, example.step_us)
    shown = (mhz >= 0.5) & (mhz <= 25)
    delay_ns = (np.conj(spectrum) * moment).real[shown] / power[shown] * example.step_us * 1e3
    return FirstArrival(mhz[shown], 10 * np.log10(power[shown] / power[shown].mean()), delay_ns)


def strongest_mode(example: FeatureExample) -> tuple[FloatArray, FloatArray]:
    """Times [us] of what modes are fitted to, and the fitted wave of the strongest; zeros where nothing rings."""
    first = int(np.argmin(np.abs(example.time_us - example.at["peak"])))
    last = min(first + MOST, int(np.searchsorted(example.time_us, example.at["end"])))
    time_us, wave = example.time_us[first:last], example.wave[first:last]
    mhz, quality = example.values["mode_mhz"], example.values["mode_q"]
    if not np.isfinite(mhz):
        return time_us, np.zeros(time_us.size)
    found = oscillations(wave, 1e6 / example.step_us)
    nearest = min(found, key=lambda mode: abs(mode.frequency_hz / 1e6 - mhz) + abs(mode.quality - quality))
    return time_us, nearest.wave


def energy_so_far(example: FeatureExample) -> tuple[FloatArray, FloatArray]:
    """Times [us] of the own samples, and the share of their energy that has passed, the noise's left out."""
    inside = (example.time_us >= -LEAD_US) & (example.time_us < example.at["end"])
    energy = np.cumsum(example.wave[inside] ** 2 - example.noise**2)
    return example.time_us[inside], energy / energy[-1]


def bands(values: Mapping[str, float], pattern: str) -> Iterator[tuple[str, float, float]]:
    """Names that fit a pattern, with the two numbers in them ("p" for the point)."""
    for name in values:
        fits = re.fullmatch(pattern, name)
        if fits:
            low, high = (float(number.replace("p", ".")) for number in fits.groups())
            yield name, low, high


def strongest(pulses: PulseSet, label: str) -> int:
    """Place of the pulse of a label that stands highest over its noise, alone in its window and not clipped."""
    table = pulses.table
    usable = (table["label"] == label) & table["echo_of"].isna() & ~table["clipped"] & (table["window_mates"] == 0)
    ratios = table["snr_db"].where(usable, -np.inf).to_numpy(np.float64)
    return int(np.argmax(ratios))
