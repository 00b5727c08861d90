"""Spectrum: where the power of the own samples lies, the noise beside the pulse subtracted."""

from __future__ import annotations

import numpy as np

from pdclass.features.feature import Feature
from pdclass.features.window import Window
from pdclass.pulses import FloatArray

#: Where the definitions come from.
_MOMENTS = (
    "moments and quantiles of the power spectrum; roll-off after G. Tzanetakis, P. Cook, IEEE Trans. Speech Audio "
    "Process. 10(5), 293-302, 2002 (from memory)"
)
_SKIN_EFFECT = (
    "loss in dB grows as √f: S. A. Schelkunoff, Bell Syst. Tech. J. 13, 532-579, 1934; slope by least squares"
)
_DIELECTRIC = "own definition; slope by least squares"
BANDS_MHZ = ((0.1, 1.0), (1.0, 3.0), (3.0, 7.0), (7.0, 14.0), (14.0, 25.0))
#: Bins below this share of the largest say nothing about a slope.
_SLOPE_FLOOR = 1e-4
#: A bin stands clear of the noise with so many times its power.
_CLEAR = 10.0


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


def slope_db(frequency_hz: FloatArray, power: FloatArray, *, root: bool, top_hz: float) -> float:
    """Slope of the level from 1 MHz to `top_hz`: against sqrt(f) [dB/sqrt(MHz)] or against f [dB/MHz].

    Skin-effect loss grows as sqrt(f), the loss of dielectric and semiconducting screens rather as f: each
    kilometre of cable tilts the spectrum of what passes.
    """
    if not power.size:
        return float("nan")
    used = (frequency_hz >= 1e6) & (frequency_hz <= top_hz) & (power > _SLOPE_FLOOR * power.max())
    if np.count_nonzero(used) < 16:
        return float("nan")
    mhz = frequency_hz[used] / 1e6
    axis = np.sqrt(mhz) if root else mhz
    level = 10 * np.log10(power[used])
    axis = axis - axis.mean()
    return float(np.sum(axis * (level - level.mean())) / np.sum(axis**2))


def measure_spectrum(window: Window) -> dict[str, float]:
    """The features of this family, by name.

    Sums run over power less noise with its sign, so that what is left of the noise cancels; slopes
    use the bins that stand clear of it.
    """
    frequency_hz, power, noise = window.power()
    signal, clear = power - noise, power > _CLEAR * noise
    centre, spread = centroid_and_spread_hz(frequency_hz, signal)
    top_hz = min(15e6, 0.9 * window.reach_hz)
    found = {
        "centroid_mhz": centre / 1e6,
        "spectral_spread_mhz": spread / 1e6,
        "rolloff_85_mhz": rolloff_hz(frequency_hz, signal, 0.85) / 1e6,
        "rolloff_95_mhz": rolloff_hz(frequency_hz, signal, 0.95) / 1e6,
        "slope_root_db": slope_db(frequency_hz[clear], signal[clear], root=True, top_hz=top_hz),
        "slope_linear_db": slope_db(frequency_hz[clear], signal[clear], root=False, top_hz=top_hz),
    }
    total = signal.sum()
    for low, high in BANDS_MHZ:
        inside = (frequency_hz >= low * 1e6) & (frequency_hz < high * 1e6)
        share = float(signal[inside].sum() / total) if total > 0 else np.nan
        found[_band_name(low, high)] = min(max(share, 0.0), 1.0)
    return found


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
        _MOMENTS,
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
        _SKIN_EFFECT,
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
        _DIELECTRIC,
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
