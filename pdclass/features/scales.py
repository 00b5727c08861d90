"""Scales: how the energy of the own samples lies among wavelet scales."""

from __future__ import annotations

import numpy as np

from pdclass.features.feature import Feature
from pdclass.features.window import Window
from pdclass.wavelets import scale_energies

LEVELS = 7
#: Every pulse is padded to one length, so that the coarsest scale has room.
_PADDED = 2048
_REFERENCE = (
    "energy by wavelet level: symlet of eight vanishing moments (I. Daubechies, Ten Lectures on Wavelets, 1992); "
    "entropy after C. E. Shannon, Bell Syst. Tech. J. 27, 1948 (both from memory)"
)


def measure_scales(window: Window) -> dict[str, float]:
    """The features of this family, by name; level 1 is left out, it lies above the analysis band."""
    own = np.zeros(_PADDED)
    own[: window.own.size] = window.own
    energies = scale_energies(own, LEVELS)[1:]
    total = energies.sum()
    if total <= 0:
        return {"scale_entropy": np.nan, "scale_centre": np.nan}
    share = energies / total
    entropy = -np.sum(share * np.log(np.maximum(share, 1e-12))) / np.log(share.size)
    return {"scale_entropy": float(entropy), "scale_centre": float(np.sum(share * np.arange(2, LEVELS + 1)))}


SCALES = (
    Feature(
        "scale_entropy",
        "",
        "how evenly the energy is spread over the wavelet scales, 0 (one scale) to 1 (all alike)",
        "evenness over scales {value}",
        "more even",
        "more concentrated",
        (0.0, 1.0),
        0.07,
        _REFERENCE,
        needs_snr_db=6.0,
    ),
    Feature(
        "scale_centre",
        "",
        "energy-weighted mean wavelet level; one level more = half the frequency",
        "centre of the wavelet scales {value}",
        "coarser",
        "finer",
        (2.0, float(LEVELS)),
        0.25,
        _REFERENCE,
        needs_snr_db=6.0,
    ),
)
