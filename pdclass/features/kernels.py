"""Compiled pieces that several families share: selection without sorting, sums that fill a vector.

Sums of floats keep their order when compiled, so a sum is split over `LANES` partial ones to be quick; the order is
the same on every machine.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.pulses import FloatArray, WaveArray

KeyArray = NDArray[np.int32]

LANES = 16
_LOWEST, _HIGHEST = np.int32(-(2**31)), np.int32(2**31 - 1)
_ALL_BUT_SIGN = np.int32(0x7FFFFFFF)


@compiled
def median(values: WaveArray) -> float:  # pragma: no cover - compiled
    """The median of values without NaN, (n,) float32, n >= 1; exact, the mean of the middle two where n is even."""
    keys = values.view(np.int32).copy()
    for i in range(keys.size):
        keys[i] = keys[i] ^ ((keys[i] >> 31) & _ALL_BUT_SIGN)
    return _middle(keys)


@compiled
def median_size(values: WaveArray) -> float:  # pragma: no cover - compiled
    """The median of the sizes of values without NaN, (n,) float32, n >= 1."""
    keys = values.view(np.int32).copy()
    for i in range(keys.size):
        keys[i] = keys[i] & _ALL_BUT_SIGN
    return _middle(keys)


@compiled
def size_above(values: WaveArray, share: float) -> float:  # pragma: no cover - compiled
    """The size that a share of the values without NaN, (n,) float32, does not exceed; one of theirs, 0 <= share < 1."""
    keys = values.view(np.int32).copy()
    for i in range(keys.size):
        keys[i] = keys[i] & _ALL_BUT_SIGN
    return _value(_ranked(keys, int(share * keys.size)))


@compiled
def _middle(keys: KeyArray) -> float:  # pragma: no cover - compiled
    """The median of floats given as integers that sort like them."""
    rank = (keys.size - 1) // 2
    lower = _ranked(keys, rank)
    if keys.size % 2 or _count_up_to(keys, lower) > rank + 1:
        return _value(lower)
    upper = _HIGHEST
    for i in range(keys.size):
        upper = min(upper, keys[i] if keys[i] > lower else _HIGHEST)
    return 0.5 * (_value(lower) + _value(upper))


@compiled
def _ranked(keys: KeyArray, rank: int) -> np.int32:  # pragma: no cover - compiled
    """The key with so many smaller ones, by halving the range: each count fills a vector, nothing is moved."""
    low, high = np.int64(_LOWEST), np.int64(_HIGHEST)
    while low < high:
        middle = (low + high) >> 1
        if _count_up_to(keys, np.int32(middle)) > rank:
            high = middle
        else:
            low = middle + 1
    return np.int32(low)


@compiled
def _count_up_to(keys: KeyArray, limit: np.int32) -> np.int32:  # pragma: no cover - compiled
    count = np.int32(0)
    for i in range(keys.size):
        count += np.int32(keys[i] <= limit)
    return count


@compiled
def _value(key: np.int32) -> float:  # pragma: no cover - compiled
    """The float behind a key that sorts like it."""
    bits = np.empty(1, np.int32)
    bits[0] = key ^ ((key >> 31) & _ALL_BUT_SIGN)
    return np.float64(bits.view(np.float32)[0])


@compiled
def sum_of_squares(values: WaveArray) -> float:  # pragma: no cover - compiled
    """Sum of the squares of values, (n,)."""
    lane, whole = np.zeros(LANES), values.size // LANES * LANES
    for first in range(0, whole, LANES):
        for j in range(LANES):
            value = np.float64(values[first + j])
            lane[j] += value * value
    for j in range(values.size - whole):
        value = np.float64(values[whole + j])
        lane[j] += value * value
    return float(lane.sum())


@compiled
def lowest(values: WaveArray) -> float:  # pragma: no cover - compiled
    """The smallest of values without NaN, (n,) float32, and at most 0."""
    lane, whole = np.zeros(LANES, np.float32), values.size // LANES * LANES
    for first in range(0, whole, LANES):
        for j in range(LANES):
            lane[j] = min(lane[j], values[first + j])
    for j in range(values.size - whole):
        lane[j] = min(lane[j], values[whole + j])
    return np.float64(lane.min())


@compiled
def weighed(values: FloatArray | WaveArray, weights: FloatArray) -> float:  # pragma: no cover - compiled
    """Sum of the products of values and weights, both (n,)."""
    lane, whole = np.zeros(LANES), values.size // LANES * LANES
    for first in range(0, whole, LANES):
        for j in range(LANES):
            lane[j] += np.float64(values[first + j]) * weights[first + j]
    for j in range(values.size - whole):
        lane[j] += np.float64(values[whole + j]) * weights[whole + j]
    return float(lane.sum())


@compiled
def sum_between(values: FloatArray | WaveArray, first: int, last: int) -> float:  # pragma: no cover - compiled
    """Sum of `values[first:last]`."""
    lane = np.zeros(LANES)
    k = first
    while k + LANES <= last:
        for j in range(LANES):
            lane[j] += np.float64(values[k + j])
        k += LANES
    for j in range(last - k):
        lane[j] += np.float64(values[k + j])
    return float(lane.sum())


@compiled
def place_of_largest(values: WaveArray) -> int:  # pragma: no cover - compiled
    """Place of the first of the largest sizes of values without NaN, (n,) float32, n >= 1."""
    keys, top, place = values.view(np.int32), np.int32(0), 0
    for i in range(keys.size):
        top = max(top, np.int32(keys[i] & _ALL_BUT_SIGN))
    while keys[place] & _ALL_BUT_SIGN < top:
        place += 1
    return place


@compiled
def chance_energy(floor: float, samples: float) -> float:  # pragma: no cover - compiled
    """What noise alone may leave of the energy of so many samples once its mean is taken out: three deviations.

    `floor` is the noise's power; white noise, itself known no better than from the variance of 200 samples.
    """
    return float(3 * floor * np.sqrt(2 * samples * (1 + samples / 200)))
