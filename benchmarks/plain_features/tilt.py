"""Tilt: how the level and the delay of the first arrival run over frequency, before any echo can.

Skin effect takes away by the root of the frequency and delays by its inverse root, dielectric and semiconducting
screens take away by the frequency. Here by one transform of 256 points and weighted least squares.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import scipy.fft

from plain_features.arrival import COMMON_LOW_HZ, band_means, first_bins, with_common_corner
from plain_features.window import ANALYSIS_BAND_HZ, ANALYSIS_RATE_HZ, GUARD, ONSET, STEP_NS, Window
from pdclass.pulses import FloatArray

EDGES_MHZ = (0.5, 1.3, 2.5, 4.5, 7.0, 10.0, 13.5, 18.0, 25.0)
_LENGTH, _FADE, _FFT = 120, 0.4, 256
#: A band and a bin stand so many times over the noise, and have this share of the strongest.
_CLEAR_BAND, _CLEAR_BIN, _SHARE = 2.0, 6.0, 1e-4
_LEVEL_FROM_MHZ, _DELAY_FROM_MHZ, _FIT_TO_MHZ, _FIT_BINS = 0.7, 2.5, 10.0, 8
_CLEAR_DELAY, _DELAY_REACH_MHZ = 30.0, 6.0
#: A fit that misses more than this is none: a level [dB], a delay [ns, and share of the dispersion].
_MOST_DB, _MOST_NS, _MOST_SHARE = 4.0, 6.0, 0.3
#: Variance of the natural logarithm of the power about a straight line, even without noise.
_MISFIT = 0.01


def measure_tilt(window: Window) -> dict[str, float]:
    """The features of this family, by name: NaN where nothing stands out of the noise, or it is unknown."""
    fits = ("first_root_tilt_db", "first_straight_tilt_db", "first_dispersion_ns")
    found = dict.fromkeys([*(_name(*band) for band in pairwise(EDGES_MHZ)), *fits], np.nan)
    if not window.noise > 0 or window.last < ONSET + _LENGTH:
        return found
    piece, taper = _first_arrival(window)
    spectrum, moment = (scipy.fft.rfft(each, _FFT) for each in (piece, piece * np.arange(piece.size)))
    mhz, power = scipy.fft.rfftfreq(_FFT, 1e6 / ANALYSIS_RATE_HZ), np.abs(spectrum) ** 2
    noise = window.noise_density[:: (window.noise_density.size - 1) * 2 // _FFT] * np.sum(taper**2)
    low_mhz = 0.0
    if window.low_hz > 0:
        low_mhz = COMMON_LOW_HZ / 1e6
        noise = noise * (mhz**2 + (window.low_hz / 1e6) ** 2) / (mhz**2 + low_mhz**2)
    found |= _levels(power, noise)
    with np.errstate(divide="ignore", invalid="ignore"):
        return found | _fits(mhz, power, noise, (np.conj(spectrum) * moment).real / power, low_mhz)


def _first_arrival(window: Window) -> tuple[FloatArray, FloatArray]:
    """The samples behind the common corner, faded out, and what they were weighed with."""
    own = min(window.end - ONSET, _LENGTH)
    fade = max(int(_FADE * own), 1)
    taper = np.zeros(GUARD + _LENGTH)
    taper[: GUARD + own] = 1.0
    taper[GUARD + own - fade : GUARD + own] = 0.5 + 0.5 * np.cos(np.pi * (np.arange(fade) + 0.5) / fade)
    return with_common_corner(window.wave, window.low_hz)[ONSET - GUARD : ONSET + _LENGTH] * taper, taper


def _levels(power: FloatArray, noise: FloatArray) -> dict[str, float]:
    """Mean power of each band over that of all of them, noise subtracted [dB]."""
    starts = first_bins(EDGES_MHZ, _FFT)
    floor, left = band_means(noise, starts), band_means(power - noise, starts)
    mean = float(np.mean((power - noise)[starts[0] : starts[-1]]))
    clear = (left > np.maximum((_CLEAR_BAND - 1) * floor, _SHARE * left.max())) & (mean > 0)
    level = np.full(left.size, np.nan)
    level[clear] = 10 * np.log10(left[clear] / mean)
    return {_name(*band): float(each) for band, each in zip(pairwise(EDGES_MHZ), level, strict=True)}


def _fits(mhz: FloatArray, power: FloatArray, noise: FloatArray, lag: FloatArray, low_mhz: float) -> dict[str, float]:
    """Both tilts [dB] and the dispersion [ns]; what the corner and the analysis band do is undone."""
    most, signal = power.max(), power - noise
    used = (mhz >= _LEVEL_FROM_MHZ) & (mhz <= _FIT_TO_MHZ) & (power > np.maximum(_CLEAR_BIN * noise, _SHARE * most))
    if np.count_nonzero(used) < _FIT_BINS:
        return {}
    f, hidden = mhz[used], noise[used] / signal[used]
    pass_db = 10 * np.log10(2) * (f * 1e6 / ANALYSIS_BAND_HZ[1]) ** 2
    level = 10 * np.log10(signal[used] * (1 + (low_mhz / f) ** 2)) + pass_db
    slopes, missed = _fitted([np.sqrt(f), f], level, 1 / (_MISFIT + 2 * hidden + hidden**2))
    found = {}
    if missed <= _MOST_DB:
        found = {"first_root_tilt_db": slopes[0], "first_straight_tilt_db": slopes[1]}
    sure = used & (mhz >= _DELAY_FROM_MHZ) & (power > _CLEAR_DELAY * noise)
    if np.count_nonzero(sure) < _FIT_BINS or mhz[sure].max() < _DELAY_REACH_MHZ:
        return found
    f = mhz[sure]
    delay_ns = lag[sure] * STEP_NS - 1e3 * low_mhz / (2 * np.pi * (f**2 + low_mhz**2))
    slopes, missed = _fitted([1 / np.sqrt(f)], delay_ns, power[sure] / (0.01 * most + noise[sure]))
    later = slopes[0] * (1 - 1 / np.sqrt(10))
    return found | ({"first_dispersion_ns": later} if missed <= max(_MOST_NS, _MOST_SHARE * abs(later)) else {})


def _fitted(axes: list[FloatArray], values: FloatArray, weight: FloatArray) -> tuple[list[float], float]:
    """Slopes along each axis by weighted least squares, and the weighted rms of what is left."""
    root = np.sqrt(weight)
    basis = np.stack([np.ones(values.size), *axes], axis=1)
    coefficients = np.linalg.lstsq(basis * root[:, None], values * root, rcond=None)[0]
    left = values - basis @ coefficients
    return [float(each) for each in coefficients[1:]], float(np.sqrt(np.sum(weight * left**2) / np.sum(weight)))


def _name(low: float, high: float) -> str:
    return f"first_1p2_level_{low:g}_{high:g}_db".replace(".", "p")
