"""Which events are later copies of earlier ones: smaller, no faster, shaped like the parent after more cable."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import scipy.fft

from pdclass.pulses import FloatArray, WaveArray

#: Skin-effect paths exp(-K sqrt(s)) tried between parent and copy; K² [s] spans no path to some kilometres.
PATHS_S = np.concatenate([[0.0], np.geomspace(0.5e-9, 400e-9, 10)])
ALIKE_SURE = 0.92
ALIKE_MAYBE = 0.75
SLOWER = 0.01
RECURRENCE_S = 50e-9
RECURRENCES = 3
SMALLER = 0.9
#: With so many events as strong as the parent, the echo of one alone is no echo: theirs would be there too.
LONE_PARENTS = 5
MOST_PARENTS = 6
_SHAPE_S = 3e-6


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
    alike: float
    slower: bool


def find_echoes(
    events: Sequence[Event], rate_hz: float, longest_s: float
) -> tuple[dict[int, int], dict[int, int]]:
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
    delays = np.sort([pair.delay for pair in pairs]) / rate_hz
    echoes: dict[int, int] = {}
    maybes: dict[int, int] = {}
    for pair in sorted(pairs, key=lambda pair: (pair.child, -pair.alike)):
        if pair.child in echoes or pair.parent in echoes:
            continue
        often = _recurrences(delays, pair.delay / rate_hz) >= RECURRENCES
        alone = np.count_nonzero(peaks >= SMALLER * peaks[pair.parent]) < LONE_PARENTS
        if pair.slower and (often or (alone and pair.alike >= ALIKE_SURE)):
            echoes[pair.child] = pair.parent
            maybes.pop(pair.child, None)
        else:
            maybes.setdefault(pair.child, pair.parent)
    return echoes, maybes


def _recurrences(sorted_delays_s: FloatArray, delay_s: float) -> int:
    """How many of the capture's likenesses share this delay."""
    low, high = np.searchsorted(sorted_delays_s, [delay_s - RECURRENCE_S, delay_s + RECURRENCE_S])
    return int(high - low)


def _likenesses(events: Sequence[Event], child: int, rate_hz: float, longest_s: float) -> list[Likeness]:
    found: list[Likeness] = []
    for parent in range(child - 1, max(-1, child - 1 - MOST_PARENTS), -1):
        delay = events[child].onset - events[parent].onset
        if delay > longest_s * rate_hz:
            break
        if events[child].peak < SMALLER * events[parent].peak:
            scores = path_likeness(events[parent].wave, events[child].wave, rate_hz)
            best = float(scores.max())
            if best >= ALIKE_MAYBE:
                found.append(Likeness(parent, child, delay, best, best > scores[0] + SLOWER))
    return found


def path_likeness(parent: WaveArray, child: WaveArray, rate_hz: float) -> FloatArray:
    """Likeness of a wave to an earlier one after each path of `PATHS_S`.

    The likeness is the largest normalised cross-correlation over delays of up to 0.3 us, sign ignored (the far
    end may turn the sign round), divided by what the noise (variance 1) leaves of it.

    References
    ----------
    exp(-K sqrt(s)): R. L. Wigington, N. S. Nahman, Proc. IRE 45, 166-174, 1957 (from memory).
    """
    longest = round(_SHAPE_S * rate_hz)
    copy, original = np.asarray(child[:longest], np.float64), np.asarray(parent[:longest], np.float64)
    energy = float(np.sum(copy**2))
    clean = max(energy - copy.size, 0.05 * energy)
    size = scipy.fft.next_fast_len(2 * longest)
    s = 2j * np.pi * scipy.fft.rfftfreq(size, 1 / rate_hz)
    spectrum, target = scipy.fft.rfft(original, size), scipy.fft.rfft(copy, size)
    shift = round(0.3e-6 * rate_hz)
    scores = np.empty(len(PATHS_S))
    for row, squared in enumerate(PATHS_S):
        travelled = spectrum * np.exp(-np.sqrt(squared * s))
        norm = np.sqrt(np.sum(scipy.fft.irfft(travelled, size)[: copy.size + shift] ** 2) * clean)
        match = np.abs(scipy.fft.irfft(np.conj(travelled) * target, size))
        scores[row] = max(match[: shift + 1].max(), match[-shift:].max()) / max(norm, 1e-30)
    return np.minimum(scores, 1.0)
