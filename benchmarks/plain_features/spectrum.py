"""Spectrum: where the power of the own samples lies, the noise beside the pulse subtracted."""

from __future__ import annotations

import numpy as np

from plain_features.window import Window, chance_energy
from pdclass.pulses import FloatArray

BANDS_MHZ = ((0.1, 1.0), (1.0, 3.0), (3.0, 7.0), (7.0, 14.0), (14.0, 25.0))


def centroid_and_spread_hz(frequency_hz: FloatArray, power: FloatArray) -> tuple[float, float]:
    """Power-weighted mean frequency and the standard deviation about it [Hz]; NaN without power.

    A Gaussian pulse of standard deviation sigma has its one-sided centroid at 0.0897936/sigma.
    """
    total = power.sum()
    if total <= 0:
        return float("nan"), float("nan")
    centre = float(np.sum(frequency_hz * power) / total)
    spread = float(np.sum((frequency_hz - centre) ** 2 * power) / total)
    return centre, float(np.sqrt(spread)) if spread > 0 else float("nan")


def rolloff_hz(frequency_hz: FloatArray, power: FloatArray, share: float) -> float:
    """The first frequency below which a share of the power lies [Hz], interpolated; NaN without power."""
    total = np.cumsum(power)
    if total[-1] <= 0:
        return float("nan")
    k = int(np.argmax(total >= share * total[-1]))
    below = float(total[k - 1]) if k else 0.0
    part = (share * total[-1] - below) / (total[k] - below) if total[k] > below else 0.0
    return float(frequency_hz[k] - (1 - part) * (frequency_hz[1] - frequency_hz[0]))


def measure_spectrum(window: Window) -> dict[str, float]:
    """The features of this family, by name.

    Sums run over power less noise with its sign, so that what is left of the noise cancels.
    """
    frequency_hz, power, noise = window.power()
    signal = power - noise
    if not signal.sum() > chance_energy(noise.sum() / window.own.size, window.own.size):
        return {}
    centre, spread = centroid_and_spread_hz(frequency_hz, signal)
    found = {
        "centroid_mhz": centre / 1e6,
        "spectral_spread_mhz": spread / 1e6,
        "rolloff_85_mhz": rolloff_hz(frequency_hz, signal, 0.85) / 1e6,
        "rolloff_95_mhz": rolloff_hz(frequency_hz, signal, 0.95) / 1e6,
    }
    total = signal.sum()
    for low, high in BANDS_MHZ:
        inside = (frequency_hz >= low * 1e6) & (frequency_hz < high * 1e6)
        share = float(signal[inside].sum() / total)
        found[_band_name(low, high)] = min(max(share, 0.0), 1.0)
    return found


def _band_name(low: float, high: float) -> str:
    return f"share_{low:g}_{high:g}_mhz".replace(".", "p")
