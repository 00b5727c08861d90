"""Tilt: how the level and the delay of the first arrival run over frequency, before any echo can.

Skin effect takes away by the root of the frequency and delays by its inverse root, dielectric and semiconducting
screens take away by the frequency. All three are measured behind one lower corner, with the noise subtracted and each
frequency weighing as much as it stands out of it.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.features.feature import Feature
from pdclass.features.window import ANALYSIS_BAND_HZ, ANALYSIS_RATE_HZ, GUARD, ONSET, STEP_NS, Windows
from pdclass.pulses import FloatArray, IntArray

Samples = NDArray[np.floating[Any]]

EDGES_MHZ = (0.5, 1.3, 2.5, 4.5, 7.0, 10.0, 13.5, 18.0, 25.0)
#: The first arrival, if the pulse does not end before [samples from the onset], and what share of it fades out.
_LENGTH, _FADE = 120, 0.4
#: Every chain's lower corner is moved to this one: the tail then tells of the pulse and not of the transformer.
COMMON_LOW_HZ = 0.3e6
#: The spectrum is taken at multiples of the analysis rate over this; a wave so short has no finer structure.
_GRID = 256
_BINS = 65
_STEP_MHZ = ANALYSIS_RATE_HZ / _GRID / 1e6
#: A band stands so many times over the noise and a bin of a fit so many times, and has this share of the strongest.
_CLEAR_BAND, _CLEAR_BIN, _SHARE = 2.0, 6.0, 1e-4
#: Tilts are fitted from here, delays from the second, for further down the end of the first arrival bends them; up to
#: here whatever the chain, for with another range they are other numbers; over so many bins at the least.
_LEVEL_FROM_MHZ, _DELAY_FROM_MHZ, _FIT_TO_MHZ, _FIT_BINS = 0.7, 2.5, 10.0, 8
#: A chain that does not go so far would bend them.
_FIT_REACH_HZ = 12.5e6
#: Delays are fitted to bins that stand so many times over the noise, if these go up at least so far [MHz].
_CLEAR_DELAY, _DELAY_REACH_MHZ = 30.0, 6.0
#: What a fit may miss, as a weighted rms, else level and delay do not run like that: a pulse that rings has a hill
#: [dB], and its delay is far from an inverse root [ns, and share of the dispersion].
_MOST_DB, _MOST_NS, _MOST_SHARE = 4.0, 6.0, 0.3
#: What a straight line misses even without noise, as a variance of the natural logarithm of the power.
_MISFIT = 0.01
#: Between these frequencies dispersion is stated [MHz].
_EARLY_MHZ, _LATE_MHZ = 10.0, 1.0
_TILTS = 3
_DB = 10 / np.log(10)


def measure_tilt(windows: Windows) -> FloatArray:
    """The features of this family, (pulses, features): NaN where nothing stands out of the noise, or it is unknown."""
    found = np.full((len(windows), len(TILT)), np.nan)
    starts = np.array([int(np.ceil(edge / _STEP_MHZ)) for edge in EDGES_MHZ])
    _tilts_into(
        found,
        windows.wave,
        windows.last,
        windows.end,
        windows.noise,
        windows.noise_power,
        windows.low_hz,
        _turns(),
        starts,
    )
    return found


@lru_cache(maxsize=1)
def _turns() -> FloatArray:
    """Cosine and sine of every bin at every sample, (2, samples, bins)."""
    angle = 2 * np.pi / _GRID * np.outer(np.arange(GUARD + _LENGTH), np.arange(_BINS))
    return np.stack([np.cos(angle), np.sin(angle)])


@compiled
def slopes(first: FloatArray, second: FloatArray, level: FloatArray, weight: FloatArray) -> tuple[float, float]:
    # pragma: no cover - compiled
    """Both slopes of level = a + b first + c second by weighted least squares; NaN where they cannot be parted."""
    total = np.sum(weight)
    x, z = first - np.sum(weight * first) / total, second - np.sum(weight * second) / total
    y = level - np.sum(weight * level) / total
    xx, zz, xz = np.sum(weight * x * x), np.sum(weight * z * z), np.sum(weight * x * z)
    xy, zy = np.sum(weight * x * y), np.sum(weight * z * y)
    apart = xx * zz - xz * xz
    if not apart > 1e-9 * xx * zz:
        return np.nan, np.nan
    return (xy * zz - zy * xz) / apart, (zy * xx - xy * xz) / apart


@compiled
def slope(first: FloatArray, level: FloatArray, weight: FloatArray) -> float:  # pragma: no cover - compiled
    """Slope of level = a + b first by weighted least squares."""
    x = first - np.sum(weight * first) / np.sum(weight)
    return float(np.sum(weight * x * level) / np.sum(weight * x * x))


@compiled
def _begin(wave: Samples, low_hz: float, piece: FloatArray) -> None:  # pragma: no cover - compiled
    """Write the first arrival as if the chain's first-order lower corner lay at 0.3 MHz; unchanged where unknown."""
    start = ONSET - GUARD
    per_sample = 2 * np.pi / ANALYSIS_RATE_HZ
    gain = per_sample * (low_hz - COMMON_LOW_HZ) if low_hz > 0 else 0.0
    decay, past = np.exp(-per_sample * COMMON_LOW_HZ), 0.0
    for i in range(start + piece.size):
        past = wave[i] + decay * past
        if i >= start:
            # the integral by trapezoids
            piece[i - start] = wave[i] + gain * (past - 0.5 * wave[i])


@compiled
def _fade_out(piece: FloatArray, own: int) -> float:  # pragma: no cover - compiled
    """Let what begins with `GUARD` samples fade to nothing `own` samples later; the sum of the squared weights."""
    fade = max(int(_FADE * own), 1)
    first = GUARD + own - fade
    energy = np.float64(first)
    for i in range(first, piece.size):
        weight = 0.5 + 0.5 * np.cos(np.pi * (i - first + 0.5) / fade) if i < GUARD + own else 0.0
        piece[i] *= weight
        energy += weight * weight
    return energy


@compiled
def _turned_into(sums: FloatArray, piece: FloatArray, turns: FloatArray, first: int, last: int) -> None:
    # pragma: no cover - compiled
    """Write the sums of samples times each turn, (2, bins), from the first bin to the last.

    Four samples at a time, each bin's terms added one after the other in their order. Samples: a multiple of four.
    """
    sums[:, first:last] = 0.0
    for part in range(2):
        total = sums[part, first:last]
        for n in range(0, piece.size, 4):
            x, y, z, w = piece[n], piece[n + 1], piece[n + 2], piece[n + 3]
            a, b = turns[part, n, first:last], turns[part, n + 1, first:last]
            c, d = turns[part, n + 2, first:last], turns[part, n + 3, first:last]
            for k in range(total.size):
                total[k] = (((total[k] + x * a[k]) + y * b[k]) + z * c[k]) + w * d[k]


@compiled
def _power_and_lag(
    piece: FloatArray, turns: FloatArray, sums: FloatArray, power: FloatArray, lag: FloatArray
) -> None:  # pragma: no cover - compiled
    """Write |X|² at every bin, and Re(X* Y) [samples] where delays are fitted; X, Y transforms of x(n) and n x(n)."""
    _turned_into(sums[:2], piece, turns, 0, power.size)
    for n in range(piece.size):
        piece[n] *= n
    first, last = int(_DELAY_FROM_MHZ / _STEP_MHZ), int(_FIT_TO_MHZ / _STEP_MHZ) + 1
    _turned_into(sums[2:], piece, turns, first, last)
    for k in range(power.size):
        power[k] = sums[0, k] ** 2 + sums[1, k] ** 2
        lag[k] = sums[0, k] * sums[2, k] + sums[1, k] * sums[3, k]


@compiled
def _levels_into(
    found: FloatArray, power: FloatArray, noise: FloatArray, starts: IntArray
) -> None:  # pragma: no cover - compiled
    """Write the mean power of each band over that of all of them, noise subtracted [dB]."""
    size = found.size
    left, floor = np.empty(size), np.empty(size)
    total = 0.0
    for band in range(size):
        low, high = starts[band], starts[band + 1]
        floor[band] = np.mean(noise[low:high])
        left[band] = np.mean(power[low:high]) - floor[band]
        total += left[band] * (high - low)
    mean = total / (starts[-1] - starts[0])
    for band in range(size):
        if left[band] > max((_CLEAR_BAND - 1) * floor[band], _SHARE * left.max()) and mean > 0:
            found[band] = _DB * np.log(left[band] / mean)


@compiled
def _fits_into(
    found: FloatArray, power: FloatArray, noise: FloatArray, lag: FloatArray, low_hz: float
) -> None:  # pragma: no cover - compiled
    """Write both tilts [dB] and the dispersion [ns] over the bins that stand out; what the corners do is undone."""
    most = power.max()
    kept = np.empty((5, power.size))
    mhz, level, delay, weight, trust = kept
    used, top = 0, 0.0
    low_mhz = COMMON_LOW_HZ / 1e6 if low_hz > 0 else 0.0
    for k in range(1, power.size):
        f = k * _STEP_MHZ
        signal = power[k] - noise[k]
        if f < _LEVEL_FROM_MHZ or f > _FIT_TO_MHZ or power[k] <= _CLEAR_BIN * noise[k] or power[k] <= _SHARE * most:
            continue
        hidden = noise[k] / signal
        mhz[used] = f
        level[used] = _DB * np.log(signal * (1 + (low_mhz / f) ** 2)) + _pass_db(f)
        # group delay of the corner: b/(w² + b²)
        delay[used] = lag[k] / power[k] * STEP_NS - 1e3 * low_mhz / (2 * np.pi * (f * f + low_mhz**2))
        weight[used] = 1 / (_MISFIT + 2 * hidden + hidden * hidden)
        sure = f >= _DELAY_FROM_MHZ and power[k] > _CLEAR_DELAY * noise[k]
        trust[used] = power[k] / (0.01 * most + noise[k]) if sure else 0.0
        top = f if sure else top
        used += 1
    if used < _FIT_BINS:
        return
    mhz, level, delay, weight, trust = mhz[:used], level[:used], delay[:used], weight[:used], trust[:used]
    root, straight = slopes(np.sqrt(mhz), mhz, level, weight)
    if _missed(level - root * np.sqrt(mhz) - straight * mhz, weight) <= _MOST_DB:
        found[0], found[1] = root, straight
    if np.count_nonzero(trust) < _FIT_BINS or top < _DELAY_REACH_MHZ:
        return
    inverse = slope(1 / np.sqrt(mhz), delay, trust)
    later = inverse * (1 / np.sqrt(_LATE_MHZ) - 1 / np.sqrt(_EARLY_MHZ))
    if _missed(delay - inverse / np.sqrt(mhz), trust) <= max(_MOST_NS, _MOST_SHARE * abs(later)):
        found[2] = later


@compiled
def _missed(left: FloatArray, weight: FloatArray) -> float:  # pragma: no cover - compiled
    """Weighted rms of what a fit leaves, about its mean."""
    total = np.sum(weight)
    mean = np.sum(weight * left) / total
    return float(np.sqrt(np.sum(weight * (left - mean) ** 2) / total))


@compiled
def _pass_db(f_mhz: float) -> float:  # pragma: no cover - compiled
    """What the analysis band's Gaussian low-pass took away [dB]."""
    return float(_DB * np.log(2.0) * (f_mhz * 1e6 / ANALYSIS_BAND_HZ[1]) ** 2)


@compiled
def _tilts_into(
    found: FloatArray,
    waves: Samples,
    last: IntArray,
    end: IntArray,
    noise: FloatArray,
    noise_power: Samples,
    corner_hz: FloatArray,
    turns: FloatArray,
    starts: IntArray,
) -> None:  # pragma: no cover - compiled
    bins, every = turns.shape[2], (noise_power.shape[1] - 1) * 2 // _GRID
    piece, power, lag, floor = np.empty(turns.shape[1]), np.empty(bins), np.empty(bins), np.empty(bins)
    bands, sums = starts.size - 1, np.zeros((4, bins))
    for row in range(len(waves)):
        if not noise[row] > 0 or last[row] < ONSET + _LENGTH:
            continue
        low_hz = corner_hz[row]
        _begin(waves[row], low_hz, piece)
        own = min(end[row] - ONSET, _LENGTH)
        energy = _fade_out(piece, own)
        # what follows is zero
        _power_and_lag(piece[: (GUARD + own + 3) // 4 * 4], turns, sums, power, lag)
        for k in range(bins):
            square, floor[k] = (k * _STEP_MHZ * 1e6) ** 2, noise_power[row, k * every]
            floor[k] *= energy / (end[row] - ONSET + GUARD)
            if low_hz > 0:
                floor[k] *= (square + low_hz**2) / (square + COMMON_LOW_HZ**2)
        _levels_into(found[row, :bands], power, floor, starts)
        _fits_into(found[row, bands:], power, floor, lag, low_hz)


#: What a missing tilt means.
_NO_TILT = "the level has a hill, as of a pulse that rings, or too little of the band stands out of the noise"


def _level(low: float, high: float) -> Feature:
    return Feature(
        f"first_1p2_level_{low:g}_{high:g}_db".replace(".", "p"),
        "dB",
        f"level of the first 1.2 µs at {low:g}-{high:g} MHz over that of the whole band",
        f"level of the first 1.2 µs at {low:g}-{high:g} MHz over that of the whole band is {{value}}",
        "higher",
        "lower",
        (-60.0, 30.0),
        1.5,
        "own definition",
        absent="too little power in this band",
        needs_hz=0.8 * high * 1e6,
        needs_snr_db=6.0,
    )


TILT = (
    *(_level(low, high) for low, high in pairwise(EDGES_MHZ)),
    Feature(
        "first_root_tilt_db",
        "dB/√MHz",
        "tilt of the first arrival's level against the root of the frequency, the mark of skin effect",
        "tilt of the first arrival against the root of the frequency (skin effect) {value}",
        "more upward",
        "more downward",
        (-500.0, 500.0),
        3.0,
        "exp(-K √s): R. L. Wigington, N. S. Nahman, Proc. IRE 45, 166-174, 1957 (from memory)",
        absent=_NO_TILT,
        needs_hz=_FIT_REACH_HZ,
        needs_snr_db=20.0,
    ),
    Feature(
        "first_straight_tilt_db",
        "dB/MHz",
        "what is left of that tilt against the frequency itself, the mark of screens and dielectric",
        "tilt of the first arrival against the frequency itself (screens, dielectric) {value}",
        "more upward",
        "more downward",
        (-200.0, 200.0),
        0.6,
        "own definition",
        absent=_NO_TILT,
        needs_hz=_FIT_REACH_HZ,
        needs_snr_db=20.0,
    ),
    Feature(
        "first_dispersion_ns",
        "ns",
        "how much later 1 MHz arrives than 10 MHz, if the delay runs as that of skin effect",
        "first arrival at 1 MHz comes {value} after that at 10 MHz",
        "later",
        "earlier",
        (-300.0, 300.0),
        8.0,
        "exp(-K √s): R. L. Wigington, N. S. Nahman, Proc. IRE 45, 166-174, 1957 (from memory)",
        absent="the delay does not run as that of skin effect, or too little of the band stands out of the noise",
        below_zero="that is before it",
        needs_hz=_FIT_REACH_HZ,
        needs_snr_db=12.0,
    ),
)
