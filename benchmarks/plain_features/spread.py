"""Spread: how long and how broad a pulse is in all, and what comes late in it."""

from __future__ import annotations

import numpy as np
import scipy.fft

from plain_features.window import ANALYSIS_RATE_HZ, GUARD, ONSET, STEP_NS, Window, chance_energy
from pdclass.pulses import FloatArray

#: So far below the pulse nothing tells of the path any more.
_LOWEST_DB = -60.0
#: Stretches after the peak [us] whose level is measured: late, weak structure tells of the path.
LATE_US = ((0.3, 0.6), (0.6, 1.2))

_CONTIN = "A. Contin et al., IEEE Trans. Dielectr. Electr. Insul. 9(3), 335-348, 2002 (from memory)"


def equivalent_spread(wave: FloatArray, rate_hz: float, noise: float = 0.0) -> tuple[float, float]:
    """Equivalent time length T [s] and bandwidth W [Hz] of a wave; T W >= 1/(4 pi) without noise.

    T² = second moment of the energy in time about its centre, W² = second moment of the spectral energy in
    frequency about zero, two-sided; the mean energy of white noise of the given level is taken out of both. NaN
    where no more is left than noise may leave.

    References
    ----------
    A. Contin, A. Cavallini, G. C. Montanari, G. Pasini, F. Puletti, IEEE TDEI 9(3), 335-348, 2002 (from memory).
    """
    energy = wave**2 - noise**2
    total = energy.sum()
    if total <= 0:
        return float("nan"), float("nan")
    time_s = np.arange(wave.size) / rate_hz
    centre = np.sum(time_s * energy) / total
    away = (time_s - centre) ** 2
    length = np.sum(away * energy) / total
    chance = 3 * noise**2 * np.sqrt(2 * (np.sum(away**2) + np.sum(away) ** 2 / 200))
    if length * total <= chance:
        length = np.nan
    size = scipy.fft.next_fast_len(2 * wave.size)
    power = np.abs(scipy.fft.fft(wave, size)) ** 2 - wave.size * noise**2
    width = np.sum(scipy.fft.fftfreq(size, 1 / rate_hz) ** 2 * power) / power.sum()
    return float(np.sqrt(length)) if length > 0 else float("nan"), float(np.sqrt(width)) if width > 0 else float("nan")


def measure_spread(window: Window) -> dict[str, float]:
    """The features of this family, by name, all on the pulse's own samples."""
    noise = window.noise if window.noise > 0 else 0.0
    length_s, _ = equivalent_spread(window.own, ANALYSIS_RATE_HZ, noise)
    energy = window.wave[ONSET - GUARD : window.end] ** 2 - noise**2
    peak = window.peak - (ONSET - GUARD)
    total = energy.sum()
    beginning = energy[GUARD : GUARD + 200]
    clear = total > chance_energy(noise**2, energy.size)
    spiky = beginning.sum() > chance_energy(noise**2, beginning.size)
    found = {
        "equivalent_length_ns": length_s * 1e9,
        "equivalent_width_mhz": _width_mhz(window),
        "onset_to_peak_ns": max(window.peak - ONSET, 0) * STEP_NS,
        "energy_before_peak": float((energy[:peak].sum() + energy[peak] / 2) / total) if clear else np.nan,
        "crest_factor": float(1 / np.sqrt(beginning.sum() / 200)) if spiky else np.nan,
    }
    return found | {_late_name(first, last): _late_level_db(window, first, last) for first, last in LATE_US}


def _width_mhz(window: Window) -> float:
    """Root of the second moment of the power less noise, within the analysis band [MHz]."""
    frequency_hz, power, noise = window.power()
    signal = power - noise
    total, moment = signal.sum(), np.sum(frequency_hz**2 * signal)
    clear = total > chance_energy(noise.sum() / window.own.size, window.own.size)
    return float(np.sqrt(moment / total)) / 1e6 if clear and moment > 0 else float("nan")


def _late_level_db(window: Window, first_us: float, last_us: float) -> float:
    """Power in a stretch after the peak over that of the pulse up to 0.3 us after it, noise subtracted [dB].

    NaN where the stretch leaves the pulse's own samples, where it does not stand out of the noise, or where the
    noise is unknown.
    """
    first, last = (window.peak + round(edge * ANALYSIS_RATE_HZ / 1e6) for edge in (first_us, last_us))
    core = window.wave[ONSET - GUARD : window.peak + 30]
    if first >= window.end or not window.noise > 0:
        return float("nan")
    stretch = window.wave[first : min(last, window.end)]
    power = float(np.mean(stretch**2)) - window.noise**2
    if power <= 3 * window.noise**2 * np.sqrt(2 / stretch.size):
        return float("nan")
    return float(max(10 * np.log10(power / (np.mean(core**2) - window.noise**2)), _LOWEST_DB))


def _late_name(first_us: float, last_us: float) -> str:
    return f"late_{first_us:g}_{last_us:g}_db".replace(".", "p")
