"""Spectrum: where the power of the own samples lies, the noise beside the pulse subtracted."""

from __future__ import annotations

import numpy as np

from pdclass.compiled import compiled
from pdclass.features.feature import Feature
from pdclass.features.kernels import chance_energy, sum_between, weighed
from pdclass.features.window import BAND, BAND_HZ, GUARD, ONSET, Windows
from pdclass.pulses import FloatArray, IntArray, WaveArray

#: Where the definitions come from.
_MOMENTS = (
    "moments and quantiles of the power spectrum; roll-off after G. Tzanetakis, P. Cook, IEEE Trans. Speech Audio "
    "Process. 10(5), 293-302, 2002 (from memory)"
)
BANDS_MHZ = ((0.1, 1.0), (1.0, 3.0), (3.0, 7.0), (7.0, 14.0), (14.0, 25.0))
_STARTS = np.searchsorted(BAND_HZ, [low * 1e6 for low, _ in BANDS_MHZ] + [BANDS_MHZ[-1][1] * 1e6])


def measure_spectrum(windows: Windows) -> FloatArray:
    """The features of this family, (pulses, features).

    Sums run over power less noise with its sign, so that what is left of the noise cancels; NaN where it may be all
    that is left. Noise that is unknown counts as none.
    """
    found = np.full((len(windows), len(SPECTRUM)), np.nan)
    band = BAND.start, BAND.stop
    size = windows.end - ONSET + GUARD
    _spectra_into(found, windows.own_power, windows.noise_power, size, band, BAND_HZ / 1e6, _STARTS)
    return found


@compiled
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


@compiled
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


@compiled
def _spectra_into(
    found: FloatArray,
    powers: WaveArray,
    noises: WaveArray,
    size: IntArray,
    band: tuple[int, int],
    mhz: FloatArray,
    starts: IntArray,
) -> None:  # pragma: no cover - compiled
    """Write the features in the order of `SPECTRUM`, pulse by pulse."""
    signal, noise = np.empty(mhz.size), np.empty(mhz.size, np.float32)
    for row in range(len(powers)):
        known = noises[row, 0] >= 0
        for k in range(mhz.size):
            noise[k] = noises[row, band[0] + k] if known else np.float32(0)
            signal[k] = np.float64(powers[row, band[0] + k]) - noise[k]
        total = sum_between(signal, 0, signal.size)
        if not total > chance_energy(sum_between(noise, 0, noise.size) / size[row], size[row]):
            continue
        found[row, 0], found[row, 1] = centroid_and_spread(mhz, signal)
        found[row, 2], found[row, 3] = rolloff(mhz, signal, 0.85), rolloff(mhz, signal, 0.95)
        for place in range(starts.size - 1):
            share = sum_between(signal, starts[place], starts[place + 1]) / total
            found[row, 4 + place] = min(max(share, 0.0), 1.0)


#: What a missing value means.
_NOTHING_LEFT = "too little power is left above the noise, or the record ends within the pulse"


def _band_name(low: float, high: float) -> str:
    return f"share_{low:g}_{high:g}_mhz".replace(".", "p")


def _frequency(
    name: str, meaning: str, sentence: str, tolerance: float, words: tuple[str, str] = ("higher", "lower")
) -> Feature:
    return Feature(
        name,
        "MHz",
        meaning,
        sentence,
        *words,
        (0.0, 25.0),
        tolerance,
        _MOMENTS,
        absent=_NOTHING_LEFT,
        needs_snr_db=6.0,
        edition=2,
    )


SPECTRUM = (
    _frequency(
        "centroid_mhz", "centre of the spectrum (power-weighted mean frequency)", "centre of the spectrum {value}", 0.1
    ),
    _frequency(
        "spectral_spread_mhz",
        "width of the spectrum (standard deviation about its centre)",
        "width of the spectrum (standard deviation) {value}",
        0.1,
        ("broader", "narrower"),
    ),
    _frequency(
        "rolloff_85_mhz", "frequency that 85 % of the power lies below", "85 % of the power lies below {value}", 0.1
    ),
    _frequency(
        "rolloff_95_mhz", "frequency that 95 % of the power lies below", "95 % of the power lies below {value}", 0.2
    ),
    *(
        Feature(
            _band_name(low, high),
            "",
            f"share of the power between {low:g} and {high:g} MHz",
            f"share of the power at {low:g}-{high:g} MHz is {{value}}",
            "larger",
            "smaller",
            (0.0, 1.0),
            0.005,
            "own definition",
            absent=_NOTHING_LEFT,
            needs_hz=0.8 * high * 1e6,
            needs_snr_db=6.0,
            edition=2,
        )
        for low, high in BANDS_MHZ
    ),
)
