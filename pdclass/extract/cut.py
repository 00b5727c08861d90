"""Windows cut from the raw record, and what is read off them: peak, clipping, company."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.extract.pages import let_go
from pdclass.pulses import (
    Capture,
    IntArray,
    WaveArray,
    onset_in_window,
    window_samples,
)

_STRETCH = 1024
#: Windows cut at once: the pages of a mapped record that they touch are let go then.
_BATCH = 128
#: Every so many-th sample of the pre-trigger serves its median: neighbours tell nearly the same.
_COMB = 6
#: A share of clipped samples worth saying.
CLIPPED_SHARE = 1e-3


def segments_of(capture: Capture, samples: IntArray) -> IntArray:
    """(samples, 2) first sample and one past the last of the segment that each sample lies in."""
    bounds = np.array(capture.segment_bounds(), np.int64).reshape(-1, 2)
    return bounds[np.searchsorted(bounds[:, 0], samples, side="right") - 1]


def windows(capture: Capture, onsets: IntArray) -> WaveArray:
    """(pulses, samples) float32 [V]; what lies beyond the pulse's segment is NaN."""
    samples = window_samples(capture.chain.rate_hz)
    scale = np.float32(capture.chain.volts_per_count)
    waves = np.empty((len(onsets), samples), np.float32)
    starts, bounds = onsets - onset_in_window(samples), segments_of(capture, onsets)
    counts = np.asarray(capture.counts)
    for first in range(0, len(onsets), _BATCH):
        batch = slice(first, first + _BATCH)
        _cut(counts, starts[batch], bounds[batch], scale, waves[batch])
        let_go(capture.counts, starts[first], starts[batch][-1] + samples)
    return waves


@compiled
def _cut(
    counts: NDArray[Any], starts: IntArray, bounds: IntArray, scale: Any, waves: WaveArray
) -> None:  # pragma: no cover - compiled
    for row in range(len(waves)):
        wave, start = waves[row], starts[row]
        begin, end = max(bounds[row, 0] - start, 0), min(bounds[row, 1] - start, wave.size)
        wave[:begin] = np.nan
        wave[end:] = np.nan
        own = counts[start + begin : start + end]
        for i in range(own.size):
            wave[begin + i] = np.float32(own[i]) * scale


@compiled
def middle(values: WaveArray) -> float:  # pragma: no cover - compiled
    """Median of values, which are reordered (selection by partition; the upper one of two); 0 without values."""
    low, high, wanted = 0, values.size - 1, values.size // 2
    while low < high:
        pivot = values[(low + high) // 2]
        i, j = low, high
        while i <= j:
            while values[i] < pivot:
                i += 1
            while values[j] > pivot:
                j -= 1
            if i <= j:
                values[i], values[j] = values[j], values[i]
                i += 1
                j -= 1
        if wanted <= j:
            high = j
        elif wanted >= i:
            low = i
        else:
            break
    return float(values[wanted]) if values.size else 0.0


@compiled
def signed_peaks(waves: WaveArray, lengths: IntArray, lead: int) -> WaveArray:  # pragma: no cover - compiled
    """Largest excursion of each pulse's own samples from the median of its pre-trigger [V], with its sign.

    Parameters
    ----------
    waves : (pulses, samples) windows [V], NaN outside the record.
    lengths : samples from onset to end.
    lead : place of the onset.
    """
    peaks = np.empty(len(waves), np.float32)
    before = np.empty(lead // _COMB + 1, np.float32)
    for row in range(len(waves)):
        count = 0
        for i in range(0, lead, _COMB):
            if not np.isnan(waves[row, i]):
                before[count] = waves[row, i]
                count += 1
        level = np.float32(middle(before[:count]))
        peak = np.float32(0.0)
        for i in range(lead, min(lead + max(lengths[row], 1), waves.shape[1])):
            own = waves[row, i] - level
            if abs(own) > abs(peak):
                peak = own
        peaks[row] = peak
    return peaks


def rails(capture: Capture) -> tuple[int, int] | None:
    """Lowest and highest count of the digitiser (of the sample type where its bits are unknown); None for floats."""
    if not np.issubdtype(capture.counts.dtype, np.integer):
        return None
    bits = capture.chain.adc_bits or np.iinfo(capture.counts.dtype).bits
    return -(1 << (bits - 1)), (1 << (bits - 1)) - 1


def clipped(capture: Capture, waves: WaveArray, places: IntArray) -> NDArray[np.bool_]:
    """Whether a pulse holds samples of its own at the end of the digitiser's range."""
    ends = rails(capture)
    if ends is None or not len(places):
        return np.zeros(len(places), np.bool_)
    lead = onset_in_window(waves.shape[1])
    lengths = places[:, 1] - places[:, 0]
    low, high = (float(np.float32(end) * np.float32(capture.chain.volts_per_count)) for end in ends)
    hit = _touch(waves, lengths, lead, min(low, high), max(low, high))
    for row in np.flatnonzero(~hit & (lengths > waves.shape[1] - lead)).tolist():
        own = capture.counts[places[row, 0] : places[row, 1]]
        hit[row] = bool(own.max() >= ends[1] or own.min() <= ends[0])
    return hit


@compiled
def any_beyond(waves: WaveArray, limit: float) -> bool:  # pragma: no cover - compiled
    """Whether any sample is larger than a limit, sign ignored."""
    some = False
    for row in range(len(waves)):
        for i in range(waves.shape[1]):
            some |= abs(waves[row, i]) > limit
    return some


def clipped_samples(capture: Capture, first: int, last: int) -> int:
    """How many samples of a stretch stand at the end of the digitiser's range."""
    ends, piece = rails(capture), np.asarray(capture.counts[first:last])
    # a digitiser of more bits than its samples can hold has no end within them
    if ends is None or ends[1] > np.iinfo(piece.dtype).max:
        return 0
    return int(_outside(piece, piece.dtype.type(ends[0]), piece.dtype.type(ends[1])))


@compiled
def _outside(counts: NDArray[Any], low: Any, high: Any) -> int:  # pragma: no cover - compiled
    """How many counts are at most `low` or at least `high`; stretch by stretch, nearly all of which hold none."""
    total = 0
    for begin in range(0, counts.size, _STRETCH):
        own = counts[begin : begin + _STRETCH]
        some = False
        for i in range(own.size):
            some |= (own[i] <= low) | (own[i] >= high)
        if some:
            for i in range(own.size):
                total += (own[i] <= low) | (own[i] >= high)
    return total


def clipping_note(capture: Capture, count: int) -> list[str]:
    """A line where more than a thousandth of the samples stand at the rails."""
    share = count / max(capture.counts.size, 1)
    if share <= CLIPPED_SHARE:
        return []
    said = "heights and shapes of clipped pulses are not true: record with less gain"
    return [f"{capture.name}: {share:.1%} of the samples stand at the end of the digitiser's range; {said}"]


@compiled
def _touch(
    waves: WaveArray, lengths: IntArray, lead: int, low: float, high: float
) -> NDArray[np.bool_]:  # pragma: no cover - compiled
    hit = np.zeros(len(waves), np.bool_)
    for row in range(len(waves)):
        some = False
        for i in range(lead, min(lead + lengths[row], waves.shape[1])):
            some |= (waves[row, i] >= high) | (waves[row, i] <= low)
        hit[row] = some
    return hit


def window_mates(capture: Capture, onsets: IntArray) -> IntArray:
    """How many other events share each pulse's window."""
    samples = window_samples(capture.chain.rate_hz)
    starts = onsets - onset_in_window(samples)
    first = np.searchsorted(onsets, starts, side="left")
    last = np.searchsorted(onsets, starts + samples, side="left")
    return np.asarray(last - first - 1, np.int64)
