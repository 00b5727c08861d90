"""The compiled pass over every sample: whitening, a bank of box sums, and runs above threshold."""

from __future__ import annotations

from typing import Any

import numba
import numpy as np
from numpy.typing import NDArray

from pdclass.pulses import FloatArray, IntArray, WaveArray

_njit = numba.njit(cache=True, nogil=True)
#: Every so many-th box sum serves the noise level: neighbours tell nearly the same.
_COMB = 7


@_njit
def whiten_into(signal: WaveArray, taps: WaveArray, out: WaveArray) -> None:  # pragma: no cover - compiled
    """Write `out[i] = sum_k taps[k] signal[i + order - k]`, tap by tap so that every sample sums in one order."""
    order = taps.size - 1
    for i in range(out.size):
        out[i] = taps[0] * signal[i + order]
    for k in range(1, taps.size):
        tap = taps[k]
        late = signal[order - k : order - k + out.size]
        for i in range(out.size):
            out[i] += tap * late[i]


@_njit
def flag_boxes(white: WaveArray, limits: WaveArray, flags: NDArray[Any]) -> None:  # pragma: no cover - compiled
    """Flag the centre of every box of 1, 2, 4, ... samples whose sum leaves its limit.

    `white` is overwritten. Doubling (a box = two neighbours of half its width) gives every box the same
    rounding wherever a block begins.
    """
    usable = white.size
    for scale in range(limits.size):
        width = 1 << scale
        if scale > 0:
            half = width >> 1
            usable -= half
            ahead = white[half:]
            for i in range(usable):
                white[i] += ahead[i]
        limit = limits[scale]
        centred = flags[width >> 1 :]
        for i in range(usable):
            centred[i] |= abs(white[i]) > limit


def as_signal(counts: NDArray[Any], first: int, last: int, offset: float) -> WaveArray:
    """Samples `first` to `last` of a record without its offset, as float32.

    Whole numbers are spread over the width of a count by a fixed pattern of their place: with little noise the
    median deviation would otherwise jump from count to count, and the threshold with it.
    """
    signal = np.asarray(counts[first:last], np.float64) - offset
    if np.issubdtype(counts.dtype, np.integer):
        signal += dither(first, last)
    return signal.astype(np.float32)


def dither(first: int, last: int) -> FloatArray:
    """Numbers evenly spread over -0.5 to 0.5 that depend on the place alone (a mixing hash of it)."""
    place = np.arange(first, last).astype(np.uint64) * np.uint64(0x9E3779B97F4A7C15)
    place ^= place >> np.uint64(29)
    place *= np.uint64(0xBF58476D1CE4E5B9)
    return np.asarray((place >> np.uint64(40)).astype(np.float64) / (1 << 24) - 0.5)


def whitened(
    counts: NDArray[Any], taps: WaveArray, offset: float, bounds: tuple[int, int], first: int, last: int
) -> WaveArray:
    """Whitened samples `first` to `last` of a segment; what came before it is predicted backwards.

    Parameters
    ----------
    counts : the record.
    taps : whitening filter.
    offset : level of the record, taken out first [count].
    bounds : first and one past the last sample of the segment.
    first, last : the stretch wanted, within the segment.
    """
    order = taps.size - 1
    begin = max(first - order, bounds[0])
    signal = as_signal(counts, begin, last, offset)
    short = order - (first - begin)
    if short:
        head = as_signal(counts, bounds[0], min(bounds[0] + order, bounds[1]), offset)
        signal = np.concatenate([continued_back(head, taps, short), signal])
    out = np.empty(last - first, np.float32)
    whiten_into(signal, taps, out)
    return out


@_njit
def continued_back(head: WaveArray, taps: WaveArray, count: int) -> WaveArray:  # pragma: no cover - compiled
    """The samples that the background would have had before a beginning, predicted backwards from it.

    The prediction of a stationary background is the same in both directions of time, so its carriers run through.
    """
    order = taps.size - 1
    joined = np.zeros(count + order, np.float32)
    joined[count : count + head.size] = head
    for i in range(count - 1, -1, -1):
        total = np.float32(0.0)
        for k in range(1, order + 1):
            total -= taps[k] * joined[i + k]
        joined[i] = total
    return joined[:count]


def box_noise(pieces: list[WaveArray], scales: int) -> FloatArray:
    """The noise level MAD/0.6745 of the box sums of every scale, from whitened pieces of the record.

    The deviation is about zero: the level of the record is taken out before.
    """
    levels = np.empty(scales)
    sums = [piece.astype(np.float32, copy=True) for piece in pieces]
    for scale in range(scales):
        if scale:
            half = 1 << (scale - 1)
            sums = [box[:-half] + box[half:] for box in sums]
        levels[scale] = np.median(np.abs(np.concatenate([box[::_COMB] for box in sums]))) / 0.6744898
    return levels


def flagged_runs(
    counts: NDArray[Any],
    taps: WaveArray,
    offset: float,
    limits: WaveArray,
    bounds: tuple[int, int],
    *,
    block_samples: int,
) -> IntArray:
    """Runs (first, one past last) of flagged samples in one segment.

    The pass goes in blocks; each is filtered with the samples before it and the widest box after it, so that
    the block size does not change a single flag.
    """
    reach = (1 << (limits.size - 1)) - 1
    runs = []
    for first in range(bounds[0], bounds[1], block_samples):
        last = min(first + block_samples, bounds[1])
        begin, end = max(first - reach, bounds[0]), min(last + reach, bounds[1])
        white = whitened(counts, taps, offset, bounds, begin, end)
        flags = np.zeros(white.size, np.bool_)
        flag_boxes(white, limits, flags)
        edges = np.flatnonzero(np.diff(np.concatenate([[False], flags[first - begin : last - begin], [False]])))
        runs.append(edges.reshape(-1, 2) + first)
    return np.concatenate(runs).astype(np.int64) if runs else np.zeros((0, 2), np.int64)


def joined_runs(runs: IntArray, gap: int) -> IntArray:
    """Runs with neighbours closer than `gap` samples joined."""
    if not len(runs):
        return runs
    apart = np.flatnonzero(runs[1:, 0] - runs[:-1, 1] >= gap) + 1
    firsts = runs[np.concatenate([[0], apart]), 0]
    lasts = runs[np.concatenate([apart - 1, [len(runs) - 1]]), 1]
    return np.stack([firsts, lasts], axis=1)
