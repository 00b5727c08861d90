"""Spectrum: where the power of the own samples lies, the noise beside the pulse subtracted."""

from __future__ import annotations

import numba
import numpy as np

from pdclass.features.feature import Feature
from pdclass.features.kernels import sum_between, weighed
from pdclass.features.window import BAND, BAND_HZ, Windows
from pdclass.pulses import FloatArray, IntArray, WaveArray

_njit = numba.njit(cache=True, nogil=True)

BANDS_MHZ = ((0.1, 1.0), (1.0, 3.0), (3.0, 7.0), (7.0, 14.0), (14.0, 25.0))
#: Slopes begin at this frequency and end at this one, or where the chain's reach ends: a share of it.
_SLOPE_HZ, _REACH_SHARE = (1e6, 15e6), 0.9
#: Bins below this share of the largest say nothing about a slope, and fewer bins than these neither.
_SLOPE_FLOOR, _FEWEST_BINS = 1e-4, 16
#: A bin stands clear of the noise with so many times its power.
_CLEAR = 10.0
_STARTS = np.searchsorted(BAND_HZ, [low * 1e6 for low, _ in BANDS_MHZ] + [BANDS_MHZ[-1][1] * 1e6])


def measure_spectrum(windows: Windows) -> FloatArray:
    """The features of this family, (pulses, features).

    Sums run over power less noise with its sign, so that what is left of the noise cancels; slopes
    use the bins that stand clear of it. Noise that is unknown counts as none.
    """
    found = np.full((len(windows), len(SPECTRUM)), np.nan)
    top_hz = np.minimum(_SLOPE_HZ[1], _REACH_SHARE * windows.reach_hz)
    band = BAND.start, BAND.stop
    _spectra_into(found, windows.own_power, windows.noise_power, band, BAND_HZ / 1e6, _STARTS, top_hz / 1e6)
    return found


@_njit
def centroid_and_spread(mhz: FloatArray, power: FloatArray) -> tuple[float, float]:  # pragma: no cover - compiled
    """Power-weighted mean frequency and the standard deviation about it [as `mhz`]; NaN without power.

    A Gaussian pulse of standard deviation sigma has its one-sided centroid at 0.0897936/sigma.
    """
    total = sum_between(power, 0, power.size)
    if not total > 0:
        return np.nan, np.nan
    centre = weighed(power, mhz) / total
    square = weighed(power, mhz**2) / total - centre**2
    return centre, np.sqrt(square) if square > 0 else np.nan


@_njit
def rolloff(mhz: FloatArray, power: FloatArray, share: float) -> float:  # pragma: no cover - compiled
    """The first frequency below which a share of the power lies [as `mhz`], interpolated; NaN without power."""
    wanted = share * sum_between(power, 0, power.size)
    if not wanted > 0:
        return np.nan
    below = 0.0
    for k in range(power.size):
        if below + power[k] >= wanted:
            return float(mhz[k] - (1 - (wanted - below) / power[k]) * (mhz[1] - mhz[0]))
        below += power[k]
    return float(mhz[-1])


@_njit
def slopes_db(
    mhz: FloatArray, power: FloatArray, noise: WaveArray, top_mhz: float
) -> tuple[float, float]:  # pragma: no cover - compiled
    """Slope of the level from 1 MHz to `top_mhz`, against sqrt(f) [dB/sqrt(MHz)] and against f [dB/MHz].

    `power` is without the noise, and bins that do not stand clear of it are not used. Skin-effect loss grows as
    sqrt(f), the loss of dielectric and semiconducting screens rather as f: each kilometre of cable tilts the
    spectrum of what passes.
    """
    largest = 0.0
    for k in range(power.size):
        largest = max(largest, power[k] if power[k] > (_CLEAR - 1) * noise[k] else 0.0)
    count, level, roots, root_level, linears, squares, linear_level = 0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0
    for k in range(power.size):
        inside = _SLOPE_HZ[0] / 1e6 <= mhz[k] <= top_mhz
        if inside and power[k] > (_CLEAR - 1) * noise[k] and power[k] > _SLOPE_FLOOR * largest:
            here, root = np.log(power[k]), np.sqrt(mhz[k])
            count += 1
            level += here
            roots += root
            root_level += root * here
            linears += mhz[k]
            squares += mhz[k] * mhz[k]
            linear_level += mhz[k] * here
    if count < _FEWEST_BINS:
        return np.nan, np.nan
    decibels = 10 / np.log(10.0)
    return (
        decibels * (root_level - roots * level / count) / (linears - roots * roots / count),
        decibels * (linear_level - linears * level / count) / (squares - linears * linears / count),
    )


@_njit
def _spectra_into(
    found: FloatArray,
    powers: WaveArray,
    noises: WaveArray,
    band: tuple[int, int],
    mhz: FloatArray,
    starts: IntArray,
    top_mhz: FloatArray,
) -> None:  # pragma: no cover - compiled
    """Write the features in the order of `SPECTRUM`, pulse by pulse."""
    signal, noise = np.empty(mhz.size), np.empty(mhz.size, np.float32)
    for row in range(len(powers)):
        known = noises[row, 0] >= 0
        for k in range(mhz.size):
            noise[k] = noises[row, band[0] + k] if known else np.float32(0)
            signal[k] = np.float64(powers[row, band[0] + k]) - noise[k]
        found[row, 0], found[row, 1] = centroid_and_spread(mhz, signal)
        found[row, 2], found[row, 3] = rolloff(mhz, signal, 0.85), rolloff(mhz, signal, 0.95)
        found[row, 4], found[row, 5] = slopes_db(mhz, signal, noise, top_mhz[row])
        total = sum_between(signal, 0, signal.size)
        for place in range(starts.size - 1):
            share = sum_between(signal, starts[place], starts[place + 1]) / total if total > 0 else np.nan
            found[row, 6 + place] = min(max(share, 0.0), 1.0)


def _band_name(low: float, high: float) -> str:
    return f"share_{low:g}_{high:g}_mhz".replace(".", "p")


def _frequency(name: str, meaning: str, sentence: str, tolerance: float) -> Feature:
    return Feature(
        name,
        "MHz",
        meaning,
        sentence,
        "higher",
        "lower",
        (0.0, 25.0),
        tolerance,
        "own definition",
        needs_snr_db=6.0,
    )


SPECTRUM = (
    _frequency(
        "centroid_mhz", "centre of the spectrum (power-weighted mean frequency)", "centre of the spectrum {value}", 0.1
    ),
    _frequency(
        "spectral_spread_mhz",
        "width of the spectrum (standard deviation about its centre)",
        "width of the spectrum {value}",
        0.1,
    ),
    _frequency("rolloff_85_mhz", "85 % of the power lies below", "85 % of the power below {value}", 0.1),
    _frequency("rolloff_95_mhz", "95 % of the power lies below", "95 % of the power below {value}", 0.2),
    Feature(
        "slope_root_db",
        "dB/√MHz",
        "tilt of the level against the root of the frequency, the mark of skin effect",
        "tilt of the spectrum {value}",
        "rises more",
        "falls more steeply",
        (-500.0, 500.0),
        0.5,
        "own definition",
        needs_hz=6e6,
        needs_snr_db=24.0,
    ),
    Feature(
        "slope_linear_db",
        "dB/MHz",
        "tilt of the level against the frequency, the mark of screens and dielectric",
        "straight tilt of the spectrum {value}",
        "rises more",
        "falls more steeply",
        (-200.0, 200.0),
        0.2,
        "own definition",
        needs_hz=6e6,
        needs_snr_db=24.0,
    ),
    *(
        Feature(
            _band_name(low, high),
            "",
            f"share of the power between {low:g} and {high:g} MHz",
            f"share of the power at {low:g}-{high:g} MHz {{value}}",
            "larger",
            "smaller",
            (0.0, 1.0),
            0.005,
            "own definition",
            needs_hz=0.8 * high * 1e6,
            needs_snr_db=6.0,
        )
        for low, high in BANDS_MHZ
    ),
)
