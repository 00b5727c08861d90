"""Scales: how the energy of the own samples lies among wavelet scales.

One discrete wavelet transform, so one place of its grid: energies move as the pulse is shifted against it. The package
takes the mean over all shifts, and its values are other ones on purpose; they are not compared.
"""

from __future__ import annotations

import numpy as np

from plain_features.window import Window
from pdclass.wavelets import scale_energies

LEVELS = 7
#: Every pulse is padded to one length, so that the coarsest scale has room.
_PADDED = 2048


def measure_scales(window: Window) -> dict[str, float]:
    """The features of this family, by name; level 1 is left out, it lies above the analysis band."""
    own = np.zeros(_PADDED)
    own[: window.own.size] = window.own
    energies = scale_energies(own, LEVELS)[1:]
    total = energies.sum()
    if total <= 0:
        return {"scale_evenness": np.nan, "scale_mean_level": np.nan}
    share = energies / total
    entropy = -np.sum(share * np.log(np.maximum(share, 1e-12))) / np.log(share.size)
    return {"scale_evenness": float(entropy), "scale_mean_level": float(np.sum(share * np.arange(2, LEVELS + 1)))}
