"""Which sources a drawn circuit has, and where they sit: places and proportions as the scenario's mix says."""

from __future__ import annotations

from collections.abc import Mapping
from typing import cast

import numpy as np

from pdclass.sim.draw import chosen, whole
from pdclass.sim.ranges import Label, Mix, SourceEntry, Way

#: Nearest place of a `cable` source and farthest of a `local` one [m].
NEAR_M = 10.0


def draw_labels(mix: Mix, *, rng: np.random.Generator) -> list[Label]:
    """The classes of a drawn circuit's sources, class by class."""
    labels: tuple[Label, ...] = ("cable", "local", "switchgear", "interference")
    return [label for label in labels for _ in range(whole(mix.sources, rng=rng))]


def draw_entry(
    label: Label, mix: Mix, length_m: float, heights_db: tuple[float, float], *, rng: np.random.Generator
) -> SourceEntry:
    """A source of a class somewhere on a circuit of the given length [m], its pulses so high over the noise [dB]."""
    return completed(SourceEntry(label=label, pulses_per_cycle=1.0, snr_db=heights_db), mix, length_m, rng=rng)


def completed(wish: SourceEntry, mix: Mix, length_m: float, *, rng: np.random.Generator) -> SourceEntry:
    """The same source with the way and the place that it does not say, drawn as the mix has them."""
    way, place_m = wish.way, wish.distance_m
    if wish.label == "cable":
        way = way or ("cable" if place_m is not None else _way(mix.cable_ways, rng=rng))
        if way == "cable" and place_m is None:
            place_m = _cable_place_m(mix, length_m, rng=rng)
    elif wish.label == "local":
        way = way or ("stress-cone" if place_m is not None else _way(mix.local_ways, rng=rng))
        if place_m is None and way == "stress-cone":
            place_m = 0.0 if rng.uniform() < mix.local_at_termination else NEAR_M * rng.uniform()
    elif wish.label == "switchgear":
        way = way or _way(mix.switchgear_ways, rng=rng)
    return wish.model_copy(update={"way": way, "distance_m": place_m})


def _way(weights: Mapping[str, float], *, rng: np.random.Generator) -> Way:
    return cast("Way", chosen(weights, rng=rng))


def _cable_place_m(mix: Mix, length_m: float, *, rng: np.random.Generator) -> float:
    """Faults do not prefer a place along the cable (common practice, no source).

    A few are drawn evenly in the logarithm, so that the first hundred metres are not empty on long circuits.
    """
    where, place = rng.uniform(), rng.uniform()
    if where < mix.far_end_share:
        return length_m
    if where < mix.far_end_share + (1 - mix.far_end_share) * mix.near_share:
        return float(NEAR_M * (length_m / NEAR_M) ** place)
    return NEAR_M + (length_m - NEAR_M) * place
