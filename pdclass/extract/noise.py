"""The noise level of the record beside each pulse, shared by the pulses that are near one another."""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np

from pdclass.compiled import compiled
from pdclass.extract.cut import segments_of
from pdclass.extract.pages import let_go
from pdclass.pulses import Capture, FloatArray, IntArray, WaveArray

#: The record is divided into bricks; a pulse's noise comes from its own brick and its neighbours: within 1 ms.
BRICK_S = 0.5e-3
SAMPLES_A_BRICK = 820
_BATCH = 64
_BINS = 1024
_BINS_A_DEVIATION = 32.0
_GUESSES = 33


def noise_beside(capture: Capture, places: IntArray) -> WaveArray:
    """Noise level MAD/0.6745 of the recorded samples within 1 ms of each pulse, found pulses cut out [V].

    Parameters
    ----------
    capture : needs `volts_per_count`.
    places : (pulses, 2) onset and one past the last sample, by onset.

    Returns
    -------
    (pulses,) float32; NaN where no sample is free of pulses.
    """
    brick = max(round(BRICK_S * capture.chain.rate_hz), 1)
    keys = np.column_stack([places[:, 0] // brick, segments_of(capture, places[:, 0])])
    new = np.ones(len(keys), np.bool_)
    new[1:] = (keys[1:] != keys[:-1]).any(axis=1)
    rows, offsets = keys[new], comb(brick)
    integer = bool(np.issubdtype(capture.counts.dtype, np.integer))
    levels = np.empty(len(rows), np.float32)
    for first in range(0, len(rows), _BATCH):
        batch = rows[first : first + _BATCH]
        bricks = np.unique(batch[:, :1] + np.arange(-1, 2))
        starts = bricks * brick
        values = np.take(capture.counts, starts[:, None] + offsets, mode="clip").astype(np.float32)
        own = np.searchsorted(bricks, batch[:, 0])
        levels[first : first + _BATCH] = _levels(values, starts, offsets, own, batch[:, 1:], places, integer)
        let_go(capture.counts, starts[0], starts[-1] + brick)
    scale = np.float32(abs(capture.chain.volts_per_count or 1.0))
    return np.asarray(levels[np.cumsum(new) - 1] * scale, np.float32)


@lru_cache(maxsize=8)
def comb(brick: int) -> IntArray:
    """Places in a brick that are measured: one in each of equal parts, where in it a fixed hash says.

    Evenly spaced places would show a carrier at a multiple of their rate as a level.
    """
    stride = max(1, brick // SAMPLES_A_BRICK)
    part = np.arange(brick // stride)
    mixed = (part + 1).astype(np.uint64) * np.uint64(0x9E3779B97F4A7C15)
    mixed = (mixed ^ (mixed >> np.uint64(29))) * np.uint64(0xBF58476D1CE4E5B9)
    return np.asarray(part * stride + (mixed >> np.uint64(40)).astype(np.int64) % stride, np.int64)


@compiled
def _levels(
    values: WaveArray,
    starts: IntArray,
    offsets: IntArray,
    own: IntArray,
    bounds: IntArray,
    places: IntArray,
    integer: bool,
) -> WaveArray:  # pragma: no cover - compiled
    """Noise level about each brick of `own`, samples outside its segment or inside a pulse left out [count]."""
    levels = np.empty(own.size, np.float32)
    quiet = np.empty(3 * offsets.size, np.float32)
    for row in range(own.size):
        pulse = np.searchsorted(places[:, 0], starts[own[row] - 1], side="right") - 1
        count = 0
        for brick in range(own[row] - 1, own[row] + 2):
            for k in range(offsets.size):
                place = starts[brick] + offsets[k]
                while pulse + 1 < len(places) and places[pulse + 1, 0] <= place:
                    pulse += 1
                free = pulse < 0 or place >= places[pulse, 1]
                quiet[count] = values[brick, k]
                count += free and bounds[row, 0] <= place < bounds[row, 1]
        levels[row] = noise_level(quiet[:count], integer)
    return levels


@compiled
def noise_level(values: WaveArray, integer: bool) -> float:  # pragma: no cover - compiled
    """Median absolute deviation / 0.6745 of samples, from a histogram in which each sample fills its bin evenly.

    Parameters
    ----------
    values : samples; whole numbers if `integer`: bins are then never narrower than a count.

    Returns
    -------
    noise level, to a few per mille; NaN without samples.
    """
    if not values.size:
        return np.nan
    guess = np.sort(values[:: max(1, values.size // _GUESSES)])
    centre = float(guess[guess.size // 2])
    spread = float(guess[(3 * guess.size) // 4] - guess[guess.size // 4]) / 2
    width = spread / _BINS_A_DEVIATION
    tiny = 1.0 if integer else 1e-6 * max(abs(centre), 1e-30)
    width = max(math.ceil(width) if integer else width, tiny)
    total = np.empty(_BINS + 1)
    while True:
        start = centre - width * (_BINS // 2) - (0.5 if integer else 0.0)
        counts = np.zeros(_BINS, np.int64)
        bins_a_count = 1.0 / width
        for value in values:
            counts[min(max(int((value - start) * bins_a_count), 0), _BINS - 1)] += 1
        total[0] = 0
        for k in range(_BINS):
            total[k + 1] = total[k] + counts[k]
        level = _inverse(total, 0.5 * values.size, float(_BINS), 0.0)
        deviation = _inverse(total, 0.5 * values.size, float(_BINS), level)
        if abs(level - _BINS / 2) + deviation < _BINS / 2 - 2 or width > 1e30:
            return deviation * width / 0.6744898
        width *= 8.0


@compiled
def _below(total: FloatArray, place: float) -> float:  # pragma: no cover - compiled
    """How many samples lie below a place of the histogram, each spread evenly over its bin."""
    if place <= 0.0:
        return 0.0
    if place >= total.size - 1:
        return float(total[-1])
    k = int(place)
    return float(total[k] + (place - k) * (total[k + 1] - total[k]))


@compiled
def _inverse(total: FloatArray, wanted: float, high: float, about: float) -> float:  # pragma: no cover - compiled
    """The distance from `about` within which `wanted` samples lie; from the lower end where that is 0."""
    low = 0.0
    for _ in range(30):
        half = (low + high) / 2
        inside = _below(total, about + half) - (_below(total, about - half) if about > 0 else 0.0)
        if inside < wanted:
            low = half
        else:
            high = half
    return high
