"""Where an event begins: its first sample, and the refined instant of its first edge with its uncertainty.

The refined instant is where the tangent at the steepest place of the first edge meets the level without pulse, on the
whitened record smoothed by a Gaussian. Smoothing and tangent are continuous in time: a pulse that comes a share of a
sample later has an instant that much later.
"""

from __future__ import annotations

import math

import numpy as np

from pdclass.compiled import compiled
from pdclass.pulses import FloatArray, WaveArray

#: Before a crest of so many noise levels three samples in a row below the other number are noise, no onset.
CLEAR = 10.0
QUIET = 3.0
#: Smoothing starts at one sample (standard deviation) and doubles until the edge stands out by so many noise levels
#: and its instant is known to half the smoothing: less would follow the noise, more would move slow edges.
SMOOTHINGS = 6
STANDS_OUT = 8.0
_REACH = 4.0
#: The edge is followed back so many standard deviations before the place where half its height may be reached.
_AHEAD, _NEAR = 12.0, 3.0
#: Smoothing that makes the edge stand out so much less than a narrower one did is wider than the pulse.
_PAST = 0.8
_NEWTON = 3
#: What the uncertainty never falls below [sample]: the wave between samples is not known, and where in a sample a
#: fast edge begins moves its foot so much, however far the pulse stands above the noise.
BETWEEN_SAMPLES = 0.03
_ROOT_TWO_PI = 2.5066282746310002


@compiled
def onset_by_information(white: WaveArray, begin: int, end: int) -> int:  # pragma: no cover - compiled
    """The first sample of the pulse in a stretch that begins with noise and ends at the pulse's first crest.

    The stretch is split where two Gaussian variances explain it best (smallest Akaike criterion).

    References
    ----------
    N. Maeda, Zisin 38, 365-379, 1985 (from memory): AIC(k) = k ln var(x[:k]) + (n-k-1) ln var(x[k:]).
    """
    count = end - begin
    if count < 8:
        return begin
    all_first, all_second = 0.0, 0.0
    for i in range(begin, end):
        all_first += white[i]
        all_second += float(white[i]) * float(white[i])
    tiny = 1e-12 * max(all_second, 1e-300)
    best, place = np.inf, begin
    first, second = 0.0, 0.0
    for k in range(1, count - 1):
        x = float(white[begin + k - 1])
        first += x
        second += x * x
        if k < 3:
            continue
        rest = count - k
        before = max(second / k - (first / k) ** 2, tiny)
        after = max((all_second - second) / rest - ((all_first - first) / rest) ** 2, tiny)
        score = k * math.log(before) + (rest - 1) * math.log(after)
        if score < best:
            best, place = score, begin + k
    return place


@compiled
def first_sample(
    white: WaveArray, begin: int, place: int, stop: int, attack: int
) -> int:  # pragma: no cover - compiled
    """The first sample near a rough place: by information up to the first sample of half the height that follows.

    Where that crest is not clear of the noise the criterion would follow the noise: `stop` is returned.
    """
    first = max(place - attack, begin)
    height = np.float32(0.0)
    for i in range(first, stop):
        height = max(height, abs(white[i]))
    crest = first
    while crest < stop - 1 and abs(white[crest]) < 0.5 * height:
        crest += 1
    if abs(white[crest]) < CLEAR:
        return stop
    onset = onset_by_information(white, begin, min(max(crest, place) + 2, white.size))
    # what lies before the last quiet stretch was the noise
    for i in range(crest - 1, onset + 1, -1):
        if abs(white[i]) < QUIET and abs(white[i - 1]) < QUIET and abs(white[i - 2]) < QUIET:
            return i + 1
    return onset


@compiled
def _smooth(
    white: WaveArray, anchor: int, offset: float, width: float, out: FloatArray
) -> None:  # pragma: no cover - compiled
    """Value, slope, and second and third derivative at `anchor + offset` of the record smoothed by a Gaussian."""
    out[:] = 0.0
    reach = _REACH * width
    first, last = anchor + math.ceil(offset - reach), anchor + math.floor(offset + reach)
    for i in range(max(first, 0), min(last, white.size - 1) + 1):
        u = (offset - (i - anchor)) / width
        weight = math.exp(-0.5 * u * u) / (width * _ROOT_TWO_PI) * white[i]
        out[0] += weight
        out[1] -= weight * u / width
        out[2] += weight * (u * u - 1.0) / width**2
        out[3] += weight * u * (3.0 - u * u) / width**3


@compiled
def _smoothed(white: WaveArray, begin: int, count: int, width: float) -> FloatArray:  # pragma: no cover - compiled
    """The record smoothed by a Gaussian at `count` places from `begin` on, tap by tap; nothing is beyond its ends."""
    reach = int(_REACH * width)
    near = np.zeros(count + 2 * reach)
    for i in range(max(begin - reach, 0), min(begin + count + reach, white.size)):
        near[i - begin + reach] = white[i]
    weights = np.empty(2 * reach + 1)
    for k in range(reach + 1):
        weights[k] = math.exp(-0.5 * ((k - reach) / width) ** 2) / (width * _ROOT_TWO_PI)
        weights[2 * reach - k] = weights[k]
    out: FloatArray = weights[0] * near[:count]
    for k in range(1, 2 * reach + 1, 4):
        # four taps a pass, added in their order: `reach` is a multiple of two
        a, b, c, d = weights[k], weights[k + 1], weights[k + 2], weights[k + 3]
        first, second = near[k : k + count], near[k + 1 : k + 1 + count]
        third, fourth = near[k + 2 : k + 2 + count], near[k + 3 : k + 3 + count]
        for n in range(count):
            out[n] = (((out[n] + a * first[n]) + b * second[n]) + c * third[n]) + d * fourth[n]
    return out


@compiled
def _first_edge(wave: FloatArray, low: int) -> tuple[int, float, float, int]:  # pragma: no cover - compiled
    """Steepest step (its first place), sign and height of the first edge to half the largest magnitude from `low` on.

    The last of the four is where the edge begins.

    The edge is what rises without a break through the first place of half the height.
    """
    height = 0.0
    for n in range(low, wave.size):
        height = max(height, abs(wave[n]))
    half = low
    while half < wave.size - 1 and abs(wave[half]) < 0.5 * height:
        half += 1
    sign = 1.0 if wave[half] >= 0 else -1.0
    base, top = half, half
    while base > 0 and sign * wave[base - 1] < sign * wave[base]:
        base -= 1
    while top < wave.size - 1 and sign * wave[top + 1] > sign * wave[top]:
        top += 1
    steepest, slope = max(half - 1, 0), 0.0
    for n in range(base, top):
        if sign * (wave[n + 1] - wave[n]) > slope:
            slope, steepest = sign * (wave[n + 1] - wave[n]), n
    return steepest, sign, height, base


@compiled
def _foot(
    white: WaveArray, anchor: int, sign: float, width: float
) -> tuple[float, float]:  # pragma: no cover - compiled
    """Foot of an edge that is steepest between a sample and the next, counted from it, and its uncertainty [samples].

    Offsets count from a sample near by, so that no rounding depends on where the stretch begins.
    """
    at = 0.5
    local = np.zeros(4)
    _smooth(white, anchor, at, width, local)
    for _ in range(_NEWTON):
        if sign * local[3] >= 0:
            break
        former, at = at, min(max(at - local[2] / local[3], -0.5), 1.5)
        if at == former:
            break
        _smooth(white, anchor, at, width, local)
    if sign * local[1] <= 0:
        return at, np.inf
    # a sudden step, smoothed, has its foot this far ahead of its place: taken back where the edge is no slower
    ahead = 0.5 * _ROOT_TWO_PI * width
    lever = local[0] / local[1]
    share = min((ahead / lever) ** 2, 2.0)
    return at - lever * (1.0 - share), _foot_std(local, width, lever, share)


@compiled
def _foot_std(local: FloatArray, width: float, lever: float, share: float) -> float:  # pragma: no cover - compiled
    """Standard uncertainty of a foot from white noise of variance 1, carried through value, slope and place.

    Smoothing by a Gaussian leaves value, slope and curvature the variances below, and value and curvature a
    covariance of minus that of the slope.
    """
    of_value = 1.0 / (math.sqrt(2.0) * _ROOT_TWO_PI * width)
    of_slope = of_value / (2.0 * width**2)
    of_curvature = 3.0 * of_slope / (2.0 * width**2)
    by_value = -(1.0 + share) / local[1]
    by_slope = (1.0 + share) * lever / local[1]
    by_curvature = share / local[3] if local[3] != 0 else 0.0
    variance = by_value**2 * of_value + by_slope**2 * of_slope + by_curvature**2 * of_curvature
    return math.sqrt(max(variance - 2.0 * by_value * by_curvature * of_slope, 0.0))


@compiled
def edge_foot(
    white: WaveArray, begin: int, first: int, stop: int
) -> tuple[int, float, float]:  # pragma: no cover - compiled
    """The refined instant of an event, as a sample and an offset from it, and its standard uncertainty [samples].

    Parameters
    ----------
    white : whitened stretch, noise of variance 1.
    begin, first, stop : where the edge may begin, where half its height may be reached, and where the search ends.

    Returns
    -------
    sample, offset, uncertainty (of noise, and of the wave between samples); the latter NaN where it is not known.
    """
    width, most = 1.0, 0.0
    sample, offset, std = first, 0.0, np.nan
    # an edge that does not stand out is refined in the end only, if no other smoothing serves better
    pending, best_sign, best_width = False, 1.0, 1.0
    for _ in range(SMOOTHINGS):
        early = max(begin, first - int(_AHEAD * width))
        # most edges begin close by: what lies further back is smoothed only for those that do not
        near = max(early, first - int(_NEAR * width))
        steepest, sign, height, base = _first_edge(_smoothed(white, near, stop - near, width), first - near)
        if base == 0 and near > early:
            near = early
            steepest, sign, height, base = _first_edge(_smoothed(white, near, stop - near, width), first - near)
        stands_out = height * math.sqrt(math.sqrt(2.0) * _ROOT_TWO_PI * width)
        if stands_out >= STANDS_OUT:
            at, spread = _foot(white, near + steepest, sign, width)
            if stands_out > most:
                sample, offset, std, pending = near + steepest, at, spread, False
            if spread <= width / 2:
                return near + steepest, at, math.hypot(spread, BETWEEN_SAMPLES)
        elif stands_out > most:
            sample, best_sign, best_width, pending = near + steepest, sign, width, True
        most = max(most, stands_out)
        if stands_out < _PAST * most:
            break
        width *= 2.0
    if pending:
        offset, std = _foot(white, sample, best_sign, best_width)
    return sample, offset, math.hypot(std, BETWEEN_SAMPLES) if std < stop - begin else np.nan
