"""The pass over a record, stretch by stretch: from samples that leave the background to events in order."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.extract.background import Background, flagged_runs
from pdclass.extract.bank import SUB_BLOCK, whiten_into
from pdclass.extract.cut import clipped_samples, rails
from pdclass.extract.echoes import SHAPE_S
from pdclass.extract.events import ATTACK_S, all_limits, in_order, piece_events, spans
from pdclass.extract.fir import TAPS
from pdclass.extract.pages import let_go
from pdclass.pulses import Capture, FloatArray, IntArray, WaveArray, window_samples

BLOCK_SAMPLES = 1 << 20
#: A wide box flags up to half its width before and after its cause; what lies nearer is one cluster.
JOIN_S = 1.3e-6
#: Noise looked at before a cluster.
MARGIN_S = 4e-6
#: A longer burst is looked at piece by piece, counted from its own start; a cut is no new beginning.
LONGEST_CLUSTER_S = 400e-6
#: Pieces searched at once.
_PIECES = 256
#: So many samples around a piece may be looked at when an edge is smoothed.
_REACH = 160
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

    Blocks (`block_samples`, rounded up to whole sub-blocks) are searched for clusters; a cluster that may go on in the
    next block waits for it. Only pieces of clusters are whitened for good, each with what it needs before and after
    it, so that the block size changes nothing.
    """
    rate_hz = capture.chain.rate_hz
    margin, gap, longest = (round(span * rate_hz) for span in (MARGIN_S, JOIN_S, LONGEST_CLUSTER_S))
    shape, step = round(SHAPE_S * rate_hz), -(-block_samples // SUB_BLOCK) * SUB_BLOCK
    found = [Events(np.zeros((0, 2), np.int64), np.zeros((0, 2)), np.zeros((0, shape), np.float32))]
    clipped, begun = 0, np.array([bounds[0] - gap, bounds[0] - gap])
    for first in range(bounds[0], bounds[1], step):
        last = min(first + step, bounds[1])
        clipped += clipped_samples(capture, first, last)
        runs = flagged_runs(capture.counts, background, bounds, first, last)
        clusters, begun = _clusters(runs, begun, gap, bounds[1] + gap if last == bounds[1] else last)
        pieces = _pieces(clusters, bounds, longest, (margin, window_samples(rate_hz)))
        found += [
            _events_of(capture, background, bounds, pieces[row : row + _PIECES], shape)
            for row in range(0, len(pieces), _PIECES)
        ]
        let_go(capture.counts, first, last)
    events = _ordered(found, max(2, round(ATTACK_S * rate_hz)), clipped)
    return _without_recoveries(capture, events) if clipped else events


@compiled
def _clusters(
    runs: IntArray, begun: IntArray, gap: int, seen: int
) -> tuple[IntArray, IntArray]:  # pragma: no cover - compiled
    """Runs with neighbours closer than `gap` joined, and the last of them, which samples past `seen` may continue.

    `begun` is that of the runs before.
    """
    rows = np.empty((len(runs) + 1, 2), np.int64)
    rows[0] = begun
    count = 1
    for row in range(len(runs)):
        if runs[row, 0] - rows[count - 1, 1] >= gap:
            rows[count, 0] = runs[row, 0]
            count += 1
        rows[count - 1, 1] = runs[row, 1]
    last = rows[count - 1].copy()
    if seen - last[1] >= gap:
        last[0] = last[1]
        return rows[:count], last
    return rows[: count - 1], last


@compiled
def _pieces(
    clusters: IntArray, bounds: tuple[int, int], longest: int, around: tuple[int, int]
) -> IntArray:  # pragma: no cover - compiled
    """Pieces of clusters as `piece_events` wants them, places in the file."""
    room = 0
    for row in range(len(clusters)):
        room += (clusters[row, 1] - clusters[row, 0]) // longest + 1
    pieces = np.empty((room, 5), np.int64)
    count = 0
    for row in range(len(clusters)):
        first, last = clusters[row]
        for begin in range(first, last, longest):
            end = min(begin + longest, last)
            pieces[count, 0], pieces[count, 1] = max(bounds[0], begin - around[0]), begin
            pieces[count, 2], pieces[count, 3] = end, min(bounds[1], end + around[1])
            pieces[count, 4] = begin > first
            count += 1
    return pieces[:count]


def _events_of(
    capture: Capture, background: Background, bounds: tuple[int, int], pieces: IntArray, shape: int
) -> Events:
    held, rate_hz = background, capture.chain.rate_hz
    attack, decay, twin = spans(rate_hz)
    sizes = (attack, decay, 2 * twin + 6 * decay, shape)
    limits, grid = all_limits(rate_hz), held.grid(bounds)
    found = _searched(
        capture.counts, held.dither, held.level, held.filters, held.gains, grid, bounds, pieces, sizes, limits
    )
    let_go(capture.counts, pieces[0, 0], pieces[-1, 3])
    return Events(*found)


@compiled
def _searched(
    counts: NDArray[Any],
    dither: WaveArray,
    level: float,
    filters: WaveArray,
    gains: WaveArray,
    grid: tuple[int, int, int, int],
    bounds: tuple[int, int],
    pieces: IntArray,
    sizes: tuple[int, int, int, int],
    limits: FloatArray,
) -> tuple[IntArray, FloatArray, WaveArray]:  # pragma: no cover - compiled
    """Places, feet and shapes of the events of pieces, each whitened by itself.

    `sizes` = (attack, decay, samples after a cluster in which most events end, samples of a shape). Where an event
    has not ended by then, the piece is whitened again up to its own end.
    """
    attack, decay, after, longest = sizes
    places, feet = np.empty((len(pieces), 2), np.int64), np.empty((len(pieces), 2))
    shapes = np.zeros((len(pieces), longest), np.float32)
    raw, white = np.empty(SUB_BLOCK + TAPS, np.float32), np.empty(SUB_BLOCK, np.float32)
    count = 0
    for row in range(len(pieces)):
        piece = pieces[row].copy()
        low = max(bounds[0], piece[0] - _REACH)
        piece[:4] -= low
        stop, settled = piece[3], False
        piece[3] = min(stop, piece[2] + after)
        while True:
            size = min(piece[3] + _REACH, bounds[1] - low)
            if size > white.size:
                white = np.empty(2 * size, np.float32)
            own = white[:size]
            whiten_into(counts, dither, level, filters, gains, grid, bounds, low, raw, own)
            new, instants, settled = piece_events(own, piece, attack, decay, limits)
            if settled or piece[3] == stop:
                break
            piece[3] = stop
        if count + len(new) > len(places):
            room = len(places) + len(new)
            places = np.concatenate((places, np.empty((room, 2), np.int64)))
            feet = np.concatenate((feet, np.empty((room, 2))))
            shapes = np.concatenate((shapes, np.zeros((room, longest), np.float32)))
        for n in range(len(new)):
            length = min(new[n, 1] - new[n, 0], longest)
            shapes[count, :length] = own[new[n, 0] : new[n, 0] + length]
            places[count], feet[count] = new[n] + low, instants[n]
            count += 1
    return places[:count], feet[:count], shapes[:count]


def _ordered(found: list[Events], apart: int, clipped: int) -> Events:
    """All events by onset, what neighbouring pieces found twice once."""
    places = np.concatenate([part.places for part in found])
    order = np.argsort(places[:, 0], kind="stable")
    onsets, ends = places[order, 0], places[order, 1]
    kept = in_order(onsets, ends, apart)
    shapes = _chosen(np.concatenate([part.shapes for part in found]), order[kept], (ends - onsets)[kept])
    feet = np.concatenate([part.feet for part in found])[order[kept]]
    return Events(np.stack([onsets[kept], ends[kept]], axis=1), feet, shapes, clipped)


@compiled
def _chosen(shapes: WaveArray, rows: IntArray, lengths: IntArray) -> WaveArray:  # pragma: no cover - compiled
    """Rows of shapes, zero after their lengths."""
    chosen = np.zeros((rows.size, shapes.shape[1]), np.float32)
    for n in range(rows.size):
        length = min(lengths[n], shapes.shape[1])
        chosen[n, :length] = shapes[rows[n], :length]
    return chosen


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
