"""Wavelets (the only user of pywt): energy and noise per scale, shrinkage, and a plain detector to compare with.

The detector is what one would write with a wavelet library: every scale against its own noise level. The extraction
does not use it; it stays as the reference that the extraction is measured against.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from functools import cache
from typing import Any, Literal

import numpy as np
import pywt
from numpy.typing import NDArray

from pdclass.errors import InputError
from pdclass.pulses import FloatArray, IntArray

WAVELET = "sym8"
#: Median of |z| of a standard normal z: Phi^-1(3/4).
MAD_OF_NORMAL = 0.6744897501960817
#: The plain detector: short wavelet, six octaves below the Nyquist frequency, events at least 3 us apart at 100 MS/s.
DETECTOR_WAVELET, DETECTOR_LEVELS, DETECTOR_APART = "db4", 6, 300
#: So many coefficients serve the noise level of a scale: more tell nearly the same.
_ENOUGH = 32_768

Rule = Literal["universal", "minimax", "sure"]
Shrink = Literal["soft", "hard"]
Transform = Literal["decimated", "undecimated"]
Samples = NDArray[np.floating[Any]]


def scale_energies(wave: FloatArray, levels: int) -> FloatArray:
    """Energy of the wavelet detail at every level, the finest first.

    Parameters
    ----------
    wave : (samples,) any unit; extended by zeros, so the ends add nothing.
    levels : number of levels; level j holds about rate/2^(j+1) to rate/2^j [Hz].

    Returns
    -------
    (levels,) sum of squared coefficients [unit²].
    """
    details = pywt.wavedec(wave, WAVELET, mode="zero", level=levels)[1:]
    return np.array([float(np.sum(detail**2)) for detail in reversed(details)])


@dataclass(frozen=True)
class Scales:
    """The orthogonal transform of a wave: it keeps the energy, and white noise stays white with the same deviation.

    Attributes
    ----------
    details : one array a level, the finest first [unit of the wave].
    rest : what the coarsest level leaves [unit of the wave].
    samples : length of the wave.
    wavelet : name in pywt, orthogonal.
    """

    details: tuple[Samples, ...]
    rest: Samples
    samples: int
    wavelet: str


def decimated(wave: Samples, levels: int, wavelet: str = WAVELET) -> Scales:
    """Transform a wave (samples,), taken as periodic; level j keeps every 2^j-th coefficient."""
    rest, *details = pywt.wavedec(wave, wavelet, mode="periodization", level=levels)
    return Scales(tuple(reversed(details)), rest, wave.size, wavelet)


def composed(scales: Scales) -> Samples:
    """The wave (samples,) of a transform: the inverse of `decimated`."""
    parts = [scales.rest, *reversed(scales.details)]
    return np.asarray(pywt.waverec(parts, scales.wavelet, mode="periodization"))[: scales.samples]


def undecimated(wave: Samples, levels: int, wavelet: str = WAVELET) -> tuple[Samples, ...]:
    """Details (samples,) of every level, the finest first; white noise has the same deviation at each.

    The wave is continued by its mirror image to a multiple of 2^levels samples, then taken as periodic.
    """
    longer = np.pad(wave, (0, -wave.size % (1 << levels)), mode="symmetric")
    details = pywt.swt(longer, wavelet, level=levels, trim_approx=True)[1:]
    return tuple(detail[: wave.size] for detail in reversed(details))


def noise_level(coefficients: Samples) -> float:
    """MAD/0.6745, the deviation of noise that a few large coefficients hardly move (Donoho and Johnstone, 1994).

    Of a long array a comb of at least 32,768 coefficients serves.
    """
    comb = np.abs(coefficients[:: max(1, coefficients.size // _ENOUGH)])
    return float(np.median(comb)) / MAD_OF_NORMAL


def soft(coefficients: Samples, threshold: float) -> Samples:
    """Every coefficient moved towards zero by the threshold, those within it to zero."""
    return np.sign(coefficients) * np.maximum(np.abs(coefficients) - threshold, 0)


def hard(coefficients: Samples, threshold: float) -> Samples:
    """Coefficients within the threshold set to zero, the others as they are."""
    return np.where(np.abs(coefficients) > threshold, coefficients, 0)


def universal_factor(count: int) -> float:
    """sqrt(2 ln n), in noise levels (D. L. Donoho, I. M. Johnstone, Biometrika 81, 425-455, 1994); count >= 1."""
    return float(np.sqrt(2 * np.log(count)))


def minimax_factor(count: int) -> float:
    """The threshold with the least worst ratio to an oracle's risk, in noise levels; count >= 2.

    It solves (n + 1) r(t, 0) = 1 + t², r the risk of soft thresholding (Donoho and Johnstone, 1994, section 2.2; from
    memory).
    """
    low, high = 0.0, universal_factor(count) + 1.0
    for _ in range(60):
        middle = 0.5 * (low + high)
        if (count + 1) * _risk_at_zero(middle) > 1 + middle**2:
            low = middle
        else:
            high = middle
    return high


def _risk_at_zero(threshold: float) -> float:
    """Mean square of a standard normal after soft thresholding."""
    density = math.exp(-0.5 * threshold**2) / math.sqrt(2 * math.pi)
    beyond = 0.5 * math.erfc(threshold / math.sqrt(2))
    return 2 * ((1 + threshold**2) * beyond - threshold * density)


def sure_factor(coefficients: Samples) -> float:
    """The threshold with the least unbiased estimate of the risk of soft thresholding, in noise levels.

    n - 2 #{|d| <= t} + sum min(|d|, t)² over t among the |d| up to the universal factor; where the coefficients are
    so sparse that the estimate is too noisy, the universal factor (D. L. Donoho, I. M. Johnstone, JASA 90, 1200-1224,
    1995; the test of sparseness from memory).

    Parameters
    ----------
    coefficients : (n,) in noise levels, n >= 2.
    """
    count, universal = coefficients.size, universal_factor(coefficients.size)
    squares = np.sort(np.asarray(coefficients, np.float64) ** 2)
    if squares.mean() - 1 <= np.log2(count) ** 1.5 / np.sqrt(count):
        return universal
    below = np.arange(1, count + 1)
    risks = count - 2 * below + np.cumsum(squares) + (count - below) * squares
    allowed = squares <= universal**2
    best = int(np.argmin(np.where(allowed, risks, np.inf)))
    return float(np.sqrt(squares[best])) if allowed[best] and risks[best] < count else 0.0


def shrunk(
    scales: Scales, rule: Rule = "universal", shrink: Shrink = "soft", noise: float | Literal["finest", "each"] = "each"
) -> Scales:
    """Details shrunk towards zero, the rest as it is.

    Parameters
    ----------
    scales : of the noisy wave.
    rule : how far; `universal` and `minimax` count the samples of the wave, `sure` looks at each level alone.
    shrink : how.
    noise : deviation of the noise [unit of the wave], or whose estimate serves: the `finest` level's for white noise,
        `each` level's own for coloured.
    """
    action = soft if shrink == "soft" else hard
    details = []
    for detail in scales.details:
        chosen = scales.details[0] if noise == "finest" else detail
        level = noise_level(chosen) if isinstance(noise, str) else noise
        details.append(action(detail, level * _factor(detail / level, rule, scales.samples)) if level > 0 else detail)
    return replace(scales, details=tuple(details))


def _factor(normed: Samples, rule: Rule, samples: int) -> float:
    if rule == "sure":
        return sure_factor(normed)
    return universal_factor(samples) if rule == "universal" else minimax_factor(samples)


@dataclass(frozen=True)
class Crossings:
    """Wavelet coefficients that leave the noise, each array (crossings,).

    Attributes
    ----------
    place : sample at the middle of the coefficient's wavelet.
    level : from 1, the finest.
    size : in noise levels of its scale.
    """

    place: IntArray
    level: IntArray
    size: FloatArray


def reference_events(
    counts: NDArray[Any],
    threshold: float,
    *,
    transform: Transform = "decimated",
    apart: int = DETECTOR_APART,
) -> IntArray:
    """The plain detector: places (events,) where any scale exceeds `threshold` times its own noise level.

    Parameters
    ----------
    counts : (samples,) of a record or a part of it, read whole into memory.
    threshold : in noise levels, > 0; what false events it gives is for the caller to measure.
    transform : with or without decimation.
    apart : crossings closer than so many samples are one event.

    Raises
    ------
    InputError
        If a scale holds no noise.
    """
    return crossing_events(scale_crossings(counts, threshold, transform), threshold, apart)


def scale_crossings(counts: NDArray[Any], threshold: float, transform: Transform = "decimated") -> Crossings:
    """Every coefficient above `threshold` noise levels of its scale; arguments and errors as `reference_events`."""
    wave = np.asarray(counts, np.float32)
    if transform == "decimated":
        details = decimated(wave, DETECTOR_LEVELS, DETECTOR_WAVELET).details
    else:
        details = undecimated(wave, DETECTOR_LEVELS, DETECTOR_WAVELET)
    places, levels, sizes = [], [], []
    for level, detail in enumerate(details, 1):
        noise = noise_level(detail)
        if not noise > 0:
            raise InputError(f"wavelet level {level}: no noise in the record (most samples are equal)")
        size = np.abs(detail)
        above = np.flatnonzero(size > np.float32(threshold * noise))
        step = level if transform == "decimated" else 0
        places.append((above << step) + _middle(level, transform))
        levels.append(np.full(above.size, level))
        sizes.append(size[above] / noise)
    return Crossings(np.concatenate(places), np.concatenate(levels), np.concatenate(sizes).astype(np.float64))


def crossing_events(crossings: Crossings, threshold: float, apart: int = DETECTOR_APART) -> IntArray:
    """Places (events,) of groups of crossings: where the finest scale of each group first crosses, in order."""
    kept = crossings.size > threshold
    place, level = crossings.place[kept], crossings.level[kept]
    order = np.argsort(place, kind="stable")
    place, level = place[order], level[order]
    group = np.cumsum(np.diff(place, prepend=place[:1]) > apart)
    finest_first = np.lexsort((place, level, group))
    firsts = np.unique(group[finest_first], return_index=True)[1]
    return np.asarray(place[finest_first][firsts], np.int64)


@cache
def _middle(level: int, transform: Transform) -> int:
    """From a coefficient's own sample to the middle of the energy of its wavelet [samples]."""
    samples = 64 << level
    if transform == "decimated":
        empty = decimated(np.zeros(samples), level, DETECTOR_WAVELET)
        empty.details[-1][32] = 1.0
        return round(_energy_middle(composed(empty))) - (32 << level)
    impulse = np.zeros(samples)
    impulse[samples // 2] = 1.0
    return samples // 2 - round(_energy_middle(undecimated(impulse, level, DETECTOR_WAVELET)[-1]))


def _energy_middle(wave: Samples) -> float:
    return float(np.sum(np.arange(wave.size) * wave**2) / np.sum(wave**2))
