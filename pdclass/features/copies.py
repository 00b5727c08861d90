"""Copies: the two strongest later copies of a pulse's beginning, and how they are unlike it.

What entered a cable somewhere comes back from the far end after the detour from its place, and once more after every
round trip: two delays that are no multiples of each other. What entered at the near end has one delay only. And a
copy that went through the same near end once, as the pulse did, is more like it than one that met it twice.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from pdclass.compiled import compiled
from pdclass.features.arrival import band_means_into, correlate_into, cosine_means, fade_out, first_bins
from pdclass.features.feature import Feature
from pdclass.features.kernels import place_of_largest, size_above, weighed
from pdclass.features.lines import cut_lines, weigh
from pdclass.features.transforms import SpectrumArray, spectra, waves_of
from pdclass.features.window import ANALYSIS_RATE_HZ, GUARD, ONSET, SAMPLES, SPECTRUM_FFT, STEP_NS, Windows
from pdclass.pulses import FloatArray, IntArray, WaveArray

#: The pulse's beginning [samples from the onset]: up to where so many samples in turn are below a share of the peak, or
#: below so many noise levels; then it fades out. It has this length at the most, and no pulse longer than that has
#: copies; they are looked for from its end on, and up to the last delay.
_CALM, _SUNK, _SUNK_LEVELS, _BEGINNING_FADE, _LONGEST = 15, 0.03, 3.0, 20, 600
_SHORTEST, _LAST = 40, 1350
_WINDOW_FADE = 200
#: Deconvolution: bins this far below the strongest count little; a Gaussian low-pass of this width follows [Hz].
_REGULAR, _PASS_HZ = 0.01, 6e6
#: Two copies are at least so far apart: samples, or a share of the delay.
_APART, _APART_SHARE = 12, 0.04
#: A copy stands so many noise levels out of the echogram and has this share of the pulse, else there is none.
_STANDS_OUT, _SMALLEST = 4.5, 0.03
#: The level is what nine tenths of every so many-th delay from here on do not exceed, over what they would not exceed
#: of normal noise: what carriers leave has no such high tops as noise of its median has. The echogram is too smooth
#: for more delays to tell more.
_LEVEL_FROM, _COMB, _CALMER, _NORMAL = 100, 4, 0.9, 1.6448536
#: So much of a copy is compared with the pulse [samples], in these bands [MHz].
_COMPARED, _COMPARED_FFT = 100, 512
#: A band with less than this share of the pulse's strongest one is not compared.
_LEVEL_SHARE = 1e-3
LEVELS_MHZ = (1.0, 2.5, 5.0, 9.0, 14.0)
_FLANK = 30


def measure_copies(windows: Windows) -> FloatArray:
    """The features of this family, (pulses, features): NaN where no copy stands out, or the noise is unknown."""
    found = np.full((len(windows), len(COPIES)), np.nan)
    rows = np.flatnonzero((windows.noise > 0) & (windows.last - ONSET >= _WINDOW_FADE + 2 * _SHORTEST))
    if rows.size:
        used = windows.take(rows) if rows.size < len(windows) else windows
        found[rows] = _of_echograms(echogram(used), used)
    return found


@compiled
def beginnings(waves: WaveArray, last: IntArray, noise: FloatArray) -> IntArray:  # pragma: no cover - compiled
    """Length of each pulse's beginning [samples from the onset], with what fades of it; 0 = it does not end in time."""
    found = np.zeros(len(waves), np.int64)
    for row in range(len(waves)):
        limit, calm = np.float32(max(_SUNK, _SUNK_LEVELS * noise[row])), 0
        for i in range(min(_LONGEST, last[row] - ONSET)):
            calm = calm + 1 if abs(waves[row, ONSET + i]) < limit and i >= _SHORTEST - _BEGINNING_FADE else 0
            if calm == _CALM:
                found[row] = i + 1 - _CALM + _BEGINNING_FADE
                break
    return found


def echogram(windows: Windows) -> WaveArray:
    """Each window deconvolved by its pulse's beginning, (pulses, delays) by delay [samples]; 1 at delay 0.

    Wiener deconvolution with the noise beside the pulse, smoothed by a Gaussian of 6 MHz: a copy shows as a peak
    with its sign, whatever the shape of the pulse. Carriers that were not taken out would hide every copy: they are
    cut down first. Delays after the window's end are to be left alone.
    """
    sizes = beginnings(windows.wave, windows.last, windows.noise)
    whole, beginning = _pieces(windows.wave, windows.last, sizes, _WHOLE_FADE, _FADE)
    whole_spectrum, pulse_spectrum = spectra(whole, SPECTRUM_FFT), spectra(beginning, SPECTRUM_FFT)
    cut_lines(whole_spectrum, pulse_spectrum)
    scale = (windows.last - ONSET) / (windows.end - ONSET + GUARD)
    _deconvolve(whole_spectrum, pulse_spectrum, windows.noise_power, scale, _LOW_PASS)
    return _scaled(waves_of(whole_spectrum, SPECTRUM_FFT))


@compiled
def _pieces(
    waves: WaveArray, last: IntArray, sizes: IntArray, window_fade: FloatArray, fade: FloatArray
) -> tuple[WaveArray, WaveArray]:  # pragma: no cover - compiled
    """What follows each onset, fading out at the end of the record, and the beginning of it."""
    start = ONSET - GUARD
    whole = np.zeros((len(waves), SAMPLES - start), np.float32)
    beginning = np.zeros((len(waves), GUARD + _LONGEST + fade.size), np.float32)
    for row in range(len(waves)):
        size = last[row] - start
        whole[row, :size] = waves[row, start : last[row]]
        for i in range(window_fade.size):
            whole[row, size - window_fade.size + i] *= window_fade[i]
        kept = GUARD + (sizes[row] if sizes[row] > 0 else _LONGEST) - fade.size
        beginning[row, :kept] = waves[row, start : start + kept]
        for i in range(fade.size):
            beginning[row, kept + i] = waves[row, start + kept + i] * fade[i]
    return whole, beginning


@compiled
def _deconvolve(
    whole: SpectrumArray, beginning: SpectrumArray, noise_power: WaveArray, scale: FloatArray, low_pass: WaveArray
) -> None:  # pragma: no cover - compiled
    """Replace each spectrum of a window by that of its echogram."""
    power = np.empty(low_pass.size, np.float32)
    for row in range(len(whole)):
        for k in range(power.size):
            power[k] = beginning[row, k].real ** 2 + beginning[row, k].imag ** 2
        least, share = np.float32(_REGULAR) * power[place_of_largest(power)], np.float32(scale[row])
        window, pulse, noise = whole[row], beginning[row], noise_power[row]
        for k in range(power.size):
            power[k] = low_pass[k] / (power[k] + noise[k] * share + least)
            window[k] *= np.conj(pulse[k])
        weigh(window, power)


@compiled
def _scaled(gram: WaveArray) -> WaveArray:  # pragma: no cover - compiled
    for row in range(len(gram)):
        unit = np.float32(1) / (abs(gram[row, place_of_largest(gram[row, :5])]) + np.float32(1e-9))
        for i in range(gram.shape[1]):
            gram[row, i] *= unit
    return gram


def _of_echograms(gram: WaveArray, windows: Windows) -> FloatArray:
    found = np.full((len(windows), len(COPIES)), np.nan)
    own_samples = windows.end - ONSET + GUARD
    bins = np.array(first_bins(LEVELS_MHZ, _COMPARED_FFT))
    weights = np.ascontiguousarray(cosine_means(first_bins(LEVELS_MHZ, _COMPARED_FFT), _COMPARED_FFT, _COMPARED).T)
    sizes = beginnings(windows.wave, windows.last, windows.noise)
    _copies_into(
        found, gram, windows.wave, sizes, windows.last, windows.noise_power, own_samples, _TAPER, bins, weights
    )
    return found


@compiled
def _copies_into(
    found: FloatArray,
    grams: WaveArray,
    waves: WaveArray,
    sizes: IntArray,
    last: IntArray,
    noise_power: WaveArray,
    own_samples: IntArray,
    taper: FloatArray,
    bins: IntArray,
    weights: FloatArray,
) -> None:  # pragma: no cover - compiled
    """Write the features in the order of `COPIES`, pulse by pulse."""
    pulse, later = np.empty(_COMPARED), np.empty(_COMPARED)
    bands = weights.shape[1]
    strengths, floors, references = np.empty(bands), np.empty(bands), np.empty(bands)
    scratch = np.empty(_LAST, np.float32)
    for row in range(len(found)):
        if sizes[row] == 0:
            continue
        gram = grams[row, : last[row] - ONSET]
        first, second = strongest_copies(gram, sizes[row], scratch)
        if first < 0 and second < 0:
            continue
        for i in range(_COMPARED):
            pulse[i] = waves[row, ONSET - GUARD + i] * taper[i]
        _strengths_into(pulse, weights, references)
        _floors_into(noise_power[row], np.sum(taper**2) / own_samples[row], bins, floors)
        for place in range(2):
            delay = first if place == 0 else second
            if delay < 0:
                continue
            values = found[row, place * _EACH : (place + 1) * _EACH]
            values[0], values[1] = delay * STEP_NS / 1e3, gram[delay]
            if place > 0:
                break
            start = ONSET - GUARD + delay
            _later_into(waves[row, start : min(start + _COMPARED, last[row])], taper, later)
            _strengths_into(later, weights, strengths)
            values[2] = _likeness(later, pulse)
            values[3], values[4] = _width_and_flank(gram, delay)
            _levels_into(strengths, references, floors, values[5:])
        if first >= 0 and second >= 0:
            found[row, _EACH + 2] = max(first, second) / min(first, second)


@compiled
def strongest_copies(gram: WaveArray, start: int, scratch: WaveArray) -> tuple[int, int]:  # pragma: no cover - compiled
    """Delays [samples] of the strongest peak of an echogram and of the strongest one apart from it; -1 = none.

    They are looked for from the delay `start` on; `scratch` holds as many samples as there are delays to be looked at.
    """
    delays = min(_LAST, gram.size) - start
    if delays < 2 * _APART:
        return -1, -1
    size = scratch[:delays]
    size[:] = gram[start : start + delays]
    least = max(_STANDS_OUT * (size_above(gram[_LEVEL_FROM::_COMB].copy(), _CALMER) / _NORMAL + 1e-9), _SMALLEST)
    first = place_of_largest(size)
    if abs(size[first]) < least:
        return -1, -1
    apart = max(_APART, round(_APART_SHARE * (first + start)))
    size[max(first - apart, 0) : first + apart + 1] = 0
    second = place_of_largest(size)
    return first + start, second + start if abs(size[second]) >= least else -1


@compiled
def _later_into(kept: WaveArray, taper: FloatArray, later: FloatArray) -> None:  # pragma: no cover - compiled
    """Write what lies at a copy's place, from the level at its beginning, tapered and padded."""
    level = 0.0
    for i in range(min(6, kept.size)):
        level += kept[i] / min(6, kept.size)
    later[:] = 0.0
    for i in range(kept.size):
        later[i] = (kept[i] - level) * taper[i]


@compiled
def _likeness(later: FloatArray, pulse: FloatArray) -> float:  # pragma: no cover - compiled
    energies = weighed(later, later) * weighed(pulse, pulse)
    return float(weighed(later, pulse) / np.sqrt(energies + 1e-12))


@compiled
def _width_and_flank(gram: WaveArray, delay: int) -> tuple[float, float]:  # pragma: no cover - compiled
    """Width of a peak at half its height [ns], and the lowest place beside it over its height."""
    sign, height = np.sign(gram[delay]), abs(gram[delay])
    low, high = max(delay - _FLANK, 0), min(delay + _FLANK, gram.size - 1)
    left, right, flank = delay, delay, height
    while left > low and sign * gram[left - 1] > height / 2:
        left -= 1
    while right < high and sign * gram[right + 1] > height / 2:
        right += 1
    for i in range(low, high + 1):
        flank = min(flank, sign * gram[i])
    return (right - left + 1) * STEP_NS, flank / height


@compiled
def _strengths_into(
    wave: FloatArray, weights: FloatArray, strengths: FloatArray
) -> None:  # pragma: no cover - compiled
    """Write the mean power of a wave in each band."""
    lags, padded = np.empty(wave.size), np.zeros(2 * wave.size + 3)
    padded[: wave.size] = wave
    correlate_into(wave, padded, lags)
    band_means_into(lags, weights, strengths)


@compiled
def _floors_into(
    power: WaveArray, scale: float, bins: IntArray, floors: FloatArray
) -> None:  # pragma: no cover - compiled
    """Write the mean noise of each band, from every bin of `power` that a shorter transform would have, too."""
    step = 2 * (power.size - 1) // _COMPARED_FFT
    for band in range(floors.size):
        floors[band] = 0.0
        for k in range(bins[band], bins[band + 1]):
            floors[band] += power[k * step] * scale
        floors[band] /= bins[band + 1] - bins[band]


@compiled
def _levels_into(
    strengths: FloatArray, references: FloatArray, floors: FloatArray, levels: FloatArray
) -> None:  # pragma: no cover - compiled
    """Write power of the copy over that of the pulse by band, noise subtracted, not below a third of the noise [dB]."""
    hidden = _LEVEL_SHARE * references.max()
    for band in range(floors.size):
        if references[band] > max(4 * floors[band], hidden):
            left = max(strengths[band] - floors[band], 0.3 * floors[band] + 1e-9)
            levels[band] = 10 * np.log10(left / (references[band] + 1e-30))


def _taper() -> FloatArray:
    taper = np.ones(_COMPARED)
    taper[:15] = np.sin(np.arange(15) / 15 * np.pi / 2) ** 2
    taper[-40:] = 0.5 + 0.5 * np.cos(np.pi * np.arange(40) / 40)
    return taper


_TAPER = _taper()
_WHOLE_FADE = fade_out(_WINDOW_FADE, _WINDOW_FADE)
_FADE = fade_out(_BEGINNING_FADE, _BEGINNING_FADE)
_LOW_PASS = np.exp(-0.5 * (np.arange(SPECTRUM_FFT // 2 + 1) * ANALYSIS_RATE_HZ / SPECTRUM_FFT / _PASS_HZ) ** 2).astype(
    np.float32
)
_BANDS = tuple(pairwise(LEVELS_MHZ))
#: Features of the first copy; of the second there are delay and ratio alone.
_EACH = 5 + len(_BANDS)


#: What a missing value means.
_NONE, _NO_SECOND = "no later copy stands out", "no second copy stands out"


def _level_name(low: float, high: float) -> str:
    return f"level_{low:g}_{high:g}_db".replace(".", "p")


def _feature(
    name: str,
    unit: str,
    meaning: str,
    words: tuple[str, str],
    bounds: tuple[float, float],
    tolerance: float,
    absent: str = _NONE,
    sentence: str = "",
    below_zero: str = "",
) -> Feature:
    return Feature(
        name,
        unit,
        meaning,
        sentence or f"{meaning} {{value}}",
        *words,
        bounds,
        tolerance,
        "Wiener deconvolution (N. Wiener, 1949, from memory)",
        needs_snr_db=12.0,
        absent=absent,
        below_zero=below_zero,
        edition=3,
    )


def _place_of(number: int, which: str, absent: str) -> tuple[Feature, ...]:
    name = f"copy_{number}_{{}}".format
    height = f"height of the {which} copy"
    return (
        _feature(name("delay_us"), "µs", f"delay of the {which} copy", ("later", "earlier"), (0.0, 15.0), 0.03, absent),
        _feature(
            name("ratio"),
            "",
            f"{height} over that of the pulse, negative if it is turned over",
            ("higher", "lower"),
            (-20.0, 20.0),
            0.03,
            absent,
            f"{height} {{value}} times the pulse",
            "turned over",
        ),
    )


_SHAPE = (
    _feature(
        "copy_1_likeness",
        "",
        "correlation of the strongest copy with the pulse, negative if it is turned over",
        ("higher", "lower"),
        (-1.0, 1.0),
        0.15,
        sentence="correlation of the strongest copy with the pulse {value}",
    ),
    _feature(
        "copy_1_width_ns",
        "ns",
        "width of the strongest copy at half its height after deconvolution by the pulse",
        ("wider", "narrower"),
        (0.0, 700.0),
        20.0,
        sentence="width of the strongest copy after deconvolution {value}",
    ),
    _feature(
        "copy_1_flank",
        "",
        "lowest place within 0.3 µs of the strongest copy over its height, after deconvolution by the pulse",
        ("less deep", "deeper"),
        (-50.0, 1.0),
        0.2,
        sentence="beside the strongest copy the deconvolved trace sinks to {value} of its height",
        below_zero="to the other side",
    ),
    *(
        _feature(
            f"copy_1_{_level_name(low, high)}",
            "dB",
            f"level of the strongest copy over that of the pulse at {low:g}-{high:g} MHz",
            ("higher", "lower"),
            (-80.0, 80.0),
            2.5,
            f"{_NONE}, or too little power in this band",
            f"level of the strongest copy over that of the pulse at {low:g}-{high:g} MHz is {{value}}",
        )
        for low, high in _BANDS
    ),
)

COPIES = (
    *_place_of(1, "strongest", _NONE),
    *_SHAPE,
    *_place_of(2, "second", _NO_SECOND),
    _feature(
        "copy_delay_ratio",
        "",
        "longer over shorter delay of the two strongest copies",
        ("larger", "smaller"),
        (1.0, 40.0),
        0.05,
        _NO_SECOND,
    ),
)
