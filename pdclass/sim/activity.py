"""When a gap discharges under alternating voltage: a stochastic model in phase and in units of the inception field.

The field in a gap is that of the applied voltage plus that of the charge which earlier discharges left on its surface.
Above the inception field a first electron has to be waited for (statistical time lag); a discharge brings the field
down to the residual field. The frame is that of L. Niemeyer, "A generalized approach to partial discharge modeling",
IEEE Trans. Dielectr. Electr. Insul. 2(4), 1995 (from memory), with the simplest law of each part. Without lag, decay
and residual field it is the three-capacitance model of the textbooks. Corona is a rate that grows with the overvoltage.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from pdclass.errors import InputError, complaint
from pdclass.pulses import FloatArray

#: Half cycles that are simulated before the first that counts: the first charges on the surface are not typical.
_SETTLING = 4
_NEWTON_STEPS = 25
_CHUNK = 256
#: Integral of 2 sin x - 1 between its zeros.
_RISEN_AT_TWICE = 2 * math.sqrt(3) - 2 * math.pi / 3


class Discharges(NamedTuple):
    """Discharges in the order in which they come.

    Attributes
    ----------
    phase_deg : unwrapped phase of the applied voltage, 0 = rising zero crossing, (discharges,) [deg].
    charge : relative to the others of the same source, signed as the field, (discharges,).
    """

    phase_deg: FloatArray
    charge: FloatArray


@dataclass(frozen=True)
class Gap:
    """A void, a surface or the spark gap of a floating part; fields relative to the inception field.

    Attributes
    ----------
    overvoltage : peak of the applied field, >= 0; below 1 nothing begins.
    residual : field that a discharge leaves, 0 to 0.95.
    lag_deg : statistical lag: mean wait for an electron at twice the inception field [deg of the cycle], >= 0.
        The rate of electrons grows in proportion to the excess over the inception field.
    memory : share of the surface charge that is left half a cycle later, 0 to 1.
    asymmetry : inception field of the negative half cycles over that of the positive ones, > 0.

    Raises
    ------
    InputError
        If a value is out of its bounds.
    """

    overvoltage: float
    residual: float
    lag_deg: float
    memory: float = 1.0
    asymmetry: float = 1.0

    def __post_init__(self) -> None:
        _check(
            "gap",
            ("overvoltage", 0 <= self.overvoltage < 100, self.overvoltage, "0 to 100"),
            ("residual", 0 <= self.residual <= 0.95, self.residual, "0 to 0.95"),
            ("lag_deg", self.lag_deg >= 0, self.lag_deg, "a wait from zero"),
            ("memory", 0 <= self.memory <= 1, self.memory, "a share from 0 to 1"),
            ("asymmetry", self.asymmetry > 0, self.asymmetry, "a ratio above zero"),
        )


@dataclass(frozen=True)
class Corona:
    """Discharge of a point in air around one peak of the voltage.

    Attributes
    ----------
    overvoltage : peak of the applied voltage over the onset voltage, >= 0; below 1 nothing begins.
    negative : whether the point is negative (many equal pulses) or positive (few, large and unequal).
    per_cycle : mean number in a cycle at twice the onset voltage, > 0.
    jitter : deviation of the steps between pulses, relative to their mean: 0 = regular, 1 = at random.
    spread : deviation of the logarithm of the charges, >= 0.

    Raises
    ------
    InputError
        If a value is out of its bounds.
    """

    overvoltage: float
    negative: bool
    per_cycle: float
    jitter: float
    spread: float

    def __post_init__(self) -> None:
        _check(
            "corona",
            ("overvoltage", 0 <= self.overvoltage < 100, self.overvoltage, "0 to 100"),
            ("per_cycle", 0 < self.per_cycle < 1e6, self.per_cycle, "a number above zero"),
            ("jitter", 0 <= self.jitter <= 1, self.jitter, "0 to 1"),
            ("spread", self.spread >= 0, self.spread, "a number from zero"),
        )


#: What makes pulses at phases of its own.
Model = Gap | Corona


def discharges(model: Model, cycles: int, *, rng: np.random.Generator) -> Discharges:
    """Pulses of any model over many cycles, the first of which begins at 0 deg.

    Parameters
    ----------
    model : what makes them.
    cycles : number of cycles, >= 1.
    """
    if isinstance(model, Gap):
        return gap_discharges(model, cycles, rng=rng)
    return corona_discharges(model, cycles, rng=rng)


def gap_discharges(gap: Gap, cycles: int, *, rng: np.random.Generator) -> Discharges:
    """Discharges of a gap over many cycles after it has settled.

    Parameters
    ----------
    gap : the gap.
    cycles : number of cycles, >= 1; the first begins at 0 deg.

    Returns
    -------
    Discharges
        Phases from -90 deg (a discharge of the first half cycle may come before its zero crossing).
    """
    waits = _waits(rng)
    phases: list[float] = []
    charges: list[float] = []
    charge = 0.0
    for half in range(-_SETTLING, 2 * cycles):
        negative = half % 2 == 1
        sign, inception = (-1.0, gap.asymmetry) if negative else (1.0, 1.0)
        places, sizes, left = _half_cycle(gap, sign * charge, inception, waits)
        charge = sign * left * gap.memory
        if half >= 0:
            phases += [180.0 * half + math.degrees(place) for place in places]
            charges += [sign * size for size in sizes]
    return Discharges(np.array(phases), np.array(charges))


def corona_discharges(corona: Corona, cycles: int, *, rng: np.random.Generator) -> Discharges:
    """Pulses of a corona over many cycles: equal steps of the rate's integral, more or less jittered.

    Parameters
    ----------
    corona : the point.
    cycles : number of cycles, >= 1; the first begins at 0 deg.
    """
    if corona.overvoltage <= 1:
        return Discharges(np.zeros(0), np.zeros(0))
    onset = math.asin(1 / corona.overvoltage)
    places = np.linspace(onset, math.pi - onset, 512)
    # integral of the excess over the onset voltage
    risen = corona.overvoltage * (math.cos(onset) - np.cos(places)) - (places - onset)
    total = corona.per_cycle * cycles * risen[-1] / _RISEN_AT_TWICE
    steps = _steps(total, corona.jitter, rng=rng)
    counted = np.cumsum(steps) + rng.uniform() - 1
    counted = counted[(counted >= 0) & (counted < total)] * (cycles / total)
    cycle = np.floor(counted)
    inside = np.interp((counted - cycle) * risen[-1], risen, places)
    phase_deg = 360.0 * cycle + np.rad2deg(inside) + (180.0 if corona.negative else 0.0)
    sizes = np.exp(corona.spread * rng.standard_normal(phase_deg.size))
    return Discharges(phase_deg, -sizes if corona.negative else sizes)


def _half_cycle(
    gap: Gap, charge: float, inception: float, waits: Iterator[float]
) -> tuple[list[float], list[float], float]:
    """Phases [rad], sizes and the charge's field at the end, of discharges in the direction of one half cycle.

    With the field of the charge constant between discharges, the field a sin x + q is above the inception field c from
    x1 = asin((c - q)/a) to pi - x1, and the expected number of electrons since x1 has a closed form.
    """
    peak, left = gap.overvoltage, gap.residual * inception
    lag = math.radians(gap.lag_deg) * inception
    places: list[float] = []
    sizes: list[float] = []
    now = -math.pi / 2
    while peak > 0:
        height = (inception - charge) / peak
        if height >= 1:
            break
        begin = math.asin(max(height, -1.0))
        now = max(now, begin)
        end = math.pi - begin
        if now >= end:
            break
        now = _first_electron(peak, inception - charge, now, end, lag * next(waits))
        if now >= end:
            break
        size = peak * math.sin(now) + charge - left
        places.append(now)
        sizes.append(size)
        charge -= size
    return places, sizes, charge


def _first_electron(peak: float, lacking: float, begin: float, end: float, wanted: float) -> float:
    """Phase at which the integral of peak sin x - lacking from `begin` reaches `wanted`, or `end` [rad]."""
    if wanted <= 0:
        return begin
    base = peak * math.cos(begin) + lacking * begin
    if base - peak * math.cos(end) - lacking * end <= wanted:
        return end
    low, high = begin, end
    slope, excess = peak * math.cos(begin), max(peak * math.sin(begin) - lacking, 0.0)
    # the excess grows by its slope at first: a quadratic in the wait
    place = begin + 2 * wanted / (excess + math.sqrt(max(excess**2 + 2 * slope * wanted, 1e-12)))
    for _ in range(_NEWTON_STEPS):
        if not low < place < high:
            place = (low + high) / 2
        over = base - peak * math.cos(place) - lacking * place - wanted
        if over > 0:
            high = place
        else:
            low = place
        step = over / max(peak * math.sin(place) - lacking, 1e-12)
        place -= step
        if abs(step) < 1e-9:
            break
    return place


def _waits(rng: np.random.Generator) -> Iterator[float]:
    """Exponentially distributed numbers of mean one, without end."""
    while True:
        yield from rng.standard_exponential(_CHUNK).tolist()


def _steps(total: float, jitter: float, *, rng: np.random.Generator) -> FloatArray:
    """Enough steps of mean one and the given deviation to pass `total`."""
    count = int(total + 6 * math.sqrt(total) + 12)
    if jitter == 0:
        return np.ones(count)
    shape = 1 / jitter**2
    return np.asarray(rng.gamma(shape, 1 / shape, count))


def _check(where: str, *checks: tuple[str, bool, object, str]) -> None:
    for field, good, found, expected in checks:
        if not good:
            raise InputError(complaint(where, field, expected=expected, found=found, advice="correct the activity"))
