"""Drawing the currents of discharges: one law whatever their place, and the currents of corona in air.

Widths and charges are orders of magnitude from memory, held against what is published: a streamer-like discharge in a
fresh void rises in less than 1-2 ns and is 1-5 ns wide, a Townsend-like one over aged surfaces lasts tens to hundreds
of ns (P. H. F. Morshuis, thesis, TU Delft, 1993; S. A. Boggs, G. C. Stone, IEEE Trans. Electr. Insul. 17, 143, 1982);
a surface discharge rises in 5-50 ns; a Trichel pulse rises in 1-2 ns and is 10-30 ns wide at the point.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import Annotated, Literal, cast, get_args

import numpy as np
from pydantic import Field

from pdclass.sim.draw import Pair, Ranges, Share, Weights, Whole, chosen, even, known_names, log_even, whole, within
from pdclass.sim.phase import Pattern
from pdclass.sim.source import Shape, SourceCurrent, half_width_s, train

Kind = Literal["void", "aged-void", "interface", "surface", "floating"]
Polarity = Literal["negative", "positive"]

#: When in the cycle each kind of discharge comes.
KIND_PATTERNS: Mapping[Kind, Pattern] = MappingProxyType(
    {"void": "void", "aged-void": "void", "interface": "void", "surface": "surface", "floating": "floating"}
)
#: The same for the point of a corona.
CORONA_PATTERNS: Mapping[Polarity, Pattern] = MappingProxyType({"negative": "corona", "positive": "positive-corona"})

ShapeWeights = Annotated[Weights, known_names("gaussian", "asymmetric", "exponential", "heidler")]
KindWeights = Annotated[Weights, known_names(*get_args(Kind))]
PolarityWeights = Annotated[Weights, known_names(*get_args(Polarity))]


class PulseRanges(Ranges):
    """What the current of one kind of discharge is drawn from.

    Attributes
    ----------
    width_ns : between half heights, even in its logarithm [ns].
    skew : falling over rising time constant or deviation, even in its logarithm; a gaussian has none.
    charge_pc : apparent charge [pC]; heights follow from the signal-to-noise ratio, and a discharge that would need
        more than the larger one is drawn again.
    shapes : how often each shape is drawn.
    train_share : share of sources whose every discharge is a train of sub-pulses, 0 to 1.
    sub_pulses : of a train.
    spacing_ns : between sub-pulses, even in its logarithm [ns].
    """

    width_ns: Annotated[Pair, within(0.01, 5e3, "ns")]
    skew: Annotated[Pair, within(0.05, 100.0)]
    charge_pc: Annotated[Pair, within(0.01, 1e9, "pC")]
    shapes: ShapeWeights = Field(default={"gaussian": 0.3, "asymmetric": 0.3, "exponential": 0.2, "heidler": 0.2})
    train_share: Share = 0.0
    sub_pulses: Annotated[Whole, within(1, 20)] = (2, 5)
    spacing_ns: Annotated[Pair, within(0.01, 2e3, "ns")] = (10.0, 100.0)


class SourceRanges(Ranges):
    """What the currents of discharges are drawn from: one law for every place.

    Attributes
    ----------
    kinds : how often each kind is drawn.
    void : streamer-like, in a fresh void.
    aged_void : Townsend-like, over surfaces that discharges have made conductive.
    interface : between two insulations of an accessory; sometimes a train of sub-pulses.
    surface : along a surface towards air or oil.
    floating : spark to or from a part without potential; fast and energetic.
    """

    kinds: KindWeights = Field(
        default={"void": 0.3, "aged-void": 0.1, "interface": 0.25, "surface": 0.2, "floating": 0.15}
    )
    void: PulseRanges = PulseRanges(width_ns=(1.0, 5.0), skew=(1.5, 6.0), charge_pc=(2.0, 300.0))
    aged_void: PulseRanges = PulseRanges(width_ns=(30.0, 300.0), skew=(1.0, 4.0), charge_pc=(5.0, 500.0))
    interface: PulseRanges = PulseRanges(width_ns=(3.0, 15.0), skew=(1.0, 6.0), charge_pc=(20.0, 3e3), train_share=0.3)
    surface: PulseRanges = PulseRanges(
        width_ns=(12.0, 80.0),
        skew=(1.0, 3.0),
        charge_pc=(50.0, 5e3),
        shapes={"gaussian": 0.3, "asymmetric": 0.5, "exponential": 0.2},
    )
    floating: PulseRanges = PulseRanges(width_ns=(2.0, 8.0), skew=(1.0, 4.0), charge_pc=(200.0, 2e4))


class CoronaCurrentRanges(Ranges):
    """What the current of corona at a point in air is drawn from, before it travels along its line.

    Attributes
    ----------
    polarities : how often each polarity of the point is drawn (from memory).
    negative : Trichel pulses.
    positive : slower, with a long tail, and larger.
    """

    polarities: PolarityWeights = Field(default={"negative": 0.6, "positive": 0.4})
    negative: PulseRanges = PulseRanges(
        width_ns=(10.0, 30.0), skew=(8.0, 25.0), charge_pc=(10.0, 200.0), shapes={"exponential": 1.0}
    )
    positive: PulseRanges = PulseRanges(
        width_ns=(60.0, 400.0), skew=(2.0, 10.0), charge_pc=(100.0, 5e3), shapes={"exponential": 0.7, "heidler": 0.3}
    )


def draw_discharge(
    ranges: SourceRanges, *, rng: np.random.Generator, kind: Kind | None = None
) -> tuple[Kind, SourceCurrent]:
    """Kind and current of a discharge, whatever its place; the kind is drawn if it is not given."""
    drawn = cast("Kind", chosen(ranges.kinds, rng=rng)) if kind is None else kind
    return drawn, draw_current(_of_kind(ranges, drawn), rng=rng)


def most_charge_pc(ranges: SourceRanges, kind: str) -> float:
    """Largest apparent charge of a kind of discharge [pC]."""
    return _of_kind(ranges, cast("Kind", kind)).charge_pc[1]


def draw_corona(ranges: CoronaCurrentRanges, *, rng: np.random.Generator) -> tuple[Polarity, SourceCurrent]:
    """Polarity of a point in air and the current of its pulses."""
    if chosen(ranges.polarities, rng=rng) == "negative":
        return "negative", draw_current(ranges.negative, rng=rng)
    return "positive", draw_current(ranges.positive, rng=rng)


def draw_current(ranges: PulseRanges, *, rng: np.random.Generator) -> SourceCurrent:
    """A current of drawn shape and skew, made as wide as drawn; a train if so drawn."""
    shape = cast("Shape", chosen(ranges.shapes, rng=rng))
    width_s = log_even(ranges.width_ns, rng=rng) * 1e-9
    skew = 1.0 if shape == "gaussian" else log_even(ranges.skew, rng=rng)
    like = SourceCurrent(shape, width_s, width_s * skew)
    pulse = like.stretched(width_s / half_width_s(like))
    if rng.uniform() >= ranges.train_share:
        return pulse
    return _draw_train(pulse, ranges, rng=rng)


def _draw_train(pulse: SourceCurrent, ranges: PulseRanges, *, rng: np.random.Generator) -> SourceCurrent:
    """Sub-pulses of unequal charge (within a factor of five) at unequal spacings, the first at t = 0."""
    count = whole(ranges.sub_pulses, rng=rng)
    spacings_s = [log_even(ranges.spacing_ns, rng=rng) * 1e-9 for _ in range(count - 1)]
    charges = [even((0.2, 1.0), rng=rng) for _ in range(count)]
    return train(pulse, [0.0, *np.cumsum(spacings_s).tolist()], charges)


def _of_kind(ranges: SourceRanges, kind: Kind) -> PulseRanges:
    by_kind: Mapping[Kind, PulseRanges] = {
        "void": ranges.void,
        "aged-void": ranges.aged_void,
        "interface": ranges.interface,
        "surface": ranges.surface,
        "floating": ranges.floating,
    }
    return by_kind[kind]
