"""The background of a record: its robust spectrum and the prediction-error filter that whitens it."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import scipy.fft
import scipy.linalg
from numpy.typing import NDArray

from pdclass.pulses import FloatArray, IntArray, WaveArray

PIECE_SAMPLES = 4096
#: A floor under the spectrum, as a share of its mean: keeps the recursion stable when a filter has emptied a band.
_FLOOR = 1e-9


def spread_starts(bounds: Sequence[tuple[int, int]], piece: int, count: int) -> IntArray:
    """Starts of at most `count` pieces of `piece` samples, spread evenly over the segments, none across a gap.

    They depend on the record alone, so that no block size of the later pass can change what they say.
    Segments shorter than a piece hold none.
    """
    room = [np.arange(first, last - piece + 1, piece) for first, last in bounds]
    starts = np.concatenate([np.zeros(0, np.int64), *room]).astype(np.int64)
    if len(starts) <= count:
        return starts
    return starts[np.linspace(0, len(starts) - 1, count).astype(np.int64)]


def noise_spectrum(counts: NDArray[Any], starts: IntArray, piece: int = PIECE_SAMPLES) -> FloatArray:
    """The median over pieces of their Hann-windowed periodograms, bin by bin.

    Parameters
    ----------
    counts : (samples,) the record [count].
    starts : (pieces,) first samples of the pieces.
    piece : samples a piece.

    Returns
    -------
    (piece // 2 + 1,) power a bin [count²]; a pulse in a few of the pieces does not move it.
    """
    taper = np.hanning(piece)
    powers = np.empty((len(starts), piece // 2 + 1))
    for row, start in enumerate(starts):
        wave = np.asarray(counts[start : start + piece], np.float64)
        powers[row] = np.abs(scipy.fft.rfft((wave - wave.mean()) * taper)) ** 2
    # whole numbers carry the noise of rounding, a twelfth of a count squared, even where they stand still
    rounding = np.sum(taper**2) / 12 if np.issubdtype(counts.dtype, np.integer) else 0.0
    return np.asarray(np.median(powers, axis=0) + rounding, np.float64)


def record_level(counts: NDArray[Any], starts: IntArray, piece: int = PIECE_SAMPLES) -> float:
    """The level that a record stands at without signal: the median over pieces of their medians [count]."""
    return float(np.median([np.median(counts[start : start + piece]) for start in starts]))


def whitening_filter(spectrum: FloatArray, order: int) -> WaveArray:
    """The prediction-error filter of a power spectrum, by the Levinson recursion.

    Parameters
    ----------
    spectrum : (bins,) one-sided power spectrum.
    order : how many past samples predict the next one.

    Returns
    -------
    (order + 1,) float32 taps, the first one 1: causal, so that an onset stays where it is.

    References
    ----------
    N. Levinson, J. Math. Phys. 25, 261-278, 1946 (from memory).
    """
    lifted = spectrum + _FLOOR * spectrum.mean()
    correlation = scipy.fft.irfft(lifted)[: order + 1]
    past = scipy.linalg.solve_toeplitz(correlation[:-1], correlation[1:])
    return np.concatenate([[1.0], -past]).astype(np.float32)
