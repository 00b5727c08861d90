"""When in the mains cycle pulses occur: simple densities for each kind of source.

The shapes are the trade's rules of thumb (common practice, no source): a void discharges in the rising quarters
of both half cycles, a surface more in one of them, a floating part at nearly the same phases every cycle.
"""

from __future__ import annotations

from typing import Literal

import numpy as np

from pdclass.pulses import FloatArray

Pattern = Literal["void", "surface", "floating", "uniform", "switching"]

_STEPS = 4096


def phase_density(pattern: Pattern, phase_deg: FloatArray) -> FloatArray:
    """Relative rate of pulses at phases of the reference voltage, same shape, > 0 (a floor keeps stray pulses).

    Parameters
    ----------
    pattern : kind of source; `uniform` and `switching` do not depend on the phase.
    phase_deg : 0 = rising zero crossing [deg], any range.
    """
    bunches = {
        "void": ((45.0, 28.0, 1.0), (225.0, 28.0, 1.0)),
        "surface": ((60.0, 35.0, 0.35), (250.0, 25.0, 1.0)),
        "floating": ((80.0, 7.0, 1.0), (260.0, 7.0, 1.0)),
    }.get(pattern)
    if bunches is None:
        return np.ones_like(phase_deg)
    density = np.full_like(phase_deg, 0.005)
    for centre, deviation, weight in bunches:
        apart = np.mod(phase_deg - centre + 180.0, 360.0) - 180.0
        density += weight * np.exp(-((apart / deviation) ** 2) / 2)
    return density


def draw_phases(
    pattern: Pattern, count: int, start_deg: float, span_deg: float, *, rng: np.random.Generator
) -> FloatArray:
    """Unwrapped phases of `count` pulses within a stretch, (count,) [deg], unsorted.

    Parameters
    ----------
    pattern : kind of source.
    count : number of pulses, >= 0.
    start_deg, span_deg : first phase and length of the stretch [deg].
    """
    grid = start_deg + span_deg * (np.arange(_STEPS) + 0.5) / _STEPS
    mass = np.cumsum(phase_density(pattern, grid))
    edges = np.concatenate([[0.0], mass / mass[-1]])
    places = np.interp(rng.uniform(size=count), edges, np.arange(_STEPS + 1) / _STEPS)
    return np.asarray(start_deg + span_deg * places)


def half_cycle_sign(phase_deg: FloatArray) -> FloatArray:
    """+1 in the positive half cycle, -1 in the negative one, same shape."""
    return np.where(np.mod(phase_deg, 360.0) < 180.0, 1.0, -1.0)
