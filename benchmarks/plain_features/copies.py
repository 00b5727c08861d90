"""Copies: the two strongest later copies of a pulse's beginning, and how they are unlike it.

What entered a cable somewhere comes back from the far end after the detour from its place, and once more after every
round trip: two delays that are no multiples of each other. What entered at the near end has one delay only. And a
copy that went through the same near end once, as the pulse did, is more like it than one that met it twice.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import pairwise
from typing import NamedTuple

import numpy as np
import scipy.fft

from plain_features.arrival import band_means, faded, first_bins
from plain_features.window import ANALYSIS_RATE_HZ, GUARD, ONSET, STEP_NS, Window
from pdclass.pulses import FloatArray

#: The pulse's beginning [samples from the onset] goes on until so many samples in turn are below a share of the peak,
#: or below so many noise levels; then it fades out. Copies are looked for from its end up to the last delay.
_CALM, _SUNK, _SUNK_LEVELS, _FADE, _LONGEST = 15, 0.03, 3.0, 20, 600
_SHORTEST, _LAST = 40, 1350
_FFT = 4096
_WINDOW_FADE = 200
#: Deconvolution: bins this far below the strongest count little; a Gaussian low-pass of this width follows [Hz].
_REGULAR, _PASS_HZ = 0.01, 6e6
#: Two copies are at least so far apart: samples, or a share of the delay.
_APART, _APART_SHARE = 12, 0.04
#: A copy stands so many noise levels out of the echogram and has this share of the pulse, else there is none.
_STANDS_OUT, _SMALLEST = 4.5, 0.03
#: So much of a copy is compared with the pulse [samples], in these bands [MHz].
_COMPARED, _COMPARED_FFT = 100, 512
#: A band with less than this share of the pulse's strongest one is not compared.
_LEVEL_SHARE = 1e-3
LEVELS_MHZ = (1.0, 2.5, 5.0, 9.0, 14.0)
_FLANK = 30


class Copy(NamedTuple):
    """One peak of the echogram: delay [samples], height over the pulse's, height over the echogram's own level."""

    delay: int
    ratio: float
    clear: float


def beginning_of(window: Window) -> int:
    """Length of the pulse's beginning [samples from the onset], with what fades of it; 0 = it does not end in time."""
    first = _SHORTEST - _FADE
    own = window.wave[ONSET + first : min(ONSET + _LONGEST, window.last)]
    calm = np.abs(own) < max(_SUNK, _SUNK_LEVELS * window.noise)
    runs = np.convolve(calm, np.ones(_CALM), "valid") >= _CALM - 0.5
    return first + int(np.argmax(runs)) + _FADE if runs.any() else 0


def echogram(window: Window, size: int) -> FloatArray:
    """The window deconvolved by its pulse's beginning, by delay [samples]; 1 at delay 0.

    Wiener deconvolution with the noise beside the pulse, smoothed by a Gaussian of 6 MHz: a copy shows as a peak
    with its sign, whatever the shape of the pulse.
    """
    whole = scipy.fft.rfft(faded(window.wave[ONSET - GUARD : window.last], _WINDOW_FADE), _FFT)
    beginning = scipy.fft.rfft(faded(window.wave[ONSET - GUARD : ONSET + size], _FADE), _FFT)
    power = np.abs(beginning) ** 2
    noise = np.repeat(window.noise_density, 2)[: power.size] * (window.last - ONSET)
    ratio = whole * np.conj(beginning) / (power + noise + _REGULAR * power.max()) * _low_pass()
    found = scipy.fft.irfft(ratio, _FFT)[: window.last - ONSET]
    return np.asarray(found / (np.abs(found[:5]).max() + 1e-9))


def strongest_copies(gram: FloatArray, start: int) -> tuple[Copy | None, Copy | None]:
    """The strongest peak of an echogram and the strongest one apart from it; None where nothing stands out."""
    size = np.abs(gram[start : min(_LAST, gram.size)])
    if size.size < 2 * _APART:
        return None, None
    level = float(np.quantile(np.abs(gram[100:]), 0.9)) / 1.6448536 + 1e-9
    first = _copy_at(gram, int(np.argmax(size)) + start, level)
    apart = max(_APART, round(_APART_SHARE * first.delay))
    near = first.delay - start
    size[max(near - apart, 0) : near + apart + 1] = 0
    second = _copy_at(gram, int(np.argmax(size)) + start, level)
    return (first if _stands_out(first) else None), (second if _stands_out(second) else None)


def measure_copies(window: Window) -> dict[str, float]:
    """The features of this family, by name: NaN where no copy stands out, or the noise is unknown."""
    shape = ("likeness", "width_ns", "flank", *(_level_name(*band) for band in _BANDS))
    places = [f"copy_{number}_{name}" for number in (1, 2) for name in ("delay_us", "ratio")]
    found = dict.fromkeys([*places, *(f"copy_1_{name}" for name in shape), "copy_delay_ratio"], np.nan)
    if not window.noise > 0 or window.last - ONSET < _WINDOW_FADE + 2 * _SHORTEST:
        return found
    size = beginning_of(window)
    if not size:
        return found
    gram = echogram(window, size)
    first, second = strongest_copies(gram, size)
    for number, copy in enumerate((first, second), start=1):
        if copy is not None:
            found |= {f"copy_{number}_delay_us": copy.delay * STEP_NS / 1e3, f"copy_{number}_ratio": copy.ratio}
    if first is not None:
        found |= {f"copy_1_{name}": value for name, value in _shape_of(window, gram, first).items()}
    if first is not None and second is not None:
        early, late = sorted((first.delay, second.delay))
        found["copy_delay_ratio"] = late / early
    return {name: float(value) for name, value in found.items()}


def _copy_at(gram: FloatArray, delay: int, level: float) -> Copy:
    return Copy(delay, float(gram[delay]), float(abs(gram[delay])) / level)


def _stands_out(copy: Copy) -> bool:
    return copy.clear >= _STANDS_OUT and abs(copy.ratio) >= _SMALLEST


def _shape_of(window: Window, gram: FloatArray, copy: Copy) -> dict[str, float]:
    peak = np.sign(copy.ratio) * gram[max(copy.delay - _FLANK, 0) : copy.delay + _FLANK + 1]
    place = min(copy.delay, _FLANK)
    left, right = (_reach(side, abs(copy.ratio) / 2) for side in (peak[place::-1], peak[place:]))
    start = ONSET - GUARD + copy.delay
    later = np.zeros(_COMPARED)
    kept = window.wave[start : min(start + _COMPARED, window.last)]
    later[: kept.size] = kept - kept[:6].mean()
    later, pulse = later * _taper(), window.wave[ONSET - GUARD : ONSET - GUARD + _COMPARED] * _taper()
    alike = float(np.sum(later * pulse) / np.sqrt(np.sum(later**2) * np.sum(pulse**2) + 1e-12))
    found = {
        "likeness": alike,
        "width_ns": (left + right + 1) * STEP_NS,
        "flank": float(peak.min() / abs(copy.ratio)),
    }
    return found | _levels(later, pulse, window.noise_density)


def _reach(side: FloatArray, height: float) -> int:
    """How many samples a peak stays above a height."""
    below = np.flatnonzero(side[1:] <= height)
    return int(below[0]) if below.size else side.size - 1


def _levels(later: FloatArray, pulse: FloatArray, density: FloatArray) -> dict[str, float]:
    """Power of the copy over that of the pulse by band, noise subtracted, not below a third of the noise [dB]."""
    starts = first_bins(LEVELS_MHZ, _COMPARED_FFT)
    power, own = (np.abs(scipy.fft.rfft(wave, _COMPARED_FFT)) ** 2 for wave in (later, pulse))
    noise = density[:: (density.size - 1) * 2 // _COMPARED_FFT] * float(np.sum(_taper() ** 2))
    strengths, references, floors = (band_means(each, starts) for each in (power, own, noise))
    left = np.maximum(strengths - floors, 0.3 * floors + 1e-9)
    level = 10 * np.log10(left / (references + 1e-30))
    level[references <= np.maximum(4 * floors, _LEVEL_SHARE * references.max())] = np.nan
    return {_level_name(low, high): float(each) for (low, high), each in zip(_BANDS, level, strict=True)}


@lru_cache(maxsize=1)
def _low_pass() -> FloatArray:
    return np.asarray(np.exp(-0.5 * (scipy.fft.rfftfreq(_FFT, 1 / ANALYSIS_RATE_HZ) / _PASS_HZ) ** 2))


@lru_cache(maxsize=1)
def _taper() -> FloatArray:
    taper = np.ones(_COMPARED)
    taper[:15] = np.sin(np.arange(15) / 15 * np.pi / 2) ** 2
    taper[-40:] = 0.5 + 0.5 * np.cos(np.pi * np.arange(40) / 40)
    return taper


_BANDS = tuple(pairwise(LEVELS_MHZ))


def _level_name(low: float, high: float) -> str:
    return f"level_{low:g}_{high:g}_db".replace(".", "p")
