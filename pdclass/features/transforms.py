"""Fourier transforms of many waves at once, each to the same bits in whatever company."""

from __future__ import annotations

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from pdclass.pulses import WaveArray

SpectrumArray = NDArray[np.complex64]

#: Several rows are transformed side by side in one vector; a row left over would go another way.
_SIDE_BY_SIDE = 16


def spectra(waves: WaveArray, size: int) -> SpectrumArray:
    """Spectra of waves, zero-padded to a size.

    Parameters
    ----------
    waves : (waves, samples) real.
    size : samples of the transform, even, >= those given.

    Returns
    -------
    (waves, size // 2 + 1), not scaled.
    """
    found = scipy.fft.rfft(_filled(waves), size, axis=1)
    return np.asarray(found[: len(waves)])


def waves_of(spectrum: SpectrumArray, size: int) -> WaveArray:
    """Waves of so many samples from spectra of `size // 2 + 1` bins, scaled so that it undoes `spectra`."""
    found = scipy.fft.irfft(_filled(spectrum), size, axis=1)
    return np.asarray(found[: len(spectrum)])


def _filled(rows: NDArray[np.generic]) -> NDArray[np.generic]:
    """The rows, and copies of the last so that whole vectors are filled."""
    missing = -len(rows) % _SIDE_BY_SIDE
    return np.concatenate([rows, np.repeat(rows[-1:], missing, axis=0)]) if missing else rows
