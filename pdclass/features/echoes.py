"""Echoes: the strongest later copy of a pulse within its window."""

from __future__ import annotations

import numpy as np
import scipy.fft

from pdclass.features.feature import Feature
from pdclass.features.window import GUARD, ONSET, SAMPLES, STEP_NS, Window

_LONGEST = 300
#: A copy counts from here on, and above so many noise levels of all delays: what carriers leave behind is no copy.
_SMALLEST_RATIO = 0.03
_STANDS_OUT = 7.0


def measure_echoes(window: Window) -> dict[str, float]:
    """The features of this family, by name: NaN where no later copy stands out of the noise.

    The first three microseconds of the pulse are slid over what follows its peak; the best fit in least squares
    gives delay and ratio (negative = turned over).
    """
    nothing = {"echo_delay_us": np.nan, "echo_ratio": np.nan}
    own = window.wave[ONSET - GUARD : min(window.end, ONSET + _LONGEST)]
    energy = float(np.sum(own**2))
    first = int(np.argmax(np.cumsum(own**2) >= 0.95 * energy)) + GUARD
    usable = window.last - (ONSET - GUARD) - own.size
    if usable <= first or energy <= 0 or not window.noise > 0:
        return nothing
    size = scipy.fft.next_fast_len(SAMPLES + own.size)
    following = window.wave[ONSET - GUARD : window.last]
    match = scipy.fft.irfft(np.conj(scipy.fft.rfft(own, size)) * scipy.fft.rfft(following, size), size)[first:usable]
    k = int(np.argmax(np.abs(match)))
    ratio = float(match[k] / energy)
    level = float(np.median(np.abs(match))) / 0.6744898 / energy
    if abs(ratio) < max(_SMALLEST_RATIO, _STANDS_OUT * level):
        return nothing
    return {"echo_delay_us": (first + k) * STEP_NS / 1e3, "echo_ratio": ratio}


ECHOES = (
    Feature(
        "echo_delay_us",
        "µs",
        "delay of the strongest later copy within the window",
        "later copy after {value}",
        "later",
        "earlier",
        (0.0, 15.0),
        0.03,
        "cross-correlation with the pulse; its ratio by least squares (own definition)",
        needs_snr_db=12.0,
        absent="no later copy stands out",
    ),
    Feature(
        "echo_ratio",
        "",
        "height of the strongest later copy over the pulse, negative when turned over",
        "later copy {value} of the pulse",
        "larger",
        "smaller",
        (-2.0, 2.0),
        0.02,
        "cross-correlation with the pulse; its ratio by least squares (own definition)",
        needs_snr_db=12.0,
        absent="no later copy stands out",
    ),
)
