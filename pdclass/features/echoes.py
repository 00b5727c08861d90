"""Echoes: the strongest later copy of a pulse within its window."""

from __future__ import annotations

import numba
import numpy as np

from pdclass.features.feature import Feature
from pdclass.features.kernels import largest, median_size, sum_of_squares
from pdclass.features.lines import cut_lines
from pdclass.features.transforms import SpectrumArray, spectra, waves_of
from pdclass.features.window import GUARD, ONSET, SAMPLES, STEP_NS, Windows
from pdclass.pulses import FloatArray, IntArray, WaveArray

_njit = numba.njit(cache=True, nogil=True)

_LONGEST = 300
#: A copy counts from here on, and above so many noise levels of all delays: what carriers leave behind is no copy.
_SMALLEST_RATIO = 0.03
_STANDS_OUT = 7.0
#: The noise level is that of every so many-th delay: neighbours tell nearly the same.
_COMB = 4
#: Only delays at which the whole beginning lies within the window count: none of them wraps round in so few samples.
_FFT = 1536
#: A copy begins after so much of the beginning's energy.
_ENERGY_SHARE = 0.95


def measure_echoes(windows: Windows) -> FloatArray:
    """The features of this family, (pulses, features): NaN where no later copy stands out of the noise.

    The first three microseconds of the pulse are slid over what follows its peak; the best fit in least squares
    gives delay and ratio (negative = turned over). Carriers that were not taken out are cut down first.
    """
    found = np.full((len(windows), len(ECHOES)), np.nan)
    beginning, following, size = _pieces(windows.wave, windows.end, windows.last)
    pulse, whole = spectra(beginning, _FFT), spectra(following, _FFT)
    cut_lines(whole, pulse)
    product = _matched(pulse, whole)
    _echoes_into(found, waves_of(product, _FFT), beginning, size, windows.last, windows.noise)
    return found


@_njit
def _pieces(
    waves: WaveArray, end: IntArray, last: IntArray
) -> tuple[WaveArray, WaveArray, IntArray]:  # pragma: no cover - compiled
    """The beginning of each pulse and all that follows it, padded, and the samples of the beginning."""
    start = ONSET - GUARD
    beginning = np.zeros((len(waves), GUARD + _LONGEST), np.float32)
    following = np.zeros((len(waves), SAMPLES - start), np.float32)
    size = np.empty(len(waves), np.int64)
    for row in range(len(waves)):
        size[row] = min(end[row], ONSET + _LONGEST) - start
        beginning[row, : size[row]] = waves[row, start : start + size[row]]
        following[row, : last[row] - start] = waves[row, start : last[row]]
    return beginning, following, size


@_njit
def _matched(beginning: SpectrumArray, following: SpectrumArray) -> SpectrumArray:  # pragma: no cover - compiled
    """The spectrum of the match, in the place of what follows."""
    for row in range(len(following)):
        pulse, whole = beginning[row], following[row]
        for k in range(whole.size):
            whole[k] *= np.conj(pulse[k])
    return following


@_njit
def _echoes_into(
    found: FloatArray, matches: WaveArray, beginning: WaveArray, size: IntArray, last: IntArray, noise: FloatArray
) -> None:  # pragma: no cover - compiled
    for row in range(len(found)):
        energy = sum_of_squares(beginning[row, : size[row]])
        first = _reached(beginning[row, : size[row]], _ENERGY_SHARE * energy) + GUARD
        usable = last[row] - (ONSET - GUARD) - size[row]
        if usable <= first or not energy > 0 or not noise[row] > 0:
            continue
        match = matches[row, first:usable]
        place = largest(match)
        ratio, level = match[place] / energy, median_size(match[::_COMB].copy()) / 0.6744898 / energy
        if abs(ratio) >= max(_SMALLEST_RATIO, _STANDS_OUT * level):
            found[row, 0], found[row, 1] = (first + place) * STEP_NS / 1e3, ratio


@_njit
def _reached(wave: WaveArray, energy: float) -> int:  # pragma: no cover - compiled
    """The sample at which so much energy has come."""
    total = 0.0
    for i in range(wave.size):
        total += np.float64(wave[i]) * wave[i]
        if total >= energy:
            return i
    return 0


ECHOES = (
    Feature(
        "echo_delay_us",
        "µs",
        "delay of the strongest later copy within the window",
        "later copy after {value}",
        "later",
        "earlier",
        (0.0, 15.0),
        0.03,
        "own definition",
        needs_snr_db=12.0,
        edition=2,
    ),
    Feature(
        "echo_ratio",
        "",
        "height of the strongest later copy over the pulse, negative when turned over",
        "later copy {value} of the pulse",
        "larger",
        "smaller",
        (-2.0, 2.0),
        0.02,
        "own definition",
        needs_snr_db=12.0,
        edition=2,
    ),
)
