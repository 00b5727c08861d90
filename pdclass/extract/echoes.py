"""Which events are later copies of earlier ones: smaller, no faster, shaped like the parent after more cable."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from pdclass.pulses import FloatArray, WaveArray

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
#: So much of each event's beginning tells its shape.
SHAPE_S = 3e-6


@dataclass(frozen=True)
class Event:
    """One event for the echo search: onset and end [samples], its own whitened wave, and its energy."""

    onset: int
    end: int
    wave: WaveArray

    @property
    def peak(self) -> float:
        """Largest whitened magnitude."""
        return float(np.max(np.abs(self.wave)))


@dataclass(frozen=True)
class Likeness:
    """How well an event is a copy of an earlier one."""

    parent: int
    child: int
    delay: int
    ratio: float
    alike: float
    slower: bool


def find_echoes(events: Sequence[Event], rate_hz: float, longest_s: float) -> tuple[dict[int, int], dict[int, int]]:
    """Echoes and undecided cases among the events of one segment.

    An event is an echo when it is later by at most `longest_s`, smaller, and like its parent after more cable,
    with a delay that recurs in the capture; where few events are as strong as the parent, being surely alike
    is enough. What is alike without that may be another pulse of the same source: it is kept, and marked.

    Parameters
    ----------
    events : in order of onset.
    rate_hz : sampling rate [Hz].
    longest_s : longest delay of an echo [s].

    Returns
    -------
    echoes, maybes : child -> parent, as places in `events`; a parent is never an echo itself.
    """
    pairs = [pair for child in range(len(events)) for pair in _likenesses(events, child, rate_hz, longest_s)]
    peaks = np.array([event.peak for event in events])
    proven = _recurring(pairs, rate_hz, longest_s) & ~_of_a_train(events, pairs, rate_hz)
    echoes: dict[int, int] = {}
    maybes: dict[int, int] = {}
    for place in sorted(range(len(pairs)), key=lambda place: (pairs[place].child, -pairs[place].alike)):
        pair = pairs[place]
        if pair.child in echoes or pair.parent in echoes:
            continue
        alone = np.count_nonzero(peaks >= SMALLER * peaks[pair.parent]) < LONE_PARENTS
        if proven[place] or (alone and pair.slower and pair.alike >= ALIKE_SURE):
            echoes[pair.child] = pair.parent
            maybes.pop(pair.child, None)
        else:
            maybes.setdefault(pair.child, pair.parent)
    return echoes, maybes


def _recurring(pairs: Sequence[Likeness], rate_hz: float, longest_s: float) -> NDArray[np.bool_]:
    """Which likenesses share their delay with enough others of the capture, being slower or of one ratio.

    Enough is more than chance would bring: three, and three times what delays spread evenly would give.
    """
    alike = np.array([pair.alike >= ALIKE for pair in pairs], np.bool_)
    delay_s = np.array([pair.delay for pair in pairs])[alike] / rate_hz
    order = np.argsort(delay_s, kind="stable")
    delay_s, ratio = delay_s[order], np.log([pair.ratio for pair in pairs])[alike][order]
    needed = max(RECURRENCES, 3 * len(delay_s) * 2 * RECURRENCE_S / longest_s)
    proven = np.zeros(len(pairs), np.bool_)
    for place in np.flatnonzero(alike).tolist():
        pair = pairs[place]
        low, high = np.searchsorted(
            delay_s, [pair.delay / rate_hz - RECURRENCE_S, pair.delay / rate_hz + RECURRENCE_S], side="left"
        )
        steady = np.count_nonzero(np.abs(ratio[low:high] - np.log(pair.ratio)) <= STEADY)
        proven[place] = (high - low if pair.slower else steady) >= needed
    return proven


def _of_a_train(events: Sequence[Event], pairs: Sequence[Likeness], rate_hz: float) -> NDArray[np.bool_]:
    """Which likenesses have a delay at which larger or equal events follow, too: a train, and no echoes."""
    onsets, peaks = np.array([event.onset for event in events]), np.array([event.peak for event in events])
    reach = RECURRENCE_S * rate_hz
    trains: dict[int, bool] = {}
    for key in {round(pair.delay / reach) for pair in pairs}:
        aim = onsets + key * reach
        near = np.clip(np.searchsorted(onsets, aim), 1, max(len(onsets) - 1, 1))
        near = near - (aim - onsets[near - 1] < onsets[near] - aim)
        follows = (np.abs(onsets[near] - aim) <= TRAIN_REACH * reach) & (near != np.arange(len(onsets)))
        smaller = follows & (peaks[near] < SMALLER * peaks)
        trains[key] = bool(np.sum(smaller) < ECHO_SHARE * np.sum(follows))
    return np.array([trains[round(pair.delay / reach)] for pair in pairs], np.bool_)


def _likenesses(events: Sequence[Event], child: int, rate_hz: float, longest_s: float) -> list[Likeness]:
    found: list[Likeness] = []
    for parent in range(child - 1, max(-1, child - 1 - MOST_PARENTS), -1):
        delay = events[child].onset - events[parent].onset
        if delay > longest_s * rate_hz:
            break
        if events[child].peak < SMALLER * events[parent].peak:
            scores = path_likeness(events[parent].wave, events[child].wave, rate_hz)
            best, ratio = float(scores.max()), events[child].peak / events[parent].peak
            faint = events[child].peak < FAINT and ratio < FAINT_RATIO
            if best >= ALIKE_MAYBE or faint:
                slower = best > scores[:, 0].max() + SLOWER
                found.append(Likeness(parent, child, delay, ratio, best, slower=slower))
    return found


def path_likeness(parent: WaveArray, child: WaveArray, rate_hz: float) -> FloatArray:
    """Likeness of a wave to an earlier one after each path of `PATHS_S` and each far end of `FAR_ENDS_S`.

    The likeness is the largest normalised cross-correlation over delays of up to 0.3 us, sign ignored (the far
    end may turn the sign round), divided by what the noise (variance 1) leaves of it.

    Returns
    -------
    (far ends, paths) between 0 and 1.

    References
    ----------
    exp(-K sqrt(s)): R. L. Wigington, N. S. Nahman, Proc. IRE 45, 166-174, 1957 (from memory). A line that ends in a
    capacitance reflects (1 - s tau)/(1 + s tau), tau = Z0 C (any transmission-line text).
    """
    longest = round(SHAPE_S * rate_hz)
    copy, original = np.asarray(child[:longest], np.float64), np.asarray(parent[:longest], np.float64)
    energy = float(np.sum(copy**2))
    clean = max(energy - copy.size, 0.05 * energy)
    size = scipy.fft.next_fast_len(2 * longest)
    shift = round(0.3e-6 * rate_hz)
    travelled = scipy.fft.rfft(original, size) * _transfers(size, rate_hz)
    target = scipy.fft.rfft(copy, size)
    arrived = scipy.fft.irfft(travelled, size)[..., : copy.size + shift]
    match = np.abs(scipy.fft.irfft(np.conj(travelled) * target, size))
    best = np.maximum(match[..., : shift + 1].max(axis=-1), match[..., -shift:].max(axis=-1))
    norm = np.sqrt(np.sum(arrived**2, axis=-1) * clean)
    return np.asarray(np.minimum(best / np.maximum(norm, 1e-30), 1.0))


@lru_cache(maxsize=8)
def _transfers(size: int, rate_hz: float) -> NDArray[np.complex128]:
    s = 2j * np.pi * scipy.fft.rfftfreq(size, 1 / rate_hz)
    paths = np.exp(-np.sqrt(PATHS_S[:, None] * s))
    ends = (1 - FAR_ENDS_S[:, None] * s) / (1 + FAR_ENDS_S[:, None] * s)
    return np.asarray(ends[:, None] * paths)
