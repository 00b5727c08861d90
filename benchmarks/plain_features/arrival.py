"""First arrival: which frequencies of a pulse come late, before any echo can.

A path along a cable takes away the high frequencies and delays the low ones (its losses are minimum-phase); a wide,
even source takes away the high ones and delays nothing. A near end that rings holds its own frequency back.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import pairwise

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from plain_features.window import ANALYSIS_RATE_HZ, GUARD, ONSET, STEP_NS, Window
from pdclass.pulses import FloatArray

ComplexArray = NDArray[np.complex128]

EDGES_MHZ = (0.1, 0.5, 1.3, 2.5, 4.5, 7.0, 10.0, 13.5, 18.0, 25.0)
#: Length of the first arrival [us], over how much of its end it fades out [samples], and its bands.
LENGTHS = ((0.3, 14, (EDGES_MHZ[0], *EDGES_MHZ[2:])), (0.6, 24, EDGES_MHZ))
#: Every chain's lower corner is moved to this one: the tail then tells of the pulse and not of the transformer.
COMMON_LOW_HZ = 0.3e6
_FFT = 2048
#: A band has so many times the noise's power and this share of the strongest band, else its delay is chance.
_CLEAR, _SHARE = 6.0, 3e-3
_LONGEST_NS = 2000.0


def with_common_corner(wave: FloatArray, low_hz: float) -> FloatArray:
    """A wave as if the chain's first-order lower corner lay at 0.3 MHz, same shape; unchanged where it is unknown.

    Nothing is amplified but what lies below a corner above 0.3 MHz, and at most by the ratio of the corners.
    """
    if not low_hz > 0:
        return wave
    return np.asarray(scipy.fft.irfft(scipy.fft.rfft(wave, 2 * _FFT) * _corner_gain(low_hz), 2 * _FFT)[: wave.size])


def measure_arrival(window: Window) -> dict[str, float]:
    """The features of this family, by name: NaN where a band does not stand out of the noise, or it is unknown."""
    found = {_name(length_us, *band): np.nan for length_us, _, edges in LENGTHS for band in pairwise(edges)}
    if not window.noise > 0:
        return found
    wave = with_common_corner(window.wave, window.low_hz)
    density = window.noise_density
    if window.low_hz > 0:
        density = density * np.abs(_corner_gain(window.low_hz)[::2]) ** 2
    for length_us, fade, edges in LENGTHS:
        last = ONSET + round(length_us * ANALYSIS_RATE_HZ / 1e6)
        if last <= window.last:
            piece = faded(wave[ONSET - GUARD : last], fade)
            found |= _delays(piece, density * (piece.size - fade * 5 / 8), length_us, edges)
    return found


def faded(piece: FloatArray, fade: int) -> FloatArray:
    """A copy whose last samples fade out as a raised cosine."""
    piece = piece.copy()
    piece[piece.size - fade :] *= 0.5 + 0.5 * np.cos(np.pi * (np.arange(fade) + 0.5) / fade)
    return piece


def band_means(values: FloatArray, starts: tuple[int, ...]) -> FloatArray:
    """Means of `values` between successive bins, (bands,)."""
    sums = np.add.reduceat(values, starts)[:-1]
    return np.asarray(sums / np.diff(starts))


@lru_cache(maxsize=8)
def first_bins(edges_mhz: tuple[float, ...], size: int) -> tuple[int, ...]:
    """First bin of each band of a transform of `size` samples, and one past the last bin."""
    return tuple(int(np.ceil(edge * 1e6 * size / ANALYSIS_RATE_HZ)) for edge in edges_mhz)


@lru_cache(maxsize=64)
def _corner_gain(low_hz: float) -> ComplexArray:
    s = 2j * np.pi * scipy.fft.rfftfreq(2 * _FFT, 1 / ANALYSIS_RATE_HZ)
    return np.asarray((s + 2 * np.pi * low_hz) / (s + 2 * np.pi * COMMON_LOW_HZ))


def _delays(piece: FloatArray, noise: FloatArray, length_us: float, edges: tuple[float, ...]) -> dict[str, float]:
    """Delays by band against the centre of the energy [ns], by name.

    The delay of a band is that of its energy, Re(X* Y)/|X|² with Y the transform of t x(t): no phase is unwrapped.
    """
    spectrum = scipy.fft.rfft(piece, _FFT)
    moment = scipy.fft.rfft(piece * np.arange(piece.size), _FFT)
    power, lag = np.abs(spectrum) ** 2, (np.conj(spectrum) * moment).real
    starts = first_bins(edges, _FFT)
    inside = slice(starts[0], starts[-1])
    strength, floor, late = (band_means(each, starts) for each in (power, noise, lag))
    delay_ns = (late / strength - lag[inside].sum() / power[inside].sum()) * STEP_NS
    delay_ns[strength <= np.maximum(_CLEAR * floor, _SHARE * strength.max())] = np.nan
    return {_name(length_us, *band): float(each) for band, each in zip(pairwise(edges), delay_ns, strict=True)}


def _name(length_us: float, low: float, high: float) -> str:
    return f"first_{length_us:g}_delay_{low:g}_{high:g}_ns".replace(".", "p")
