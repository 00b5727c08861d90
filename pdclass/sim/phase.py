"""When in the mains cycle pulses occur: an activity is drawn once for a source, its pulses for every stretch."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Annotated, Literal

import numpy as np

from pdclass.pulses import FloatArray
from pdclass.sim.activity import Corona, Discharges, Gap, Model, discharges
from pdclass.sim.draw import Pair, Ranges, Share, Shares, chosen, even, log_even, within

Pattern = Literal[
    "void",
    "surface",
    "floating",
    "corona",
    "positive-corona",
    "uniform",
    "switching",
]

#: Cycles after which a stretch in which nothing was found counts as quiet.
_QUIET_CYCLES = 24
#: Runs of a stretch that are laid over each other at most.
_MOST_RUNS = 24
#: Where a stretch needs more pulses than these hold, they are repeated with this deviation [deg].
_REPEATED_DEG = 1.5


class GapRanges(Ranges):
    """What the model of a discharging gap is drawn from (orders of magnitude, from memory).

    Attributes
    ----------
    overvoltage : peak of the applied field over the inception field.
    residual : residual field over the inception field, 0 to 0.95.
    lag_deg : mean wait for an electron at twice the inception field [deg of the cycle].
    memory : share of the surface charge left after half a cycle, 0 to 1.
    asymmetry : inception field of one half cycle over that of the other; either may be the higher one.
    """

    overvoltage: Annotated[Pair, within(1.001, 99.0)]
    residual: Annotated[Pair, within(0.0, 0.95)]
    lag_deg: Annotated[Pair, within(1e-3, 1e4, "deg")]
    memory: Shares
    asymmetry: Annotated[Pair, within(1.0, 100.0)]


class CoronaRanges(Ranges):
    """What the model of a corona in air is drawn from (orders of magnitude, from memory).

    Attributes
    ----------
    overvoltage : peak of the voltage over the onset voltage.
    per_cycle : pulses in a cycle at twice the onset voltage.
    jitter : deviation of the steps between pulses over their mean, 0 regular to 1 at random.
    spread : deviation of the logarithm of the charges.
    """

    overvoltage: Annotated[Pair, within(1.001, 99.0)]
    per_cycle: Annotated[Pair, within(0.1, 1e4)]
    jitter: Shares
    spread: Annotated[Pair, within(0.0, 5.0)]


class ActivityRanges(Ranges):
    """What the activity of a source is drawn from.

    Attributes
    ----------
    void, surface, floating : gaps; a surface is unlike in the two half cycles, a floating part is regular.
    corona, positive_corona : point in air, at the negative and at the positive peak.
    stray_share : share of pulses at any phase, from other places of the same defect, 0 to 1.
    """

    void: GapRanges = GapRanges(
        overvoltage=(1.1, 2.5), residual=(0.0, 0.6), lag_deg=(0.3, 30.0), memory=(0.4, 1.0), asymmetry=(1.0, 1.15)
    )
    surface: GapRanges = GapRanges(
        overvoltage=(1.3, 3.0), residual=(0.2, 0.7), lag_deg=(0.3, 10.0), memory=(0.1, 0.7), asymmetry=(1.3, 2.5)
    )
    floating: GapRanges = GapRanges(
        overvoltage=(1.1, 2.0), residual=(0.1, 0.7), lag_deg=(0.01, 0.5), memory=(0.8, 0.95), asymmetry=(1.0, 1.02)
    )
    corona: CoronaRanges = CoronaRanges(
        overvoltage=(1.05, 2.0), per_cycle=(50.0, 500.0), jitter=(0.05, 0.3), spread=(0.03, 0.15)
    )
    positive_corona: CoronaRanges = CoronaRanges(
        overvoltage=(1.02, 1.5), per_cycle=(3.0, 40.0), jitter=(0.6, 1.0), spread=(0.3, 0.8)
    )
    stray_share: Share = 0.01


@dataclass(frozen=True)
class Activity:
    """What is fixed for a source: its model (None: any phase is as good) and its share of stray pulses, 0 to 1."""

    model: Model | None
    stray_share: float = 0.0


def draw_activity(pattern: Pattern, ranges: ActivityRanges | None = None, *, rng: np.random.Generator) -> Activity:
    """The activity of one source.

    Parameters
    ----------
    pattern : kind of source; `uniform` and `switching` do not depend on the phase.
    ranges : what it is drawn from; the wide world's if None.
    """
    wide = ActivityRanges() if ranges is None else ranges
    if pattern in ("uniform", "switching"):
        return Activity(None)
    if pattern == "corona":
        return Activity(_draw_corona(wide.corona, negative=True, rng=rng), wide.stray_share)
    if pattern == "positive-corona":
        return Activity(_draw_corona(wide.positive_corona, negative=False, rng=rng), wide.stray_share)
    gaps = {"void": wide.void, "surface": wide.surface, "floating": wide.floating}
    return Activity(_draw_gap(gaps[pattern], rng=rng), wide.stray_share)


def activity_phases(
    activity: Activity, count: int, start_deg: float, span_deg: float, *, rng: np.random.Generator
) -> Discharges:
    """`count` pulses of a source within a stretch of the mains cycle, in the order in which they come.

    The model runs for as many cycles as the stretch has; of more pulses than are wanted some are left out at random,
    for fewer the stretch is run again and the runs are laid over each other. In a stretch in which the source is quiet
    every pulse is a stray one: it comes at any phase.

    Parameters
    ----------
    activity : of the source.
    count : number of pulses, >= 0.
    start_deg, span_deg : first phase and length of the stretch [deg], span > 0.

    Returns
    -------
    Discharges
        Phases [deg] from `start_deg` to `start_deg` + `span_deg`; signed charges, their median size in the model's run
        being 1. A stray pulse has size 1 and the sign of its half cycle, or either sign without a model.
    """
    wanted = 0 if activity.model is None else count - int(rng.binomial(count, activity.stray_share))
    found = Discharges(np.zeros(0), np.zeros(0))
    if activity.model is not None and wanted > 0:
        found = _enough(activity.model, wanted, start_deg, span_deg, rng=rng)
    stray_deg = start_deg + span_deg * rng.uniform(size=count - found.phase_deg.size)
    either = rng.choice([-1.0, 1.0], stray_deg.size)
    stray = either if activity.model is None else half_cycle_sign(stray_deg)
    phase_deg = np.concatenate([found.phase_deg, stray_deg])
    order = np.argsort(phase_deg, kind="stable")
    return Discharges(phase_deg[order], np.concatenate([found.charge, stray])[order])


def half_cycle_sign(phase_deg: FloatArray) -> FloatArray:
    """+1 in the positive half cycle, -1 in the negative one, same shape."""
    return np.where(np.mod(phase_deg, 360.0) < 180.0, 1.0, -1.0)


def _draw_gap(ranges: GapRanges, *, rng: np.random.Generator) -> Gap:
    asymmetry = log_even(ranges.asymmetry, rng=rng)
    higher = chosen({"negative": 0.5, "positive": 0.5}, rng=rng)
    return Gap(
        overvoltage=log_even(ranges.overvoltage, rng=rng),
        residual=even(ranges.residual, rng=rng),
        lag_deg=log_even(ranges.lag_deg, rng=rng),
        memory=even(ranges.memory, rng=rng),
        asymmetry=asymmetry if higher == "negative" else 1 / asymmetry,
    )


def _draw_corona(ranges: CoronaRanges, *, negative: bool, rng: np.random.Generator) -> Corona:
    return Corona(
        overvoltage=log_even(ranges.overvoltage, rng=rng),
        negative=negative,
        per_cycle=log_even(ranges.per_cycle, rng=rng),
        jitter=even(ranges.jitter, rng=rng),
        spread=even(ranges.spread, rng=rng),
    )


def _enough(model: Model, wanted: int, start_deg: float, span_deg: float, *, rng: np.random.Generator) -> Discharges:
    """`wanted` pulses of a model within a stretch, or none where it is quiet there."""
    cycles = max(1, math.ceil(span_deg / 360.0))
    inside = _runs(model, 1, cycles, start_deg, span_deg, rng=rng)
    known = inside.phase_deg.size
    if known < wanted:
        runs = min(_MOST_RUNS, 2 + 2 * wanted // known) if known else -(-_QUIET_CYCLES // cycles)
        inside = _runs(model, runs, cycles, start_deg, span_deg, rng=rng)
        known = inside.phase_deg.size
    if known == 0:
        return inside
    # more than the runs hold: each again, a little moved
    picked = np.concatenate([rng.permutation(known)[:wanted], rng.integers(0, known, max(0, wanted - known))])
    moved = np.where(np.arange(wanted) < known, 0.0, _REPEATED_DEG * rng.standard_normal(wanted))
    phase_deg = np.clip(inside.phase_deg[picked] + moved, start_deg, start_deg + span_deg)
    return Discharges(phase_deg, inside.charge[picked])


def _runs(
    model: Model, runs: int, cycles: int, start_deg: float, span_deg: float, *, rng: np.random.Generator
) -> Discharges:
    """Pulses of several runs of a model within a stretch, laid over each other; charges of median size 1."""
    # from the second cycle on: the first lacks what comes before its zero crossing
    origin = 360.0 + start_deg % 360.0
    found = discharges(model, runs * cycles + 2, rng=rng)
    run, rest = np.divmod(found.phase_deg - origin, 360.0 * cycles)
    inside = (run >= 0) & (run < runs) & (rest < span_deg)
    typical = float(np.median(np.abs(found.charge))) if found.charge.size else 1.0
    return Discharges(start_deg + rest[inside], found.charge[inside] / typical)
