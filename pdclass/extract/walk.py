"""The pass over a record, stretch by stretch: from samples that leave the background to events in order."""

from __future__ import annotations

from dataclasses import dataclass

import numba
import numpy as np
from numpy.typing import NDArray

from pdclass.extract.background import Background, scanned
from pdclass.extract.cut import clipped_samples, rails
from pdclass.extract.echoes import SHAPE_S
from pdclass.extract.events import ATTACK_S, events_of_pieces, in_order
from pdclass.pulses import Capture, FloatArray, IntArray, WaveArray, window_samples

_njit = numba.njit(cache=True, nogil=True)

BLOCK_SAMPLES = 1 << 20
#: A wide box flags up to half its width before and after its cause; what lies nearer is one cluster.
JOIN_S = 1.3e-6
#: Noise looked at before a cluster.
MARGIN_S = 4e-6
#: A longer burst is looked at piece by piece, counted from its own start; a cut is no new beginning.
LONGEST_CLUSTER_S = 400e-6
#: So long the whitening filter remembers samples that were cut off.
RECOVERY_SAMPLES = 80


@dataclass(frozen=True)
class Events:
    """Events of one segment or of several, by onset.

    Attributes
    ----------
    places : (events, 2) onset and one past the last sample, in the file.
    feet : (events, 2) refined instant, counted from the onset, and its standard uncertainty [samples].
    shapes : (events, samples) float32, the beginning of each event whitened, zero after its end.
    clipped : samples of the segment at the end of the digitiser's range.
    """

    places: IntArray
    feet: FloatArray
    shapes: WaveArray
    clipped: int = 0


def segment_events(
    capture: Capture, background: Background, bounds: tuple[int, int], block_samples: int = BLOCK_SAMPLES
) -> Events:
    """Events of one segment.

    Each block is whitened once, with what its clusters need before and after it; a piece of a cluster belongs to the
    block in which it begins, so that the block size changes nothing.
    """
    rate_hz = capture.chain.rate_hz
    margin, gap, longest = (round(span * rate_hz) for span in (MARGIN_S, JOIN_S, LONGEST_CLUSTER_S))
    window, shape = window_samples(rate_hz), round(SHAPE_S * rate_hz)
    found = [Events(np.zeros((0, 2), np.int64), np.zeros((0, 2)), np.zeros((0, shape), np.float32))]
    clipped = 0
    begun = np.array([bounds[0] - gap, bounds[0] - gap])
    for first in range(bounds[0], bounds[1], block_samples):
        last = min(first + block_samples, bounds[1])
        begin, end = max(bounds[0], first - margin), min(bounds[1], last + longest + max(gap, window))
        clipped += clipped_samples(capture, first, last)
        white, flags = scanned(capture.counts, background, bounds, begin, end)
        clusters = _clusters(flags, first - begin, last - begin, gap, begun - begin) + begin
        begun = _open_cluster(clusters, flags[first - begin : last - begin], begun, last)
        pieces = _pieces(clusters, (first, last), bounds, longest, (margin, window))
        if len(pieces):
            pieces[:, :4] -= begin
            places, feet = events_of_pieces(white, pieces, rate_hz)
            found.append(Events(places + begin, feet, _shapes(white, places, shape)))
    events = _ordered(found, max(2, round(ATTACK_S * rate_hz)), clipped)
    return _without_recoveries(capture, events) if clipped else events


def _clusters(flags: NDArray[np.bool_], first: int, last: int, gap: int, begun: IntArray) -> IntArray:
    """Runs of flagged samples from `first` on, neighbours closer than `gap` joined, of those that begin before `last`.

    `begun` = (first, one past the last flagged sample) of the cluster before, which the first run may continue.
    """
    # most samples are quiet: they are passed over eight at a time, as words
    own = flags[first:]
    lead = min(-own.ctypes.data % 8, own.size)
    words = own[lead : lead + (own.size - lead) // 8 * 8].view(np.uint64)
    return np.asarray(_runs(_flagged(own.view(np.uint8), words, lead) + first, last, gap, begun), np.int64)


@_njit
def _flagged(flags: NDArray[np.uint8], words: NDArray[np.uint64], lead: int) -> IntArray:  # pragma: no cover - compiled
    """Places of flagged samples; `words` are the same flags from `lead` on, eight in one."""
    some = 0
    for word in words:
        some += word != 0
    places = np.empty(8 * some + 16, np.int64)
    count = 0
    for i in range(lead):
        places[count] = i
        count += flags[i]
    for k in range(words.size):
        if words[k] != 0:
            for i in range(lead + 8 * k, lead + 8 * k + 8):
                places[count] = i
                count += flags[i]
    for i in range(lead + 8 * words.size, flags.size):
        places[count] = i
        count += flags[i]
    return places[:count]


@_njit
def _runs(flagged: IntArray, last: int, gap: int, begun: IntArray) -> IntArray:  # pragma: no cover - compiled
    rows = np.empty((64, 2), np.int64)
    rows[0] = begun
    count = 1
    for i in flagged:
        if i - rows[count - 1, 1] >= gap:
            if i >= last:
                break
            if count == len(rows):
                rows = np.concatenate((rows, np.empty((count, 2), np.int64)))
            rows[count, 0] = i
            count += 1
        rows[count - 1, 1] = i + 1
    return rows[:count]


def _open_cluster(clusters: IntArray, flags: NDArray[np.bool_], before: IntArray, last: int) -> IntArray:
    """The cluster that the next block may continue: its first sample, and one past its last one before `last`."""
    first, end = (int(value) for value in clusters[-1])
    if end > last:
        tail = np.flatnonzero(flags[max(first - last, -flags.size) :])
        end = last - min(last - first, flags.size) + int(tail[-1]) + 1 if len(tail) else int(before[1])
    return np.array([first, end])


@_njit
def _pieces(
    clusters: IntArray, block: tuple[int, int], bounds: tuple[int, int], longest: int, around: tuple[int, int]
) -> IntArray:  # pragma: no cover - compiled
    """Pieces of clusters that begin in a block, as `piece_events` wants them, places in the file."""
    room = 0
    for row in range(len(clusters)):
        room += max(clusters[row, 1] - max(clusters[row, 0], block[0] - longest), 0) // longest + 2
    pieces = np.empty((room, 5), np.int64)
    count = 0
    for row in range(len(clusters)):
        first, last = clusters[row]
        begin = first + max(0, -((first - block[0]) // longest)) * longest
        while begin < min(last, block[1]):
            end = min(begin + longest, last)
            pieces[count, 0], pieces[count, 1] = max(bounds[0], begin - around[0]), begin
            pieces[count, 2], pieces[count, 3] = end, min(bounds[1], end + around[1])
            pieces[count, 4] = begin > first
            count += 1
            begin += longest
    return pieces[:count]


@_njit
def _shapes(white: WaveArray, places: IntArray, longest: int) -> WaveArray:  # pragma: no cover - compiled
    shapes = np.zeros((len(places), longest), np.float32)
    for row in range(len(places)):
        length = min(places[row, 1] - places[row, 0], longest)
        shapes[row, :length] = white[places[row, 0] : places[row, 0] + length]
    return shapes


def _ordered(found: list[Events], apart: int, clipped: int) -> Events:
    """All events by onset, what neighbouring pieces found twice once."""
    places = np.concatenate([part.places for part in found])
    order = np.argsort(places[:, 0], kind="stable")
    onsets, ends = places[order, 0], places[order, 1]
    kept = in_order(onsets, ends, apart)
    shapes = np.concatenate([part.shapes for part in found])[order[kept]]
    lengths = (ends - onsets)[kept]
    shapes[np.arange(shapes.shape[1]) >= lengths[:, None]] = 0.0
    feet = np.concatenate([part.feet for part in found])[order[kept]]
    return Events(np.stack([onsets[kept], ends[kept]], axis=1), feet, shapes, clipped)


def _without_recoveries(capture: Capture, events: Events) -> Events:
    """The events without those that begin inside another one where its clipped samples end: the filter's recovery."""
    low, high = rails(capture) or (0, 0)
    places = events.places.copy()
    kept: list[int] = []
    for row, (onset, end) in enumerate(events.places.tolist()):
        if kept and onset == places[kept[-1], 1]:
            before = capture.counts[max(int(places[kept[-1], 0]), onset - RECOVERY_SAMPLES) : onset]
            if before.size and (before.min() <= low or before.max() >= high):
                places[kept[-1], 1] = end
                continue
        kept.append(row)
    return Events(places[kept], events.feet[kept], events.shapes[kept], events.clipped)
