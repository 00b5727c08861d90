"""The complex frequencies on which the simulator works, and the way back to samples.

The response of a network to a pulse is computed on a line s = c + j*omega beside the imaginary axis (numerical
Laplace transform): the damping c makes what would wrap round the record die away before it does, and the
factor exp(c t) takes it out again. N. Mullineux, J. R. Reed, Int. J. Electr. Eng. Educ. 10, 1973 (from memory).
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from pdclass.pulses import FloatArray

ComplexArray = NDArray[np.complex128]

#: Length of one pulse's record [s]; 1/RECORD_S = 12.5 kHz is the step of the frequency grid.
RECORD_S = 80e-6
#: Highest frequency of the simulator [Hz].
TOP_HZ = 62.5e6
#: Frequency from which the spectrum is smoothly brought to zero at TOP_HZ [Hz].
TAPER_HZ = 42e6
#: Damping of the numerical Laplace transform [1/s].
DAMPING_PER_S = 7.0 / RECORD_S
#: Time in the record at which a source has its reference instant [s].
LEAD_S = 2e-6
_FADE_S = 5e-6


@lru_cache(maxsize=1)
def laplace_grid() -> ComplexArray:
    """The complex frequencies s [1/s] from 0 Hz to TOP_HZ, shape (5001,), read-only."""
    steps = round(TOP_HZ * RECORD_S)
    s = (DAMPING_PER_S + 2j * np.pi * np.arange(steps + 1) / RECORD_S).astype(np.complex128)
    s.flags.writeable = False
    return s


@lru_cache(maxsize=1)
def band_end() -> FloatArray:
    """Raised cosine from 1 at TAPER_HZ to 0 at TOP_HZ, on the grid, so that nothing rings at the band's end."""
    hz = laplace_grid().imag / (2 * np.pi)
    place = np.clip((hz - TAPER_HZ) / (TOP_HZ - TAPER_HZ), 0.0, 1.0)
    taper = np.asarray(0.5 + 0.5 * np.cos(np.pi * place))
    taper.flags.writeable = False
    return taper


def record_samples(rate_hz: float) -> int:
    """Samples in one pulse record of 80 us [samples]."""
    return round(RECORD_S * rate_hz)


def to_samples(spectrum: ComplexArray, rate_hz: float) -> FloatArray:
    """Samples of the signal whose Laplace transform on the grid is given.

    Parameters
    ----------
    spectrum : (..., 5001) on `laplace_grid()` [unit * s].
    rate_hz : samples a second [Hz]; what lies above half of it folds back, as in a real sampler.

    Returns
    -------
    FloatArray
        (..., `record_samples(rate_hz)`) [unit]; the last 5 us fade out.
    """
    samples = record_samples(rate_hz)
    finer = -(-2 * (spectrum.shape[-1] - 1) // samples)
    fine = scipy.fft.irfft(spectrum, samples * finer)[..., ::finer]
    time_s = np.arange(samples) / rate_hz
    fade = np.clip((RECORD_S - time_s) / _FADE_S, 0.0, 1.0)
    return np.asarray(fine * (np.exp(DAMPING_PER_S * time_s) * fade * (rate_hz * finer)))
