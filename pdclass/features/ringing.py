"""Ringing: how often a pulse swings through zero and how far it swings back."""

from __future__ import annotations

import numpy as np

from pdclass.compiled import compiled
from pdclass.features.feature import Feature
from pdclass.features.kernels import lowest
from pdclass.features.window import ANALYSIS_RATE_HZ, ONSET, Windows
from pdclass.pulses import FloatArray, IntArray, WaveArray

#: Swings smaller than this share of the peak, or than three noise levels, are not counted.
_SMALLEST_SWING = 0.08


def measure_ringing(windows: Windows) -> FloatArray:
    """The features of this family, (pulses, RINGING)."""
    limit = np.maximum(_SMALLEST_SWING, np.where(windows.noise > 0, 3 * windows.noise, 0.0))
    return _swings(windows.wave, windows.end, windows.peak, limit)


@compiled
def _swings(
    waves: WaveArray, end: IntArray, peak: IntArray, limit: FloatArray
) -> FloatArray:  # pragma: no cover - compiled
    """Changes of sign, their rate over what stands out [1/us], and the lowest samples after and before the peak."""
    found = np.zeros((len(waves), 4))
    for r in range(len(waves)):
        low, sign, swings, first, last = np.float32(limit[r]), 0, 0, -1, -1
        for i in range(ONSET, end[r]):
            value = waves[r, i]
            if abs(value) > low:
                here = 1 if value > 0 else -1
                swings += here == -sign
                sign, last = here, i
                first = i if first < 0 else first
        found[r, 0] = swings
        found[r, 1] = swings / max(last - first, 1) * (ANALYSIS_RATE_HZ / 1e6)
        found[r, 2] = 0.0 - lowest(waves[r, peak[r] : end[r]])
        found[r, 3] = 0.0 - lowest(waves[r, ONSET : peak[r]])
    return found


#: What a missing value means.
_NO_PULSE = "the record ends within the pulse"

RINGING = (
    Feature(
        "swings",
        "",
        "changes of sign among the samples that stand out",
        "number of swings through zero {value}",
        "more",
        "fewer",
        (0.0, 1000.0),
        2,
        "own definition",
        absent=_NO_PULSE,
        needs_snr_db=6.0,
        edition=2,
    ),
    Feature(
        "swings_per_us",
        "1/µs",
        "changes of sign per microsecond of the part that stands out",
        "swings through zero at a rate of {value}",
        "more frequent",
        "rarer",
        (0.0, 100.0),
        0.2,
        "own definition",
        absent=_NO_PULSE,
        needs_snr_db=6.0,
        edition=2,
    ),
    Feature(
        "overshoot",
        "",
        "largest swing to the other side after the peak, over the peak",
        "swing back after the peak {value} of the peak",
        "larger",
        "smaller",
        (0.0, 1.0),
        0.02,
        "own definition",
        absent=_NO_PULSE,
        needs_snr_db=9.0,
        edition=2,
    ),
    Feature(
        "undershoot_before",
        "",
        "largest swing to the other side before the peak, over the peak",
        "swing to the other side before the peak {value} of the peak",
        "larger",
        "smaller",
        (0.0, 1.0),
        0.02,
        "own definition",
        absent=_NO_PULSE,
        needs_snr_db=9.0,
        edition=2,
    ),
)
