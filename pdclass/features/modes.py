"""Modes: the strongest damped oscillation after the peak, by the matrix pencil.

What follows the peak is taken as a sum of eight damped exponentials: busbars, transformers and sensors ring at their
own frequencies, while what a cable lets through does not. Each pulse is solved alone.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from pdclass.features.feature import Feature
from pdclass.features.window import ANALYSIS_RATE_HZ, STEP_NS, Windows
from pdclass.pulses import FloatArray

ComplexArray = NDArray[np.complex128]

#: Samples after the peak that are used, the fewest that are enough, and the number of exponentials.
MOST, LEAST, ORDER = 256, 64, 8
#: The pencil's parameter: longer windows part modes better and cost more.
_PENCIL = 48
#: Modes that swing back less often than this are no ringing; a quality above the other is not told from none.
_LEAST_Q, _MOST_Q = 0.5, 200.0
#: What holds less of the energy is noise, or mends what the others miss.
_LEAST_SHARE = 0.05
_REFERENCE = "matrix pencil (Y. Hua, T. K. Sarkar, IEEE Trans. ASSP 38(5), 814-824, 1990, from memory)"


class Mode(NamedTuple):
    """One damped oscillation: frequency [Hz], quality Q = pi f tau, energy over that of the samples, its own wave."""

    frequency_hz: float
    quality: float
    share: float
    wave: FloatArray


def poles(wave: FloatArray, order: int = ORDER, pencil: int = _PENCIL) -> ComplexArray:
    """Factors per sample of the damped exponentials that a wave is made of, (order,).

    The signal subspace is that of the largest eigenvalues of the lagged products; white noise moves all of these alike.

    Parameters
    ----------
    wave : (samples,), at least `pencil + order`.
    order : exponentials, two for every real oscillation.
    pencil : lags, more than `order`.

    References
    ----------
    Y. Hua, T. K. Sarkar, IEEE Trans. ASSP 38(5), 814-824, 1990 (from memory).
    """
    lagged = np.lib.stride_tricks.sliding_window_view(wave, pencil + 1)
    space = np.linalg.eigh(lagged.T @ lagged)[1][:, -order:]
    return np.asarray(np.linalg.eigvals(np.linalg.lstsq(space[:-1], space[1:], rcond=None)[0]), np.complex128)


def oscillations(wave: FloatArray, rate_hz: float) -> list[Mode]:
    """The damped oscillations of a wave, the strongest first.

    What grows is taken as undamped. Modes are not orthogonal: shares need not sum to 1, each is at most 1.

    Parameters
    ----------
    wave : (samples,), at least `LEAST`.
    rate_hz : samples a second [Hz].
    """
    found = poles(wave)
    found = found / np.maximum(np.abs(found), 1.0)
    found = found[np.abs(found) > 0]
    powers = found ** np.arange(wave.size)[:, None]
    weights = np.linalg.lstsq(powers.conj().T @ powers, powers.conj().T @ wave, rcond=1e-10)[0]
    energy = float(np.sum(wave**2))
    modes = []
    for pole, weight, power in zip(found, weights, powers.T, strict=True):
        turn, decay = float(np.angle(pole)), float(-np.log(np.abs(pole)))
        if pole.imag <= 0 or pole.real == 0:
            continue
        quality = min(turn / (2 * decay), _MOST_Q) if decay > 0 else _MOST_Q
        own = 2 * (weight * power).real
        modes.append(Mode(turn / (2 * np.pi) * rate_hz, quality, min(float(np.sum(own**2)) / energy, 1.0), own))
    return sorted(modes, key=lambda mode: -mode.share)


def measure_modes(windows: Windows) -> FloatArray:
    """The features of this family, (pulses, features): NaN where too little follows the peak.

    Where nothing rings the share is small, and frequency and quality are NaN.
    """
    found = np.full((len(windows), len(MODES)), np.nan)
    for row, (wave, peak, end) in enumerate(zip(windows.wave, windows.peak, windows.end, strict=True)):
        after = wave[peak : min(end, peak + MOST)].astype(np.float64)
        if after.size < LEAST or not np.any(after):
            continue
        ringing = [mode for mode in oscillations(after, ANALYSIS_RATE_HZ) if mode.quality >= _LEAST_Q]
        found[row, 2] = ringing[0].share if ringing else 0.0
        if ringing and ringing[0].share >= _LEAST_SHARE:
            found[row, :2] = ringing[0].frequency_hz / 1e6, ringing[0].quality
    return found


#: What a missing value means.
_TOO_SHORT = f"the pulse ends sooner than {LEAST * STEP_NS:.0f} ns after its peak"
_NO_RINGING = f"nothing rings strongly enough, or {_TOO_SHORT}"

MODES = (
    Feature(
        "mode_mhz",
        "MHz",
        "frequency of the strongest damped oscillation after the peak",
        "rings at {value}",
        "higher",
        "lower",
        (0.0, 50.0),
        0.3,
        _REFERENCE,
        absent=_NO_RINGING,
        needs_snr_db=12.0,
    ),
    Feature(
        "mode_q",
        "",
        "quality factor of the strongest damped oscillation after the peak",
        "rings with a quality factor of {value}",
        "less damped",
        "more damped",
        (_LEAST_Q, _MOST_Q),
        0.5,
        _REFERENCE,
        absent=_NO_RINGING,
        needs_snr_db=12.0,
    ),
    Feature(
        "mode_share",
        "",
        "share of the energy after the peak that the strongest damped oscillation holds",
        "share of the strongest ringing in the energy after the peak is {value}",
        "larger",
        "smaller",
        (0.0, 1.0),
        0.05,
        _REFERENCE,
        absent=_TOO_SHORT,
        needs_snr_db=12.0,
    ),
)
