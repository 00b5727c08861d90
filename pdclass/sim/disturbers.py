"""What sends impulsive interference: its family, the path by which it comes, its current, and when it sends.

The families are those of reviews of interference in discharge measurements (stochastic pulses of lightning,
switching and corona, pulses locked to mains or converter, radio: Energies 14(23), 7967, 2021), with repetition as in
the trade: two edges a switching period, six or twelve commutations a mains cycle (common practice, no source).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from pdclass.errors import InputError, complaint
from pdclass.pulses import FloatArray
from pdclass.sim.phase import Pattern
from pdclass.sim.source import SourceCurrent

Family = Literal[
    "converter",
    "thyristor",
    "switch-mode",
    "arc",
    "radio-packet",
    "line-corona",
    "sferic",
    "switching-operation",
]
#: Ways of a disturbance to the strap: voltage in its loop, current into the screen, over another feeder, from afar.
Path = Literal["radiated", "screen", "feeder", "far-end"]


@dataclass(frozen=True)
class Repetition:
    """When a disturber sends.

    Attributes
    ----------
    kind : `random`, evenly; `switching`, two edges a period of `hz`; `mains-locked`, `commutations` a mains cycle;
        `bursts`, groups of `burst_pulses`; `pattern`, that of a discharge in air, whose times an activity gives.
    hz : switching frequency, in bursts that of the pulses within one; 0 there for pulses at random [Hz].
    jitter : standard deviation of an edge as a share of the period of `hz`, >= 0.
    commutations : a mains cycle.
    firing_deg, overlap_deg : phase of the first commutation, and how long one lasts; both its ends send [deg].
    jitter_deg : standard deviation of the firing [deg], >= 0.
    burst_pulses : pulses in a burst, >= 1.
    burst_s : its duration where the pulses in it are at random [s].
    pattern : phase pattern of the kind `pattern`, else None.
    """

    kind: Literal["random", "switching", "mains-locked", "bursts", "pattern"]
    hz: float = 0.0
    jitter: float = 0.0
    commutations: int = 0
    firing_deg: float = 0.0
    overlap_deg: float = 0.0
    jitter_deg: float = 0.0
    burst_pulses: int = 1
    burst_s: float = 0.0
    pattern: Pattern | None = None


@dataclass(frozen=True)
class Disturber:
    """One source of interference: its family, its path to the strap, its current, and when it sends."""

    family: Family
    path: Path
    current: SourceCurrent
    repetition: Repetition


def disturber_times(
    repetition: Repetition,
    duration_s: float,
    count: int,
    *,
    start_deg: float,
    deg_per_s: float,
    rng: np.random.Generator,
) -> FloatArray:
    """Instants of a stretch at which a disturber sends, sorted, 0 to below `duration_s` [s].

    Parameters
    ----------
    repetition : of the disturber.
    duration_s : length of the stretch [s].
    count : how many are wanted, >= 0. Random ones have as many, bursts but for those beyond the stretch;
        a switching or commutating device has no more than its edges in the stretch, and of more only `count` in a row.
    start_deg : phase of the reference voltage at the begin of the stretch [deg].
    deg_per_s : 360 times the mains frequency [deg/s].

    Raises
    ------
    InputError
        If the repetition is a phase pattern.
    """
    if repetition.kind == "switching":
        edges = switching_times(duration_s, repetition.hz, repetition.jitter, rng=rng)
        return _in_a_row(edges, count, rng=rng)
    if repetition.kind == "mains-locked":
        edges = commutation_times(repetition, duration_s, start_deg, deg_per_s, rng=rng)
        return _in_a_row(edges, count, rng=rng)
    if repetition.kind == "bursts":
        return burst_times(repetition, duration_s, count, rng=rng)
    if repetition.kind == "random":
        return np.sort(rng.uniform(0.0, duration_s, count))
    advice = "draw an activity of its pattern"
    raise InputError(complaint("disturber", "kind", expected="a repetition", found=repetition.kind, advice=advice))


def disturber_signs(repetition: Repetition, times_s: FloatArray, *, rng: np.random.Generator) -> FloatArray:
    """Polarities that go with `disturber_times` [s], +1 or -1, same shape.

    What switches on switches off next, and a commutation ends against its begin; the contacts of one burst have one
    sign; what comes at random has either.
    """
    if repetition.kind in {"switching", "mains-locked"} or repetition.hz > 0:
        return np.resize([1.0, -1.0], times_s.size)
    apart = np.diff(times_s, prepend=times_s[:1]) > repetition.burst_s
    burst = np.cumsum(apart) if repetition.kind == "bursts" else np.arange(times_s.size)
    return np.asarray(rng.choice([-1.0, 1.0], times_s.size)[burst])


def switching_times(duration_s: float, switching_hz: float, jitter: float, *, rng: np.random.Generator) -> FloatArray:
    """Instants at which a converter switches: two edges a period, with slowly varying duty and jitter [s], sorted.

    Parameters
    ----------
    duration_s : length of the stretch [s].
    switching_hz : switching frequency [Hz].
    jitter : standard deviation of each edge as a share of the period.
    """
    period = 1 / switching_hz
    starts = np.arange(-1, np.ceil(duration_s / period) + 1) * period + rng.uniform(0, period)
    duty = 0.5 + 0.35 * np.sin(2 * np.pi * (starts * rng.uniform(20.0, 60.0) + rng.uniform()))
    edges = np.concatenate([starts, starts + duty * period])
    edges = np.sort(edges + jitter * period * rng.standard_normal(edges.size))
    return np.asarray(edges[(edges >= 0) & (edges < duration_s)])


def commutation_times(
    repetition: Repetition, duration_s: float, start_deg: float, deg_per_s: float, *, rng: np.random.Generator
) -> FloatArray:
    """Both ends of every commutation of a bridge, at fixed phases of the mains but for the jitter [s], sorted."""
    step = 360.0 / repetition.commutations
    margin = repetition.overlap_deg + 6 * repetition.jitter_deg + step
    first = np.floor((start_deg - repetition.firing_deg - margin) / step)
    last = np.ceil((start_deg + duration_s * deg_per_s - repetition.firing_deg + margin) / step)
    fired = repetition.firing_deg + step * np.arange(first, last + 1)
    fired = fired + repetition.jitter_deg * rng.standard_normal(fired.size)
    ends = np.concatenate([fired, fired + repetition.overlap_deg]) if repetition.overlap_deg > 0 else fired
    times = np.sort((ends - start_deg) / deg_per_s)
    return np.asarray(times[(times >= 0) & (times < duration_s)])


def burst_times(repetition: Repetition, duration_s: float, count: int, *, rng: np.random.Generator) -> FloatArray:
    """Instants of pulses in bursts that begin at random, each as full as the others but for the last [s], sorted."""
    lasts_s = repetition.burst_pulses / repetition.hz if repetition.hz > 0 else repetition.burst_s
    lasts_s = min(lasts_s, duration_s)
    bursts = -(-count // repetition.burst_pulses)
    begins = np.repeat(rng.uniform(0.0, duration_s - lasts_s, bursts), repetition.burst_pulses)[:count]
    if repetition.hz > 0:
        number = np.tile(np.arange(repetition.burst_pulses), bursts)[:count]
        into = (number + repetition.jitter * rng.standard_normal(count)) / repetition.hz
    else:
        into = rng.uniform(0.0, lasts_s, count)
    times = np.sort(begins + into)
    # what of a burst longer than the stretch lies beyond it is not heard
    return np.asarray(times[(times >= 0) & (times < duration_s)])


def _in_a_row(edges: FloatArray, count: int, *, rng: np.random.Generator) -> FloatArray:
    """At most `count` neighbours: the intervals between them stay those of the device."""
    spare = max(0, edges.size - count)
    first = int(rng.integers(0, spare + 1))
    return edges[first : first + count]


def _within(times: FloatArray, duration_s: float) -> FloatArray:
    return np.sort(np.clip(times, 0.0, np.nextafter(duration_s, 0.0)))
