"""Edges: how fast a pulse rises and falls and how wide it is, by interpolated crossings of its own peak.

The base line is that of the pre-trigger and the top is the peak: the histogram levels of IEEE Std 181 find no
high state in a unipolar pulse.
"""

from __future__ import annotations

import numpy as np

from plain_features.window import GUARD, ONSET, STEP_NS, Window, chance_energy
from pdclass.pulses import FloatArray

_LEVELS = "after IEEE Std 181-2011 (reference levels 10, 50, 90 %), base line and peak in place of histogram levels"
_LONGEST_NS = 15000.0


def crossing(wave: FloatArray, peak: int, level: float, *, forward: bool) -> float:
    """Where the wave passes a level, going from its peak outwards, interpolated [samples]; NaN if nowhere.

    Parameters
    ----------
    wave : (samples,) with the peak at `peak`.
    peak : place of the peak.
    level : in the wave's unit, below the peak.
    forward : towards later samples, else towards earlier ones.
    """
    side = wave[peak:] if forward else wave[peak::-1]
    below = np.flatnonzero(side < level)
    if not below.size:
        return float("nan")
    k = int(below[0])
    if k == 0:
        return float("nan")
    step = k - 1 + (side[k - 1] - level) / (side[k - 1] - side[k])
    return float(peak + step if forward else peak - step)


def crest(wave: FloatArray, peak: int) -> tuple[float, float]:
    """Place [samples] and height of a peak by the parabola through its three highest samples."""
    if not 0 < peak < wave.size - 1:
        return float(peak), float(wave[peak])
    left, middle, right = wave[peak - 1 : peak + 2]
    bend = left - 2 * middle + right
    shift = 0.5 * (left - right) / bend if bend < 0 else 0.0
    return peak + shift, float(middle - 0.25 * (left - right) * shift)


def edge_places(wave: FloatArray, peak: int) -> dict[str, float]:
    """Crossings at 10, 25, 50 and 90 % before and after the peak, and the peak itself [samples].

    Keys are `rise_10` ... `fall_10` and `peak`; NaN where the wave does not come down to the level.
    """
    place, height = crest(wave, peak)
    found = {"peak": place, "height": height}
    for percent in (10, 25, 50, 90):
        found[f"rise_{percent}"] = crossing(wave, peak, height * percent / 100, forward=False)
        found[f"fall_{percent}"] = crossing(wave, peak, height * percent / 100, forward=True)
    return found


def measured_places(window: Window) -> dict[str, float]:
    """Places of the crossings that the features are measured between, from the window's first sample [samples].

    Crossings are looked for among the pulse's own samples, on a running mean over a sixth of the pulse's width (a
    twenty-fourth for the rise): a slow edge in noise crosses a level many times, and the mean, not the first of
    them, is meant. Keys as of `edge_places`, and `raw_10`, `raw_90` on the wave with its carriers,
    `foot_10` on the mean of the widths.
    """
    wave, first = window.edge, ONSET - 2 * GUARD
    width = float(np.sum(wave[np.abs(wave) > max(0.1, 3 * window.noise)] ** 2)) if window.noise > 0 else 0.0
    wide, fine = smoothed(wave, width / 6), smoothed(wave, width / 24)
    raw = smoothed(window.raw[first : window.end], width / 24)
    peak = window.peak - first
    at, rising = edge_places(wide, _near(wide, peak)), edge_places(fine, _near(fine, peak))
    at |= {"foot_10": at["rise_10"], "rise_10": rising["rise_10"], "rise_90": rising["rise_90"]}
    carried = edge_places(raw, _near(raw, peak)) if raw[peak] > 0 else {"rise_10": np.nan, "rise_90": np.nan}
    at |= {"raw_10": carried["rise_10"], "raw_90": carried["rise_90"]}
    return {name: place if name == "height" else place + first for name, place in at.items()}


def measure_edges(window: Window) -> dict[str, float]:
    """The features of this family, by name."""
    at = measured_places(window)
    rise = (at["rise_90"] - at["rise_10"]) * STEP_NS
    fall = (at["fall_10"] - at["fall_90"]) * STEP_NS
    width_50, width_10 = (
        (at[last] - at[first]) * STEP_NS for first, last in (("rise_50", "fall_50"), ("foot_10", "fall_10"))
    )
    return {
        "rise_ns": rise,
        "rise_raw_ns": (at["raw_90"] - at["raw_10"]) * STEP_NS,
        "fall_ns": fall,
        "width_50_ns": width_50,
        "width_10_ns": width_10,
        "width_ratio": width_10 / width_50,
        "asymmetry": fall / rise if rise > 0 else np.nan,
        "tail_ns": _tail_ns(window),
    }


def smoothed(wave: FloatArray, samples: float) -> FloatArray:
    """Running mean over an odd number of samples, the nearest to the one asked for; ends are held."""
    reach = int(samples) // 2
    if reach < 1:
        return wave
    padded = np.concatenate([np.full(reach, wave[0]), wave, np.full(reach, wave[-1])])
    total = np.concatenate([[0.0], np.cumsum(padded)])
    return np.asarray((total[2 * reach + 1 :] - total[: -2 * reach - 1]) / (2 * reach + 1))


def _near(wave: FloatArray, peak: int) -> int:
    """The largest sample within the reach that smoothing moves a peak."""
    first = max(peak - 2 * GUARD, 0)
    return first + int(np.argmax(wave[first : peak + 2 * GUARD + 1]))


def _tail_ns(window: Window) -> float:
    """From the peak until nine tenths of the energy of the own samples have passed, the noise's energy left out."""
    noise = window.noise if window.noise > 0 else 0.0
    energy = np.cumsum(window.wave[ONSET - GUARD : window.end] ** 2 - noise**2)
    if not energy[-1] > chance_energy(noise**2, energy.size):
        return float("nan")
    passed = int(np.argmax(energy >= 0.9 * energy[-1]))
    return float(max(passed + ONSET - GUARD - window.peak, 0)) * STEP_NS
