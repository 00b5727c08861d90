"""Scales: how the energy of the own samples lies among wavelet scales."""

from __future__ import annotations

from math import comb

import numpy as np

from pdclass.compiled import compiled
from pdclass.features.feature import Feature
from pdclass.features.kernels import weighed
from pdclass.features.window import SPECTRUM_FFT, Windows
from pdclass.pulses import FloatArray, WaveArray

LEVELS = 7
MOMENTS = 8
_REFERENCE = (
    "energy by wavelet level, the mean over all shifts: eight vanishing moments (I. Daubechies, Ten Lectures on "
    "Wavelets, 1992); entropy after C. E. Shannon, Bell Syst. Tech. J. 27, 1948 (both from memory)"
)


def scale_gains(levels: int, bins: int) -> FloatArray:
    """Share of the power at each frequency from 0 to half the rate that is energy of each scale, (levels, bins).

    Level j is the first row but j - 1 and holds about rate/2^(j+1) to rate/2^j; with the coarsest approximation the
    shares add up to one. It is what the decimated transform gives on the average over its 2^j places in time, so
    that no shift of the wave changes it; power needs no phase, so that every wavelet of as many moments has it:
    |L|² = 2 cos^2N(w/2) sum_k C(N - 1 + k, k) sin^2k(w/2), N = 8 (I. Daubechies, 1992, from memory).
    """
    angle = np.pi * np.arange(bins) / (bins - 1)
    passed, gains = np.ones(bins), np.empty((levels, bins))
    for level in range(levels):
        low = _half_band(angle * 2**level)
        gains[level], passed = passed * (1 - low), passed * low
    return gains


def measure_scales(windows: Windows) -> FloatArray:
    """The features of this family, (pulses, features); level 1 is left out, it lies above the analysis band."""
    found = np.full((len(windows), len(SCALES)), np.nan)
    _scales_into(found, windows.own_power, _GAINS)
    return found


def _half_band(angle: FloatArray) -> FloatArray:
    """Half of the power gain of the low-pass of one step."""
    sine = np.sin(angle / 2) ** 2
    return np.asarray((1 - sine) ** MOMENTS * sum(comb(MOMENTS - 1 + k, k) * sine**k for k in range(MOMENTS)))


@compiled
def _scales_into(found: FloatArray, power: WaveArray, gains: FloatArray) -> None:  # pragma: no cover - compiled
    """Write evenness and centre of the energies, pulse by pulse."""
    scales = len(gains)
    energies = np.empty(scales)
    for row in range(len(power)):
        for scale in range(scales):
            energies[scale] = weighed(power[row], gains[scale])
        total = energies.sum()
        if not total > 0:
            continue
        entropy, centre = 0.0, 0.0
        for scale in range(scales):
            share = energies[scale] / total
            entropy -= share * np.log(max(share, 1e-12))
            centre += share * (scale + 2)
        found[row, 0], found[row, 1] = entropy / np.log(scales), centre


#: Negative frequencies count as well as positive ones; 0 and half the rate stand alone.
_GAINS = scale_gains(LEVELS, SPECTRUM_FFT // 2 + 1)[1:]
_GAINS[:, [0, -1]] /= 2


#: What a missing value means.
_NOTHING_LEFT = "too little power is left above the noise, or the record ends within the pulse"

SCALES = (
    Feature(
        "scale_evenness",
        "",
        "evenness of the energy over six octaves (wavelet levels) from 0.4 to 25 MHz, 0 (all in one) to 1 (all alike)",
        "evenness of the energy over the octaves from 0.4 to 25 MHz is {value}",
        "more even",
        "more uneven",
        (0.0, 1.0),
        0.07,
        _REFERENCE,
        absent=_NOTHING_LEFT,
        needs_snr_db=6.0,
        edition=2,
    ),
    Feature(
        "scale_mean_level",
        "",
        "mean octave of the energy, a wavelet level from 2 (12.5-25 MHz) to 7 (0.4-0.8 MHz), one more for half the "
        "frequency",
        "mean octave of the energy, from 2 (12.5-25 MHz) to 7 (0.4-0.8 MHz), is {value}",
        "lower in frequency",
        "higher in frequency",
        (2.0, float(LEVELS)),
        0.25,
        _REFERENCE,
        absent=_NOTHING_LEFT,
        needs_snr_db=6.0,
        edition=2,
    ),
)
