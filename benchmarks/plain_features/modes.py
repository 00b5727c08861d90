"""Modes: the strongest damped oscillation after the peak, by the matrix pencil.

The package takes the signal subspace from lagged products; here it comes from the singular vectors of the lagged
samples themselves, and amplitudes by least squares on the samples.
"""

from __future__ import annotations

import numpy as np
import scipy.linalg

from plain_features.window import ANALYSIS_RATE_HZ, Window

_MOST, _LEAST, _ORDER, _PENCIL = 256, 64, 8, 48
_LEAST_Q, _MOST_Q, _LEAST_SHARE = 0.5, 200.0, 0.05


def measure_modes(window: Window) -> dict[str, float]:
    """The features of this family, by name: NaN where too little follows the peak, or nothing rings."""
    found = dict.fromkeys(("mode_mhz", "mode_q", "mode_share"), np.nan)
    after = window.wave[window.peak : min(window.end, window.peak + _MOST)]
    if after.size < _LEAST or not np.any(after):
        return found
    lagged = scipy.linalg.hankel(after[: after.size - _PENCIL], after[after.size - _PENCIL - 1 :])
    space = np.linalg.svd(lagged, full_matrices=False)[2][:_ORDER].T
    poles = np.linalg.eigvals(np.linalg.pinv(space[:-1]) @ space[1:]).astype(complex)
    poles = poles / np.maximum(np.abs(poles), 1.0)
    powers = poles ** np.arange(after.size)[:, None]
    weights = np.linalg.lstsq(powers, after.astype(complex), rcond=1e-10)[0]
    found["mode_share"] = 0.0
    for pole, weight, power in zip(poles, weights, powers.T, strict=True):
        if pole.imag <= 0 or pole.real == 0:
            continue
        decay = -np.log(np.abs(pole))
        quality = min(np.angle(pole) / (2 * decay), _MOST_Q) if decay > 0 else _MOST_Q
        share = min(np.sum((2 * (weight * power).real) ** 2) / np.sum(after**2), 1.0)
        if quality >= _LEAST_Q and share > found["mode_share"]:
            found["mode_share"] = float(share)
            if share >= _LEAST_SHARE:
                found["mode_mhz"] = float(np.angle(pole) / (2 * np.pi) * ANALYSIS_RATE_HZ / 1e6)
                found["mode_q"] = float(quality)
    return found
