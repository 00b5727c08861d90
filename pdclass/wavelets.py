"""Wavelet transform of one wave: its energy per scale (the only user of pywt)."""

from __future__ import annotations

import numpy as np
import pywt

from pdclass.pulses import FloatArray

WAVELET = "sym8"


def scale_energies(wave: FloatArray, levels: int) -> FloatArray:
    """Energy of the wavelet detail at every level, the finest first.

    Parameters
    ----------
    wave : (samples,) any unit; extended by zeros, so the ends add nothing.
    levels : number of levels; level j holds about rate/2^(j+1) to rate/2^j [Hz].

    Returns
    -------
    (levels,) sum of squared coefficients [unit²].
    """
    details = pywt.wavedec(wave, WAVELET, mode="zero", level=levels)[1:]
    return np.array([float(np.sum(detail**2)) for detail in reversed(details)])
