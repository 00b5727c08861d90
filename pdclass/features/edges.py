"""Edges: how fast a pulse rises and falls and how wide it is, by interpolated crossings of its own peak.

The base line is that of the pre-trigger and the top is the peak: the histogram levels of IEEE Std 181 find no
high state in a unipolar pulse.
"""

from __future__ import annotations

import numpy as np

from pdclass.compiled import compiled
from pdclass.features.feature import Feature
from pdclass.features.kernels import LANES, chance_energy, sum_of_squares
from pdclass.features.window import GUARD, ONSET, STEP_NS, Windows
from pdclass.pulses import FloatArray, IntArray, WaveArray

_LEVELS = "after IEEE Std 181-2011 (reference levels 10, 50, 90 %), base line and peak in place of histogram levels"
_LONGEST_NS = 15000.0
#: What a missing edge means.
_NO_FOOT = "the wave before the peak does not come down to a tenth of it"
_NO_FALL = "the pulse ends before it comes down to a tenth of the peak"
_NO_FLANKS = "the wave does not come down to {} of the peak on both sides of it".format
#: Crossings are looked for among the own samples and this long a lead [samples].
_LEAD = 2 * GUARD
#: Levels of the crossings, from the peak outwards.
_SHARES = (0.9, 0.5, 0.25, 0.1)
PLACES = (
    "peak",
    *(f"rise_{percent}" for percent in (90, 50, 25, 10)),
    *(f"fall_{percent}" for percent in (90, 50, 25, 10)),
    "foot_10",
    "raw_90",
    "raw_10",
)
_COLUMN = {name: column for column, name in enumerate(PLACES)}
_FOOT, _RAW_90, _RAW_10, _HEIGHT = _COLUMN["foot_10"], _COLUMN["raw_90"], _COLUMN["raw_10"], len(PLACES)


def measured_places(windows: Windows) -> FloatArray:
    """Places of the crossings that the features are measured between [samples], (pulses, PLACES and the height).

    Crossings are looked for among the pulse's own samples, on a running mean over a sixth of the pulse's width (a
    twenty-fourth for the rise): a slow edge in noise crosses a level many times, and the mean, not the first of
    them, is meant. `raw_10` and `raw_90` are those of the wave with its carriers, `foot_10` is on the mean over a
    sixth. NaN where the wave does not come down to the level.
    """
    noise = np.where(windows.noise > 0, windows.noise, np.nan)
    return _places(windows.wave, windows.raw, windows.end, windows.peak, noise)


def measure_edges(windows: Windows) -> FloatArray:
    """The features of this family, (pulses, EDGES)."""
    at = dict(zip(PLACES, measured_places(windows).T, strict=False))
    rise, raw = at["rise_90"] - at["rise_10"], at["raw_90"] - at["raw_10"]
    fall = at["fall_10"] - at["fall_90"]
    width_50 = at["fall_50"] - at["rise_50"]
    width_10 = at["fall_10"] - at["foot_10"]
    ratio = width_10 / np.where(width_50 > 0, width_50, np.nan)
    lopsided = fall / np.where(rise > 0, rise, np.nan)
    tail = _tails(windows.wave, windows.end, windows.peak, np.where(windows.noise > 0, windows.noise, 0.0))
    times = [each * STEP_NS for each in (rise, raw, fall, width_50, width_10)]
    return np.stack([*times, ratio, lopsided, tail * STEP_NS], axis=1)


@compiled
def _places(
    waves: WaveArray, raws: WaveArray, end: IntArray, peak: IntArray, noise: FloatArray
) -> FloatArray:  # pragma: no cover - compiled
    at = np.full((len(waves), _HEIGHT + 1), np.nan)
    first, found = ONSET - _LEAD, np.empty(_HEIGHT + 1)
    for r in range(len(waves)):
        wave, raw = waves[r, first : end[r]], raws[r, first : end[r]]
        width = _width(wave, max(0.1, 3 * noise[r])) if noise[r] > 0 else 0.0
        wide, fine, centre = int(width / 6) // 2, int(width / 24) // 2, peak[r] - first
        at[r, 0], at[r, _HEIGHT] = outer_crossings(wave, centre, wide, at[r, 1:5], at[r, 5:9])
        at[r, _FOOT] = at[r, 4]
        outer_crossings(wave, centre, fine, found[1:5], found[5:9])
        at[r, 1], at[r, 4] = found[1], found[4]
        if mean_at(raw, centre, fine) > 0:
            outer_crossings(raw, centre, fine, found[1:5], found[5:9])
            at[r, _RAW_90], at[r, _RAW_10] = found[1], found[4]
        at[r, :_HEIGHT] += first
    return at


@compiled
def _width(wave: WaveArray, limit: float) -> float:  # pragma: no cover - compiled
    """Energy of what stands above a limit, over that of the peak [samples]."""
    lane, low = np.zeros(LANES), np.float32(limit)
    whole = wave.size // LANES * LANES
    for first in range(0, whole, LANES):
        for j in range(LANES):
            value = wave[first + j] if abs(wave[first + j]) > low else np.float32(0.0)
            lane[j] += value * value
    for j in range(wave.size - whole):
        value = wave[whole + j] if abs(wave[whole + j]) > low else np.float32(0.0)
        lane[j] += value * value
    return float(lane.sum())


@compiled
def outer_crossings(
    wave: WaveArray, peak: int, reach: int, rise: FloatArray, fall: FloatArray
) -> tuple[float, float]:  # pragma: no cover - compiled
    """Where a running mean falls to 90, 50, 25 and 10 % of its peak, before (`rise`) and after it (`fall`).

    Parameters
    ----------
    wave : (samples,) whose peak lies near `peak`.
    reach : the mean is over so many samples to each side; ends are held.
    rise, fall : (4,) receive the places, interpolated [samples]; NaN where the mean does not come down to the level.

    Returns
    -------
    Place [samples] and height of the peak of the mean, by the parabola through its three highest samples.
    """
    first, stop = max(peak - 2 * GUARD, 0), min(peak + 2 * GUARD + 1, wave.size)
    value = mean_at(wave, first, reach)
    top, highest = first, value
    for i in range(first + 1, stop):
        value = _next_mean(wave, i - 1, reach, 1, value)
        if value > highest:
            top, highest = i, value
    highest = mean_at(wave, top, reach)
    place, height = float(top), highest
    if 0 < top < wave.size - 1:
        left, right = mean_at(wave, top - 1, reach), mean_at(wave, top + 1, reach)
        bend = left - 2 * highest + right
        shift = 0.5 * (left - right) / bend if bend < 0 else 0.0
        place, height = top + shift, highest - 0.25 * (left - right) * shift
    _crossings(wave, top, reach, -1, height, rise)
    _crossings(wave, top, reach, 1, height, fall)
    return place, height


@compiled
def _crossings(
    wave: WaveArray, top: int, reach: int, step: int, height: float, places: FloatArray
) -> None:  # pragma: no cover - compiled
    """Where the mean first falls below each share of a height, going from its top in steps of 1 or -1."""
    places[:] = np.nan
    former, i, level = mean_at(wave, top, reach), top, 0
    while level < len(_SHARES) and former < _SHARES[level] * height:
        level += 1
    while level < len(_SHARES) and 0 <= i + step < wave.size:
        value = _next_mean(wave, i, reach, step, former)
        while level < len(_SHARES) and value < _SHARES[level] * height:
            places[level] = i + step * (former - _SHARES[level] * height) / (former - value)
            level += 1
        former, i = value, i + step


@compiled
def mean_at(wave: WaveArray, place: int, reach: int) -> float:  # pragma: no cover - compiled
    """Mean of the samples about a place; ends are held."""
    total = 0.0
    for i in range(place - reach, place + reach + 1):
        total += wave[min(max(i, 0), wave.size - 1)]
    return total / (2 * reach + 1)


@compiled
def _next_mean(wave: WaveArray, place: int, reach: int, step: int, mean: float) -> float:  # pragma: no cover - compiled
    """The mean one step on from a place where it is known."""
    if reach == 0:
        return np.float64(wave[place + step])
    enters = min(max(place + step * (reach + 1), 0), wave.size - 1)
    leaves = min(max(place - step * reach, 0), wave.size - 1)
    return mean + (np.float64(wave[enters]) - np.float64(wave[leaves])) / (2 * reach + 1)


@compiled
def _tails(
    waves: WaveArray, end: IntArray, peak: IntArray, noise: FloatArray
) -> FloatArray:  # pragma: no cover - compiled
    """From the peak until nine tenths of the energy of the own samples have passed, the noise's energy left out.

    NaN where noise may have left that energy.
    """
    tails, first = np.full(len(waves), np.nan), ONSET - GUARD
    for r in range(len(waves)):
        floor = noise[r] * noise[r]
        total = sum_of_squares(waves[r, first : end[r]]) - floor * (end[r] - first)
        if not total > chance_energy(floor, end[r] - first):
            continue
        limit = 0.9 * total
        passed, i = 0.0, first
        while i < end[r]:
            value = np.float64(waves[r, i])
            passed += value * value - floor
            if passed >= limit:
                break
            i += 1
        tails[r] = max((i if i < end[r] else first) - peak[r], 0)
    return tails


def _edge(name: str, meaning: str, words: tuple[str, str], sentence: str, absent: str, snr_db: float = 9.0) -> Feature:
    return Feature(
        name, "ns", meaning, sentence, *words, (0.0, _LONGEST_NS), 5.0, _LEVELS, needs_snr_db=snr_db, absent=absent
    )


_SPEED, _WIDTH = ("slower", "faster"), ("wider", "narrower")


EDGES = (
    _edge("rise_ns", "10-90 % time of the edge that leads to the peak", _SPEED, "rise {value}", _NO_FOOT),
    _edge(
        "rise_raw_ns",
        "10-90 % time of the leading edge before radio carriers are taken out",
        _SPEED,
        "rise with radio carriers left in {value}",
        _NO_FOOT,
    ),
    _edge("fall_ns", "90-10 % time of the edge that follows the peak", _SPEED, "fall {value}", _NO_FALL),
    _edge("width_50_ns", "width at half of the peak", _WIDTH, "width at half of the peak {value}", _NO_FLANKS("half")),
    _edge(
        "width_10_ns",
        "width at a tenth of the peak",
        _WIDTH,
        "width at a tenth of the peak {value}",
        _NO_FLANKS("a tenth"),
        18.0,
    ),
    Feature(
        "width_ratio",
        "",
        "width at a tenth over width at half height",
        "width at a tenth over width at half height {value}",
        "broader at the foot",
        "narrower at the foot",
        (1.0, 1e4),
        0.1,
        _LEVELS,
        absent=_NO_FLANKS("a tenth"),
        needs_snr_db=18.0,
    ),
    Feature(
        "asymmetry",
        "",
        "fall time over rise time",
        "fall time over rise time {value}",
        "a longer fall for its rise",
        "a shorter fall for its rise",
        (0.0, 1e4),
        0.15,
        _LEVELS,
        absent=_NO_FLANKS("a tenth"),
        needs_snr_db=12.0,
    ),
    Feature(
        "tail_ns",
        "ns",
        "from the peak until nine tenths of the energy have passed",
        "nine tenths of the energy have passed {value} after the peak",
        "later",
        "sooner",
        (0.0, _LONGEST_NS),
        30,
        "own definition",
        absent="too little energy is left above the noise, or the record ends within the pulse",
        needs_snr_db=6.0,
        edition=2,
    ),
)
