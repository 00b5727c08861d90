"""The compiled pass over every sample: whitening, a bank of box sums, and what of it leaves the background.

Work goes in sub-blocks that stay in cache. Every sum has one order and no two operations are contracted, so that no
bit depends on where a stretch begins.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.extract.fir import TAPS, filter_into
from pdclass.pulses import IntArray, WaveArray

#: Samples worked on at once.
SUB_BLOCK = 4096
#: The pattern that spreads whole numbers over the width of a count repeats after so many samples of a segment.
DITHER_PERIOD = 4096
#: Past a box of this many samples nothing is made: the largest rate the buffers are laid out for is 2 GS/s.
LONGEST_BOX = 4096
_CHUNK = 128
#: A sample that stands out spoils so many before it and after it.
_SPOILT_BEFORE, _SPOILT_AFTER = 16, 32


@compiled
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
        joined[i] = total / taps[0]
    return joined[:count]


@compiled
def load_signal(
    counts: NDArray[Any], dither: WaveArray, level: float, first: int, begin: int, out: WaveArray
) -> None:  # pragma: no cover - compiled
    """Samples from `begin` on of a segment that starts at `first`, without their level, spread by the dither."""
    shift = np.float32(level)
    own, pattern = counts[begin : begin + out.size], dither[(begin - first) % DITHER_PERIOD :]
    for i in range(out.size):
        out[i] = (np.float32(own[i]) - shift) + pattern[i]


@compiled
def load_before(
    counts: NDArray[Any],
    dither: WaveArray,
    level: float,
    taps: WaveArray,
    bounds: tuple[int, int],
    begin: int,
    out: WaveArray,
) -> None:  # pragma: no cover - compiled
    """The same from `begin` on, which may lie before the segment: what came there is predicted backwards."""
    missing = max(0, bounds[0] - begin)
    load_signal(counts, dither, level, bounds[0], begin + missing, out[missing:])
    if missing:
        head = np.empty(min(taps.size - 1, bounds[1] - bounds[0]), np.float32)
        load_signal(counts, dither, level, bounds[0], bounds[0], head)
        out[:missing] = continued_back(head, taps, missing)


@compiled
def _above(wave: WaveArray, limit: float) -> Any:  # pragma: no cover - compiled
    fired = np.int32(0)
    for i in range(wave.size):
        fired |= np.int32(abs(wave[i]) > limit)
    return fired


@compiled
def _doubled(wave: WaveArray, half: int, out: WaveArray, limit: float) -> Any:  # pragma: no cover - compiled
    """Boxes of twice `half` samples from those of half of it, and whether any leaves the limit."""
    fired = np.int32(0)
    ahead = wave[half : half + out.size]
    for i in range(out.size):
        total = wave[i] + ahead[i]
        out[i] = total
        fired |= np.int32(abs(total) > limit)
    return fired


@compiled
def _mark(wave: WaveArray, limit: float, flags: NDArray[np.bool_]) -> None:  # pragma: no cover - compiled
    for begin in range(0, wave.size, _CHUNK):
        own, chosen = wave[begin : begin + _CHUNK], flags[begin : begin + _CHUNK]
        if _above(own, limit):
            for i in range(own.size):
                chosen[i] |= abs(own[i]) > limit


@compiled
def flag_boxes(
    white: WaveArray, spare: WaveArray, limits: WaveArray, before: int, flags: NDArray[np.bool_]
) -> bool:  # pragma: no cover - compiled
    """Flag the centre of every box of 1, 2, 4, ... samples whose sum leaves its limit; whether one may have.

    Parameters
    ----------
    white : overwritten, like `spare` of the same size. Doubling (a box = two neighbours of half its width) gives
        every box the same rounding wherever a block begins.
    before : samples of `white` that lie before the first of `flags`.
    """
    boxes, other = white, spare
    usable, flagged = white.size, False
    for scale in range(limits.size):
        limit, half = limits[scale], (1 << scale) >> 1
        if scale == 0:
            fired = _above(boxes, limit)
        else:
            usable -= max(half, 1)
            if usable <= 0:
                break
            fired = _doubled(boxes[: usable + half], half, other[:usable], limit)
            boxes, other = other, boxes
        if fired:
            start = max(0, before - half)
            stop = min(usable, before - half + flags.size)
            if stop > start:
                _mark(boxes[start:stop], limit, flags[start + half - before :])
                flagged = True
    return flagged


@compiled
def whiten_into(
    counts: NDArray[Any],
    dither: WaveArray,
    level: float,
    filters: WaveArray,
    gains: WaveArray,
    grid: tuple[int, int, int, int],
    bounds: tuple[int, int],
    first: int,
    raw: WaveArray,
    white: WaveArray,
) -> None:  # pragma: no cover - compiled
    """Whiten `white.size` samples from `first` on to noise of variance 1, sub-block by sub-block of the segment's grid.

    `grid` = (samples an epoch, epochs a stretch, the segment's first epoch, its epochs); `raw` is room for a sub-block
    and the filter's length.
    """
    order, last = filters.shape[1] - 1, first + white.size
    block = bounds[0] + (first - bounds[0]) // SUB_BLOCK * SUB_BLOCK
    while block < last:
        begin, end = max(block, first), min(block + SUB_BLOCK, last)
        epoch = grid[2] + min((block - bounds[0]) // grid[0], grid[3] - 1)
        taps, own, signal = filters[epoch // grid[1]], white[begin - first : end - first], raw[: end - begin + order]
        load_before(counts, dither, level, taps, bounds, begin - order, signal)
        filter_into(signal, taps, own)
        gain = gains[epoch]
        for i in range(own.size):
            own[i] = gain * own[i]
        block += SUB_BLOCK


@compiled
def runs_into(
    counts: NDArray[Any],
    dither: WaveArray,
    level: float,
    filters: WaveArray,
    limits: WaveArray,
    grid: tuple[int, int, int, int],
    bounds: tuple[int, int],
    block: int,
    last: int,
    runs: IntArray,
) -> tuple[int, int]:  # pragma: no cover - compiled
    """Write the runs of flagged samples of the sub-blocks from `block` up to `last`; how many, and where room ended."""
    reach, order = (1 << (limits.shape[1] - 1)) >> 1, filters.shape[1] - 1
    raw, boxes, spare = _buffers(reach, order)
    flags = np.zeros(SUB_BLOCK, np.bool_)
    count = 0
    while block < last and count + SUB_BLOCK // 2 < len(runs):
        end = min(block + SUB_BLOCK, bounds[1])
        low, high = max(block - reach, bounds[0]), min(end + reach, bounds[1])
        epoch = grid[2] + min((block - bounds[0]) // grid[0], grid[3] - 1)
        taps, own = filters[epoch // grid[1]], boxes[: high - low]
        load_before(counts, dither, level, taps, bounds, low - order, raw[: own.size + order])
        filter_into(raw, taps, own)
        if flag_boxes(own, spare[: own.size], limits[epoch], block - low, flags[: end - block]):
            count = _add_runs(flags, block, runs, count)
            flags[:] = False
        block += SUB_BLOCK
    return count, block


@compiled
def _buffers(reach: int, order: int) -> tuple[WaveArray, WaveArray, WaveArray]:  # pragma: no cover - compiled
    size = SUB_BLOCK + 2 * reach
    return np.empty(size + order, np.float32), np.empty(size, np.float32), np.empty(size, np.float32)


@compiled
def _add_runs(flags: NDArray[np.bool_], first: int, runs: IntArray, count: int) -> int:  # pragma: no cover - compiled
    """Append the runs of set flags; one that goes on where the last run ended makes that longer."""
    words = flags.view(np.uint64)
    for word in range(words.size):
        if words[word]:
            for i in range(8 * word, 8 * word + 8):
                if flags[i]:
                    place = first + i
                    if count and runs[count - 1, 1] == place:
                        runs[count - 1, 1] = place + 1
                    else:
                        runs[count, 0], runs[count, 1] = place, place + 1
                        count += 1
    return count


@compiled
def _cut_out(white: WaveArray, gate: float, most: float) -> bool:  # pragma: no cover - compiled
    """NaN for what stands out and what it spoils around it, unless that is more than a share; whether it did so."""
    size = white.size
    spoilt = np.zeros(size, np.bool_)
    clear, count = 0, 0
    for begin in range(0, size, _CHUNK):
        if not _above(white[begin : begin + _CHUNK], gate):
            continue
        for i in range(begin, min(begin + _CHUNK, size)):
            if abs(white[i]) > gate:
                for j in range(max(clear, i - _SPOILT_BEFORE), min(size, i + _SPOILT_AFTER)):
                    spoilt[j] = True
                    count += 1
                clear = min(size, i + _SPOILT_AFTER)
    if count == 0 or count > most * size:
        return False
    for i in range(size):
        if spoilt[i]:
            white[i] = np.nan
    return True


@compiled
def count_above(
    white: WaveArray, gate: tuple[float, float], marks: WaveArray, above: IntArray, looked: IntArray
) -> None:  # pragma: no cover - compiled
    """Count the box sums of every scale beyond its mark, and all, without those that hold a sample beyond the gate.

    `gate` = (height, largest share of samples that may be cut: where more stands out, that is the background).
    """
    height: Any = np.float32(gate[0])
    gated = _cut_out(white, height, gate[1])
    boxes, other, usable = white, np.empty(white.size, np.float32), white.size
    for scale in range(marks.size):
        half = (1 << scale) >> 1
        if scale == 0:
            above[0] = _count(boxes, marks[0])
        else:
            usable -= half
            if usable <= 0:
                return
            above[scale] = _doubled_count(boxes[: usable + half], half, other[:usable], marks[scale])
            boxes, other = other, boxes
        looked[scale] = _numbers(boxes[:usable]) if gated else usable


@compiled
def _count(wave: WaveArray, mark: float) -> Any:  # pragma: no cover - compiled
    beyond = np.int32(0)
    for i in range(wave.size):
        beyond += np.int32(abs(wave[i]) > mark)
    return beyond


@compiled
def _doubled_count(wave: WaveArray, half: int, out: WaveArray, mark: float) -> Any:  # pragma: no cover - compiled
    beyond = np.int32(0)
    ahead = wave[half : half + out.size]
    for i in range(out.size):
        total = wave[i] + ahead[i]
        out[i] = total
        beyond += np.int32(abs(total) > mark)
    return beyond


@compiled
def _numbers(wave: WaveArray) -> Any:  # pragma: no cover - compiled
    seen = np.int32(0)
    for i in range(wave.size):
        seen += np.int32(wave[i] == wave[i])
    return seen


@compiled
def count_runs(
    counts: NDArray[Any],
    dither: WaveArray,
    level: float,
    taps: WaveArray,
    runs: IntArray,
    gate: tuple[float, float],
    marks: WaveArray,
) -> tuple[IntArray, IntArray]:  # pragma: no cover - compiled
    """`count_above` for runs (first, one past last, start of the segment) of a record, (runs, scales) each."""
    above = np.zeros((len(runs), marks.size), np.int64)
    looked = np.zeros((len(runs), marks.size), np.int64)
    for row in range(len(runs)):
        white = white_run(counts, dither, level, taps, runs[row])
        count_above(white, gate, marks, above[row], looked[row])
    return above, looked


@compiled
def white_run(
    counts: NDArray[Any], dither: WaveArray, level: float, taps: WaveArray, run: IntArray
) -> WaveArray:  # pragma: no cover - compiled
    """One whitened run (first, one past last, start of the segment); the filter's length is left out at its start."""
    order = taps.size - 1
    white = np.empty(max(run[1] - run[0] - order, 0), np.float32)
    raw = np.empty(white.size + order, np.float32)
    for begin in range(0, raw.size, SUB_BLOCK):
        load_signal(counts, dither, level, run[2], run[0] + begin, raw[begin : begin + SUB_BLOCK])
    for begin in range(0, white.size, SUB_BLOCK):
        size = min(SUB_BLOCK, white.size - begin)
        filter_into(raw[begin : begin + size + order], taps, white[begin : begin + size])
    return white


@compiled
def gathered(
    counts: NDArray[Any], starts: IntArray, level: float, taper: WaveArray
) -> WaveArray:  # pragma: no cover - compiled
    """Tapered pieces of a record without its level, (pieces, samples) float32."""
    shift = np.float32(level)
    out = np.empty((starts.size, taper.size), np.float32)
    for row in range(starts.size):
        own, line = counts[starts[row] : starts[row] + taper.size], out[row]
        for i in range(taper.size):
            line[i] = (np.float32(own[i]) - shift) * taper[i]
    return out


def dither_table(counts: NDArray[Any]) -> WaveArray:
    """Numbers evenly spread over -0.5 to 0.5 that depend on the place alone (a mixing hash); floats get zeros.

    Whole numbers are spread over the width of a count by it: with little noise the noise level would otherwise jump
    from count to count, and the threshold with it. The table goes on past its period for a sub-block with margins.
    """
    size = DITHER_PERIOD + SUB_BLOCK + 2 * LONGEST_BOX
    if not np.issubdtype(counts.dtype, np.integer):
        return np.zeros(size, np.float32)
    place = np.arange(size).astype(np.uint64) % np.uint64(DITHER_PERIOD) * np.uint64(0x9E3779B97F4A7C15)
    place ^= place >> np.uint64(29)
    place *= np.uint64(0xBF58476D1CE4E5B9)
    return ((place >> np.uint64(40)).astype(np.float64) / (1 << 24) - 0.5).astype(np.float32)


def padded(taps: WaveArray) -> WaveArray:
    """A filter of at most 64 taps with zeros behind it."""
    return np.concatenate([taps, np.zeros(TAPS - taps.size)]).astype(np.float32)
