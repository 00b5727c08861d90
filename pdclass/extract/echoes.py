"""Which events are later copies of earlier ones: smaller, no faster, shaped like the parent after more cable."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.pulses import FloatArray, IntArray, WaveArray

#: Skin-effect paths exp(-K sqrt(s)) tried between parent and copy; K² [s] spans no path to some kilometres.
PATHS_S = np.concatenate([[0.0], np.geomspace(0.5e-9, 400e-9, 10)])
#: Time constants Z0 C of capacitive far ends tried: open, a termination, a transformer, several.
FAR_ENDS_S = np.array([0.0, 15e-9, 50e-9, 150e-9])
#: Shape alone tells little: of echoes in simulated circuits 95 % reach 0.55, but so do most pulses that merely
#: follow another one. It takes recurrence, or great likeness where no recurrence is to be had, to call an echo.
ALIKE_SURE = 0.92
ALIKE = 0.75
ALIKE_MAYBE = 0.55
#: Below so many noise levels a shape cannot be compared: after a pulse three times as large an echo stays possible.
FAINT = 8.0
FAINT_RATIO = 1 / 3
SLOWER = 0.01
RECURRENCE_S = 50e-9
RECURRENCES = 3
#: Ratios of copy to parent within 25 % of each other count as one.
STEADY = 0.25
SMALLER = 0.9
#: With so many events as strong as the parent, the echo of one alone is no echo: theirs would be there too.
LONE_PARENTS = 5
MOST_PARENTS = 8
#: Of what follows at an echo's delay at least this share is smaller than what it follows; in a train it is not.
ECHO_SHARE = 0.8
TRAIN_REACH = 1.5
#: At a delay at which so many events follow one another, less than this share of them smaller, nothing is an echo.
TRAIN_LEAST = 10
TRAIN_SHARE = 0.65
#: So much of each event's beginning tells its shape.
SHAPE_S = 3e-6
#: What is not even so alike after a few of the paths is not looked at after all of them.
HARDLY_ALIKE = 0.35
_FEW = (np.repeat([0, 2], 4), np.tile([0, 3, 6, 9], 2))
#: Small enough that the spectra of a batch stay in the cache.
_BATCH = 8
_SHIFT_S = 0.3e-6


@dataclass(frozen=True)
class Pairs:
    """Pairs of events in which the later may be a copy of the earlier, by child, the nearest parent first.

    Attributes
    ----------
    parent, child : (pairs,) places among the events.
    delay : (pairs,) from onset to onset [samples].
    ratio : (pairs,) height of the child over that of the parent.
    alike : (pairs,) likeness after the best path, 0 to 1.
    slower : (pairs,) whether a path makes them more alike than none.
    """

    parent: IntArray
    child: IntArray
    delay: IntArray
    ratio: FloatArray
    alike: FloatArray
    slower: NDArray[np.bool_]


def find_echoes(
    onsets: IntArray, waves: WaveArray, lengths: IntArray, rate_hz: float, longest_s: float
) -> tuple[dict[int, int], dict[int, int]]:
    """Echoes and undecided cases among the events of one segment.

    An event is an echo when it is later by at most `longest_s`, smaller, and like its parent after more cable,
    with a delay that recurs in the capture; where few events are as strong as the parent, being surely alike
    is enough. What is alike without that may be another pulse of the same source: it is kept, and marked, unless
    it follows at the interval of a train.

    Parameters
    ----------
    onsets : (events,) in order [samples].
    waves : (events, samples) the whitened beginning of each event (noise of variance 1), zero after its end.
    lengths : (events,) from onset to end [samples].
    rate_hz : sampling rate [Hz].
    longest_s : longest delay of an echo [s].

    Returns
    -------
    echoes, maybes : child -> parent, as places in `onsets`; a parent is never an echo itself.
    """
    peaks = np.abs(waves).max(axis=1, initial=0.0).astype(np.float64)
    pairs = _likenesses(onsets, waves, np.minimum(lengths, waves.shape[1]), peaks, (rate_hz, longest_s))
    echoes: dict[int, int] = {}
    maybes: dict[int, int] = {}
    if not len(pairs.child):
        return echoes, maybes
    strong = np.searchsorted(np.sort(peaks), SMALLER * peaks[pairs.parent], side="left")
    alone = len(peaks) - strong < LONE_PARENTS
    proven = _recurring(pairs, rate_hz, longest_s)
    follows, smaller = _following(onsets, peaks, pairs.delay[proven], rate_hz)
    proven[proven] = smaller >= ECHO_SHARE * follows
    sure = proven | (alone & pairs.slower & (pairs.alike >= ALIKE_SURE))
    for place in np.lexsort((-pairs.alike, pairs.child)).tolist():
        child, parent = int(pairs.child[place]), int(pairs.parent[place])
        if child in echoes or parent in echoes:
            continue
        if sure[place]:
            echoes[child] = parent
            maybes.pop(child, None)
        else:
            maybes.setdefault(child, parent)
    return echoes, maybes


def _recurring(pairs: Pairs, rate_hz: float, longest_s: float) -> NDArray[np.bool_]:
    """Which likenesses share their delay with enough others of the capture, being slower or of one ratio.

    Enough is more than chance would bring: three, and three times what delays spread evenly would give.
    """
    alike = pairs.alike >= ALIKE
    delay_s, log_ratio = pairs.delay[alike] / rate_hz, np.log(pairs.ratio[alike])
    order = np.argsort(delay_s, kind="stable")
    sorted_s, sorted_ratio = delay_s[order], log_ratio[order]
    needed = max(RECURRENCES, 3 * len(delay_s) * 2 * RECURRENCE_S / longest_s)
    low = np.searchsorted(sorted_s, delay_s - RECURRENCE_S, side="left")
    high = np.searchsorted(sorted_s, delay_s + RECURRENCE_S, side="left")
    steady = np.array(
        [
            np.count_nonzero(np.abs(sorted_ratio[a:b] - own) <= STEADY)
            for a, b, own in zip(low, high, log_ratio, strict=True)
        ]
    )
    proven = np.zeros(len(alike), np.bool_)
    proven[alike] = np.where(pairs.slower[alike], high - low, steady) >= needed
    return proven


def _following(onsets: IntArray, peaks: FloatArray, delay: IntArray, rate_hz: float) -> tuple[FloatArray, FloatArray]:
    """For each delay, how many events are followed at it by another one, and by a smaller one."""
    reach = RECURRENCE_S * rate_hz
    keys, which = np.unique(np.rint(delay / reach), return_inverse=True)
    follows, smaller = _count_following(onsets, peaks, keys * reach, TRAIN_REACH * reach)
    return follows[which.reshape(-1)], smaller[which.reshape(-1)]


@compiled
def _count_following(
    onsets: IntArray, peaks: FloatArray, aims: FloatArray, reach: float
) -> tuple[FloatArray, FloatArray]:  # pragma: no cover - compiled
    follows, smaller = np.zeros(aims.size), np.zeros(aims.size)
    for key in range(aims.size):
        near = 0
        for first in range(onsets.size):
            aim = onsets[first] + aims[key]
            near = max(near, first + 1)
            while near + 1 < onsets.size and abs(onsets[near + 1] - aim) <= abs(onsets[near] - aim):
                near += 1
            if near < onsets.size and abs(onsets[near] - aim) <= reach:
                follows[key] += 1
                smaller[key] += peaks[near] < SMALLER * peaks[first]
    return follows, smaller


def _in_train(onsets: IntArray, peaks: FloatArray, delay: IntArray, rate_hz: float) -> NDArray[np.bool_]:
    """Which delays are those of a train beyond doubt: many events follow at them, about as often larger as smaller."""
    if not len(delay):
        return np.zeros(0, np.bool_)
    follows, smaller = _following(onsets, peaks, delay, rate_hz)
    span = max(float(onsets[-1] - onsets[0]), 1.0)
    chance = len(onsets) ** 2 / span * 2 * TRAIN_REACH * RECURRENCE_S * rate_hz
    return (follows >= max(TRAIN_LEAST, 3 * chance)) & (smaller < TRAIN_SHARE * follows)


def _likenesses(
    onsets: IntArray, waves: WaveArray, lengths: IntArray, peaks: FloatArray, spans: tuple[float, float]
) -> Pairs:
    """Pairs that are alike, or too faint to be compared; `spans` = (sampling rate [Hz], longest delay [s])."""
    rate_hz, longest_s = spans
    every = np.arange(len(onsets))
    children, parents = (
        part.ravel() for part in np.broadcast_arrays(every[:, None], every[:, None] - 1 - np.arange(MOST_PARENTS))
    )
    children, parents = children[parents >= 0], parents[parents >= 0]
    fits = (onsets[children] - onsets[parents] <= longest_s * rate_hz) & (peaks[children] < SMALLER * peaks[parents])
    children, parents = children[fits], parents[fits]
    alone = ~_in_train(onsets, peaks, onsets[children] - onsets[parents], rate_hz)
    children, parents = children[alone], parents[alone]
    scores = pair_likeness(waves, lengths, parents, children, rate_hz)
    best = scores.max(axis=(1, 2))
    ratio = peaks[children] / peaks[parents]
    faint = (peaks[children] < FAINT) & (ratio < FAINT_RATIO)
    kept = (best >= ALIKE_MAYBE) | faint
    slower = best > scores[:, :, 0].max(axis=1) + SLOWER
    delay = onsets[children] - onsets[parents]
    return Pairs(*(column[kept] for column in (parents, children, delay, ratio, best, slower)))


def path_likeness(parent: WaveArray, child: WaveArray, rate_hz: float) -> FloatArray:
    """Likeness of one wave to an earlier one, as in `pair_likeness` but after every path: (far ends, paths)."""
    longest = round(SHAPE_S * rate_hz)
    waves = np.zeros((2, longest), np.float32)
    lengths = np.minimum([parent.size, child.size], longest)
    waves[0, : lengths[0]], waves[1, : lengths[1]] = parent[:longest], child[:longest]
    spectra = _spectra(waves, rate_hz)
    ends, paths = (part.reshape(1, -1) for part in np.indices((len(FAR_ENDS_S), len(PATHS_S))))
    alike = _after_paths(spectra[:1], spectra[1:], (waves[1:], lengths[1:]), rate_hz, (ends, paths))
    return alike.reshape(len(FAR_ENDS_S), len(PATHS_S))


def pair_likeness(
    waves: WaveArray, lengths: IntArray, parents: IntArray, children: IntArray, rate_hz: float
) -> FloatArray:
    """Likeness of waves to earlier ones after each path of `PATHS_S` and each far end of `FAR_ENDS_S`.

    The likeness is the largest normalised cross-correlation over delays of up to 0.3 us, sign ignored (the far
    end may turn the sign round), divided by what the noise (variance 1) leaves of it.

    Returns
    -------
    (pairs, far ends, paths) between 0 and 1; 0 where not looked at: a few paths are tried first, then, where these
    show some likeness, those beside the best one.

    References
    ----------
    exp(-K sqrt(s)): R. L. Wigington, N. S. Nahman, Proc. IRE 45, 166-174, 1957 (from memory). A line that ends in a
    capacitance reflects (1 - s tau)/(1 + s tau), tau = Z0 C (any transmission-line text).
    """
    scores = np.zeros((len(parents), len(FAR_ENDS_S), len(PATHS_S)))
    events, places = np.unique(np.concatenate([parents, children]), return_inverse=True)
    spectra = _spectra(waves[events], rate_hz)
    first, second = places[: len(parents)], places[len(parents) :]

    def measured(rows: IntArray, ends: IntArray, paths: IntArray) -> None:
        for start in range(0, len(rows), _BATCH):
            cut = slice(start, start + _BATCH)
            batch, which = rows[cut], (ends[cut], paths[cut])
            copies = (waves[children[batch]], lengths[children[batch]])
            alike = _after_paths(spectra[first[batch]], spectra[second[batch]], copies, rate_hz, which)
            scores[batch[:, None], which[0], which[1]] = alike

    every = np.arange(len(parents))
    measured(every, *(np.broadcast_to(part, (len(every), part.size)) for part in _FEW))
    near = scores.max(axis=(1, 2), initial=0.0) >= HARDLY_ALIKE
    measured(every[near], *_around(scores[near]))
    return scores


def _around(scores: FloatArray) -> tuple[IntArray, IntArray]:
    """(pairs, tried) far ends and paths beside the best ones so far: three paths and none, after every far end."""
    best = np.clip(scores.max(axis=1).argmax(axis=1), 1, len(PATHS_S) - 2)
    paths = np.column_stack([np.zeros_like(best), best - 1, best, best + 1])
    ends = np.tile(np.repeat(np.arange(len(FAR_ENDS_S)), paths.shape[1]), (len(best), 1))
    return ends, np.tile(paths, (1, len(FAR_ENDS_S)))


def _size(rate_hz: float) -> int:
    return int(scipy.fft.next_fast_len(2 * round(SHAPE_S * rate_hz), real=True))


def _spectra(waves: WaveArray, rate_hz: float) -> NDArray[np.complex64]:
    return np.asarray(scipy.fft.rfft(waves, _size(rate_hz), axis=1), np.complex64)


def _after_paths(
    originals: NDArray[np.complex64],
    targets: NDArray[np.complex64],
    copies: tuple[WaveArray, IntArray],
    rate_hz: float,
    which: tuple[IntArray, IntArray],
) -> FloatArray:
    """(pairs, tried) likeness after far ends and paths `which`; `copies` = (waves, lengths) of the children."""
    size, shift = _size(rate_hz), round(_SHIFT_S * rate_hz)
    travelled = originals[:, None] * _transfers(size, rate_hz)[which]
    arrived = scipy.fft.irfft(travelled, size)
    match = scipy.fft.irfft(np.conj(travelled) * targets[:, None], size)
    flat = (-1, size)
    best = _best_match(arrived.reshape(flat), match.reshape(flat), *copies, shift)
    return np.asarray(best.reshape(travelled.shape[:2]), np.float64)


@compiled
def _best_match(
    arrived: WaveArray, match: WaveArray, copies: WaveArray, sizes: IntArray, shift: int
) -> FloatArray:  # pragma: no cover - compiled
    """Largest correlation within the shift, either sign, over the energies that could have met and that are clean."""
    scores = np.empty(len(arrived))
    paths = len(arrived) // len(copies)
    for row in range(len(arrived)):
        pair = row // paths
        energy = 0.0
        for i in range(sizes[pair]):
            energy += float(copies[pair, i]) ** 2
        clean = max(energy - sizes[pair], 0.05 * energy)
        best, met = 0.0, 0.0
        for i in range(shift + 1):
            best = max(best, abs(match[row, i]))
        for i in range(match.shape[1] - shift, match.shape[1]):
            best = max(best, abs(match[row, i]))
        for i in range(min(sizes[pair] + shift, arrived.shape[1])):
            met += float(arrived[row, i]) ** 2
        scores[row] = min(best / max(math.sqrt(met * clean), 1e-30), 1.0)
    return scores


@lru_cache(maxsize=8)
def _transfers(size: int, rate_hz: float) -> NDArray[np.complex64]:
    """(far ends, paths, bins) transfer functions."""
    s = 2j * np.pi * scipy.fft.rfftfreq(size, 1 / rate_hz)
    paths = np.exp(-np.sqrt(PATHS_S[:, None] * s))
    ends = (1 - FAR_ENDS_S[:, None] * s) / (1 + FAR_ENDS_S[:, None] * s)
    return np.asarray(ends[:, None] * paths, np.complex64)
