"""From runs above threshold to events: where one begins, where it ends, where the next one begins inside it."""

from __future__ import annotations

import numba
import numpy as np
from numpy.typing import NDArray
from scipy.special import ndtri

from pdclass.pulses import FloatArray, IntArray, WaveArray

_njit = numba.njit(cache=True, nogil=True)

#: Smoothing of the whitened energy: short enough to part pulses 0.2 us apart, long enough to bridge noise.
ATTACK_S = 60e-9
DECAY_S = 300e-9
#: A new pulse inside an older one's tail lifts the energy by this factor above what the tail held lately.
TAIL_RISE = 8.0
#: Within half a microsecond, where ringing also rises and falls, only a rise to this share of the former peak
#: energy after a dip to a tenth of it counts: lobes of a mode with a quality below 20 fall faster.
TWIN_SHARE = 0.85
TWIN_DIP = 0.1
#: A swing to the other side with this share of the peak energy is a mode that rings.
SWING = 0.25
TWIN_S = 0.5e-6
#: Before a crest of so many noise levels three samples in a row below the other number are noise, no onset.
CLEAR = 10.0
QUIET = 3.0
ALIVE = 9.0
FADED = 2.0


def mean_energy(white: WaveArray, width: int) -> FloatArray:
    """Mean square over the `width` samples up to and with each one, in units of the noise power."""
    total = np.concatenate([np.zeros(width), np.cumsum(np.asarray(white, np.float64) ** 2)])
    return np.asarray(np.maximum(total[width:] - total[:-width], 0.0) / width)


@_njit
def largest_sign(white: WaveArray, last: int, width: int) -> float:  # pragma: no cover - compiled
    """Sign of the largest of the `width` samples up to and with `last`."""
    best = white[last]
    for i in range(max(0, last - width + 1), last):
        if abs(white[i]) > abs(best):
            best = white[i]
    return 1.0 if best >= 0 else -1.0


@_njit
def candidate_starts(
    white: WaveArray, quick: FloatArray, slow: FloatArray, attack: int, twin: int, limits: FloatArray
) -> IntArray:  # pragma: no cover - compiled
    """Places where the quick energy of a whitened stretch starts to rise for a new pulse.

    A twin has the sign of the pulse before it, and nothing of the other sign stands between them: what swings to
    the other side is taken for ringing.
    `limits` = (alive, faded, tail rise, twin share, twin dip, swing).
    """
    alive, faded, rise, share, dip, swing = limits
    found = np.empty(quick.size // max(attack, 1) + 1, np.int64)
    count = 0
    active = False
    peak = 0.0
    lowest = 0.0
    sign = 1.0
    ringing = False
    start = 0
    for i in range(quick.size):
        if not active:
            if quick[i] > alive:
                active, start, peak, lowest = True, i, quick[i], quick[i]
                sign, ringing = largest_sign(white, i, attack), False
                found[count] = i
                count += 1
            continue
        if slow[i] < faded and quick[i] < alive and i > start + attack:
            active = False
            continue
        recent = 0.0
        for j in range(max(0, i - twin), max(0, i - attack)):
            recent = max(recent, quick[j])
        beyond = i - start > twin
        from_tail = beyond and quick[i] > alive and quick[i] > rise * recent
        as_twin = attack < i - start <= 2 * twin and lowest < dip * peak and quick[i] > share * peak
        if quick[i] > swing * peak and largest_sign(white, i, attack) != sign:
            ringing = True
        as_twin = as_twin and not ringing
        if (from_tail or as_twin) and count < found.size:
            found[count] = i
            count += 1
            start, peak, lowest = i, quick[i], quick[i]
            sign, ringing = largest_sign(white, i, attack), False
        elif quick[i] > peak:
            peak, lowest = quick[i], quick[i]
            sign = largest_sign(white, i, attack)
        else:
            lowest = min(lowest, quick[i])
    return found[:count]


def onset_by_information(white: WaveArray) -> int:
    """The first sample of the pulse in a stretch that begins with noise and ends at the pulse's first crest.

    The stretch is split where two Gaussian variances explain it best (smallest Akaike criterion).

    References
    ----------
    N. Maeda, Zisin 38, 365-379, 1985 (from memory): AIC(k) = k ln var(x[:k]) + (n-k-1) ln var(x[k:]).
    """
    count = white.size
    if count < 8:
        return 0
    x = np.asarray(white, np.float64)
    first, second = np.cumsum(x), np.cumsum(x * x)
    k = np.arange(3, count - 1)
    tiny = 1e-12 * max(second[-1], 1e-300)
    before = second[k - 1] / k - (first[k - 1] / k) ** 2
    rest = count - k
    after = (second[-1] - second[k - 1]) / rest - ((first[-1] - first[k - 1]) / rest) ** 2
    score = k * np.log(np.maximum(before, tiny)) + (rest - 1) * np.log(np.maximum(after, tiny))
    return int(k[np.argmin(score)])


def event_starts(white: WaveArray, rate_hz: float, inside: tuple[int, int], *, continued: bool = False) -> list[int]:
    """Onsets of the events of one cluster, as places in a whitened stretch (noise of variance 1).

    Parameters
    ----------
    white : (samples,) the cluster with some microseconds before it and after.
    rate_hz : sampling rate [Hz].
    inside : first and one past the last place that the cluster flagged; onsets lie near it.
    continued : the cluster began before: what is already there at its first place is no new event.
    """
    attack, decay, twin = (max(2, round(span * rate_hz)) for span in (ATTACK_S, DECAY_S, TWIN_S))
    quick, slow = mean_energy(white, attack), mean_energy(white, decay)
    limits = np.array([ALIVE, FADED, TAIL_RISE, TWIN_SHARE, TWIN_DIP, SWING])
    lead = max(0, inside[0] - decay)
    rough = [
        int(place) + lead for place in candidate_starts(white[lead:], quick[lead:], slow[lead:], attack, twin, limits)
    ]
    rough = [place for place in rough if place <= inside[1] + attack]
    if continued:
        rough = [place for place in rough if place > inside[0] + attack]
    elif not rough:
        rough = [_slow_start(slow, inside)]
    starts: list[int] = []
    for place, following in zip(rough, [*rough[1:], white.size], strict=False):
        begin = max(starts[-1] + attack if starts else 0, place - twin)
        start = _refined(white, begin, place, min(place + twin, max(following - attack, place + 2 * attack)), attack)
        if not starts or start > starts[-1]:
            starts.append(start)
    return starts


def _slow_start(slow: FloatArray, inside: tuple[int, int]) -> int:
    """The place of greatest slow energy among the flagged samples, for a pulse that no short box saw."""
    return inside[0] + int(np.argmax(slow[inside[0] : max(inside[1], inside[0] + 1)]))


def _refined(white: WaveArray, begin: int, place: int, stop: int, attack: int) -> int:
    """The onset near a rough place: by information up to the first sample of half the height that follows."""
    first = max(place - attack, begin)
    height = np.abs(white[first:stop])
    crest = first + int(np.argmax(height >= 0.5 * height.max()))
    onset = begin + onset_by_information(white[begin : max(crest, place) + 2])
    return onset if abs(white[crest]) < CLEAR else _after_quiet(white, onset, crest)


def _after_quiet(white: WaveArray, onset: int, crest: int) -> int:
    """The onset moved past the last quiet stretch before a clear crest: what lies before that was the noise."""
    quiet = np.abs(white[onset:crest]) < QUIET
    runs = np.flatnonzero(quiet[2:] & quiet[1:-1] & quiet[:-2])
    return onset + int(runs[-1]) + 3 if len(runs) else onset


def event_end(white: WaveArray, start: int, limit: int, rate_hz: float) -> int:
    """One past the last sample that belongs to an event: where its energy has sunk into the noise.

    Parameters
    ----------
    white : whitened stretch, noise of variance 1.
    start, limit : onset, and the latest possible end (the next onset or the end of the stretch).
    """
    decay = max(2, round(DECAY_S * rate_hz))
    tail = mean_energy(white[start:limit], decay) * decay / np.minimum(np.arange(1, limit - start + 1), decay)
    crest = int(np.argmax(tail[: max(1, 4 * decay)]))
    quiet = np.flatnonzero(tail[crest:] < FADED)
    end = start + crest + int(quiet[0]) - decay // 2 if len(quiet) else limit
    return int(min(max(end, start + max(2, decay // 3)), limit))


def threshold_sigmas(scales: int, samples_per_cycle: float, false_events: float) -> FloatArray:
    """How many noise levels a box sum of each scale must reach for a stated rate of false events a cycle.

    The noise is taken as Gaussian and white. Box sums of w samples, correlated as 1 - |lag|/w, leave z noise
    levels in about z²/w separate excursions a sample times the tail of the normal law, and at most one. The rate
    is shared equally among the scales. Background with heavier tails gives more false events.

    References
    ----------
    J. Pickands, Trans. Am. Math. Soc. 145, 51-73, 1969 (from memory; index 1, constant 1).
    """
    widths = 2.0 ** np.arange(scales)
    sigmas = np.full(scales, 5.0)
    for _ in range(20):
        places = samples_per_cycle * np.minimum(1.0, sigmas**2 / widths)
        chances = np.minimum(false_events / scales / places, 1.0)
        sigmas = -ndtri(chances / 2)
    return np.asarray(sigmas)


def mad_noise(values: NDArray[np.float64]) -> float:
    """Noise level: median absolute deviation / 0.6745 (NaN when there is nothing to measure)."""
    if not values.size:
        return float("nan")
    return float(np.median(np.abs(values - np.median(values))) / 0.6744898)
