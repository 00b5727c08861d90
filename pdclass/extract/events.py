"""From samples above threshold to events: where one begins, where it ends, where the next one begins inside it."""

from __future__ import annotations

import math
from functools import lru_cache

import numpy as np
from scipy.special import chdtri

from pdclass.compiled import compiled
from pdclass.extract.onsets import edge_foot, first_sample
from pdclass.pulses import FloatArray, IntArray, WaveArray

#: Smoothing of the whitened energy: short enough to part pulses 0.2 us apart, long enough to bridge noise.
ATTACK_S = 60e-9
DECAY_S = 300e-9
TWIN_S = 0.5e-6
#: A new pulse inside an older one's tail lifts the energy by this factor above what the tail held lately.
TAIL_RISE = 8.0
#: Within a microsecond, where a pulse's own humps also rise and fall, and the tail of the whitening filter after it,
#: only a rise to this share of the former peak energy after a dip to the other share counts.
TWIN_SHARE = 0.7
TWIN_DIP = 0.12
#: A swing to the other side with this share of the peak energy is a mode that rings.
SWING = 0.25
#: Where a pulse has begun the quick energy is at least this, and no chance of noise: a mean of few samples, as at low
#: rates, is above it as rarely as one of six samples is (the chance of that, for Gaussian noise).
ALIVE = 9.0
ALIVE_CHANCE = 7.4e-10
FADED = 2.0


def spans(rate_hz: float) -> tuple[int, int, int]:
    """Attack, decay and twin span [samples] at a sampling rate."""
    attack, decay, twin = (max(2, round(span * rate_hz)) for span in (ATTACK_S, DECAY_S, TWIN_S))
    return attack, decay, twin


@compiled
def _total_energy(white: WaveArray, begin: int, end: int) -> FloatArray:  # pragma: no cover - compiled
    """Sums of squares of `white` from `begin` up to each sample; one more entry than samples."""
    total = np.empty(end - begin + 1)
    total[0] = 0.0
    for i in range(begin, end):
        total[i - begin + 1] = total[i - begin] + float(white[i]) * float(white[i])
    return total


@compiled
def _mean(total: FloatArray, place: int, width: int) -> float:  # pragma: no cover - compiled
    """Mean square of the `width` samples up to and with a place, nothing being before the first."""
    return float((total[place + 1] - total[max(place + 1 - width, 0)]) / width)


@compiled
def _sign(white: WaveArray, last: int, width: int) -> float:  # pragma: no cover - compiled
    """Sign of the largest of the `width` samples up to and with `last`."""
    best = white[last]
    for i in range(max(0, last - width + 1), last):
        if abs(white[i]) > abs(best):
            best = white[i]
    return 1.0 if best >= 0 else -1.0


@compiled
def _rises(quick: FloatArray, begin: int, end: int, now: float, rise: float) -> bool:  # pragma: no cover - compiled
    """Whether `now` is more than `rise` times each of the quick energies from `begin` up to `end`; the latest first."""
    for i in range(end - 1, begin - 1, -1):  # noqa: SIM110 - compiled loops have no generators
        if now <= rise * quick[i]:
            return False
    return True


@compiled
def _quick_energy(total: FloatArray, width: int) -> FloatArray:  # pragma: no cover - compiled
    """`_mean` at every place."""
    quick = np.empty(total.size - 1)
    for i in range(min(width, quick.size)):
        quick[i] = _mean(total, i, width)
    late, early = total[width + 1 :], total[1:]
    own = quick[width:]
    for i in range(own.size):
        own[i] = (late[i] - early[i]) / width
    return quick


@compiled
def rough_starts(
    white: WaveArray, begin: int, lead: int, end: int, attack: int, decay: int, limits: FloatArray
) -> IntArray:  # pragma: no cover - compiled
    """Places from `lead` to `end` where the quick energy of a whitened stretch starts to rise for a new pulse.

    A twin has the sign of the pulse before it, and nothing of the other sign stands between them: what swings to
    the other side is taken for ringing. A smaller second pulse, below about 0.8 of the first one's height, stays part
    of it for half a microsecond and as long as the first one's tail does: the filter that takes a carrier out leaves
    something as large behind every pulse.

    `limits` = (alive, faded, tail rise, twin share, twin dip, swing, twin span).
    """
    alive, faded, rise, share, dip, swing = limits[0], limits[1], limits[2], limits[3], limits[4], limits[5]
    twin = int(limits[6])
    total = _total_energy(white, begin, end)
    energy = _quick_energy(total, attack)
    found = np.empty((end - lead) // attack + 2, np.int64)
    count, start, active, ringing = 0, 0, False, False
    peak, lowest, sign = 0.0, 0.0, 1.0
    for i in range(lead - begin, end - begin):
        quick = energy[i]
        fresh = False
        if not active:
            fresh = quick > alive
        elif quick < alive and i > start + attack and _mean(total, i, decay) < faded:
            active = False
            continue
        else:
            if quick > alive and i - start > twin:
                fresh = _rises(energy, max(i - twin, lead - begin), i - attack, quick, rise)
            if quick > swing * peak and _sign(white, begin + i, attack) != sign:
                ringing = True
            if not ringing and attack < i - start <= 2 * twin:
                fresh = fresh or (lowest < dip * peak and quick > share * peak)
        if fresh and count < found.size:
            found[count] = begin + i
            count += 1
            active, start, ringing = True, i, False
        if fresh or quick > peak:
            peak, lowest, sign = quick, quick, _sign(white, begin + i, attack)
        else:
            lowest = min(lowest, quick)
    return found[:count]


@compiled
def strongest_box(white: WaveArray, begin: int, end: int) -> tuple[int, int]:  # pragma: no cover - compiled
    """First sample and width of the box of 1, 2, 4, ... samples whose sum stands out most from its noise."""
    best, place, width = -1.0, begin, 1
    size = 1
    while size <= end - begin:
        total = 0.0
        for i in range(begin, end):
            total += white[i]
            if i - begin >= size:
                total -= white[i - size]
            if i - begin >= size - 1 and abs(total) / math.sqrt(size) > best:
                best, place, width = abs(total) / math.sqrt(size), i - size + 1, size
        size *= 2
    return place, width


@compiled
def _valley(white: WaveArray, begin: int, end: int) -> int:  # pragma: no cover - compiled
    """The middle of the three samples of least energy between two events."""
    least, place = np.inf, begin
    for i in range(begin + 1, end):
        energy = float(white[i - 1]) ** 2 + float(white[i]) ** 2 + float(white[i + 1]) ** 2
        if energy < least:
            least, place = energy, i
    return place


@compiled
def event_end(white: WaveArray, start: int, limit: int, decay: int) -> int:  # pragma: no cover - compiled
    """One past the last sample that belongs to an event: where its energy has sunk into the noise.

    Parameters
    ----------
    white : whitened stretch, noise of variance 1.
    start, limit : onset, and the latest possible end (the next onset or the end of the stretch).
    decay : samples over which the energy is averaged.
    """
    total, most, quiet = 0.0, -1.0, -1
    for k in range(limit - start):
        total += float(white[start + k]) ** 2
        if k >= decay:
            total -= float(white[start + k - decay]) ** 2
        tail = total / min(k + 1, decay)
        if k < 4 * decay and tail > most:
            most, quiet = tail, -1
        if quiet < 0 and tail < FADED:
            quiet = k
        if quiet >= 0 and k >= 4 * decay:
            break
    end = start + quiet - decay // 2 if quiet >= 0 else limit
    return min(max(end, start + max(2, decay // 3)), limit)


@compiled
def piece_events(
    white: WaveArray, piece: IntArray, attack: int, decay: int, limits: FloatArray
) -> tuple[IntArray, FloatArray, bool]:  # pragma: no cover - compiled
    """Events of a piece of a cluster, in the order found, and whether a later end of the stretch would change nothing.

    Parameters
    ----------
    white : whitened stretch, noise of variance 1.
    piece : earliest sample, first flagged, one past the last flagged, end of the stretch, whether the cluster began
        before: then what is already there at the first place is no new event.
    attack, decay, limits : as for `rough_starts`.

    Returns
    -------
    rows of (onset, end), and of (refined instant after the onset, its standard uncertainty) [samples]; settled.
    """
    twin = int(limits[6])
    begin, first, last, stop, continued = piece
    rough = rough_starts(white, begin, max(begin, first - decay), min(last + attack + 1, stop), attack, decay, limits)
    if continued:
        rough = rough[rough > first + attack]
    ahead, settled = twin, stop > last + 2 * twin
    if not continued and not rough.size:
        box, width = strongest_box(white, max(begin, first - 2 * twin), min(last + 2 * twin, stop))
        rough = np.array([box])
        ahead = max(twin, width)
    places, feet = np.empty((rough.size, 2), np.int64), np.empty((rough.size, 2))
    count = 0
    for n in range(rough.size):
        place = rough[n]
        following = rough[n + 1] if n + 1 < rough.size else stop
        low = max(places[count - 1, 0] + attack if count else begin, place - ahead)
        high = min(place + ahead, max(following - attack, place + 2 * attack), stop)
        settled &= n + 1 < rough.size or (place + ahead <= stop - attack and place + 2 * attack <= stop)
        if count:
            low = _valley(white, low, place)
        sample, offset, std = edge_foot(white, low, max(place - attack, low), high)
        start = sample + math.floor(offset)
        if count == 0:
            start = min(first_sample(white, low, place, high, attack), start)
        start = min(max(start, low), high - 1)
        if count and start <= places[count - 1, 0]:
            continue
        places[count, 0], feet[count, 0], feet[count, 1] = start, sample - start + offset, std
        count += 1
    for n in range(count):
        limit = places[n + 1, 0] if n + 1 < count else stop
        places[n, 1] = event_end(white, places[n, 0], limit, decay)
    if count:
        settled &= places[count - 1, 1] < stop and places[count - 1, 0] + 4 * decay < stop
    return places[:count], feet[:count], settled


def found_in(white: WaveArray, piece: IntArray, rate_hz: float) -> tuple[IntArray, FloatArray]:
    """Events of a piece of a cluster as in `piece_events`, with the spans of a sampling rate."""
    attack, decay, _ = spans(rate_hz)
    places, feet, _ = piece_events(white, piece, attack, decay, all_limits(rate_hz))
    return places, feet


def all_limits(rate_hz: float) -> FloatArray:
    """The `limits` of `rough_starts` at a sampling rate."""
    attack, _, twin = spans(rate_hz)
    alive = max(ALIVE, float(chdtri(attack, ALIVE_CHANCE)) / attack)
    return np.array([alive, FADED, TAIL_RISE, TWIN_SHARE, TWIN_DIP, SWING, twin])


@compiled
def in_order(onsets: IntArray, ends: IntArray, apart: int) -> IntArray:  # pragma: no cover - compiled
    """Which of the events, sorted by onset, stay; their ends are cut at the next onset.

    One that a neighbouring piece found again, less than `apart` samples after the first, is dropped.
    """
    kept = np.empty(onsets.size, np.int64)
    count = 0
    for n in range(onsets.size):
        if count and onsets[n] < ends[kept[count - 1]]:
            if onsets[n] - onsets[kept[count - 1]] < apart:
                continue
            ends[kept[count - 1]] = onsets[n]
        kept[count] = n
        count += 1
    return kept[:count]


def threshold_sigmas(scales: int, samples_per_cycle: float, false_events: float) -> FloatArray:
    """How many noise levels a box sum of each scale must reach for a stated rate of false events a cycle.

    The noise is taken as Gaussian and white. Box sums of w samples, correlated as 1 - |lag|/w, leave z noise
    levels in about z²/w separate excursions a sample times the tail of the normal law, and at most one. The rate
    is shared equally among the scales. Background with heavier tails gives more false events.

    References
    ----------
    J. Pickands, Trans. Am. Math. Soc. 145, 51-73, 1969 (from memory; index 1, constant 1).
    """
    return _known_sigmas(scales, samples_per_cycle, false_events).copy()


@lru_cache(maxsize=64)
def _known_sigmas(scales: int, samples_per_cycle: float, false_events: float) -> FloatArray:
    return np.asarray(_sigmas(scales, samples_per_cycle, false_events), np.float64)


@compiled
def _sigmas(scales: int, samples_per_cycle: float, false_events: float) -> FloatArray:  # pragma: no cover - compiled
    sigmas = np.full(scales, 5.0)
    for scale in range(scales):
        for _ in range(20):
            places = samples_per_cycle * min(1.0, sigmas[scale] ** 2 / 2.0**scale)
            sigmas[scale] = _normal_quantile(min(false_events / scales / places, 1.0) / 2)
    return sigmas


@compiled
def _normal_quantile(tail: float) -> float:  # pragma: no cover - compiled
    """The z beyond which the standard normal law leaves the share `tail`, by bisection on erfc."""
    low, high = 0.0, 40.0
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (middle, high) if math.erfc(middle / math.sqrt(2)) / 2 > tail else (low, middle)
    return high
