"""Which sources a drawn circuit has, and where they sit: places and proportions as the scenario's mix says."""

from __future__ import annotations

import numpy as np

from pdclass.sim.draw import chosen, whole
from pdclass.sim.ranges import Label, Mix, SourceEntry

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
    ways = {"cable": mix.cable_ways, "local": mix.local_ways, "switchgear": mix.switchgear_ways}.get(label)
    way = None if ways is None else chosen(ways, rng=rng)
    wish = {"label": label, "pulses_per_cycle": 1.0, "snr_db": heights_db, "way": way}
    if label == "cable" and way == "cable":
        wish["distance_m"] = _cable_place_m(mix, length_m, rng=rng)
    if label == "local":
        at_end = way == "box" or rng.uniform() < mix.local_at_termination
        wish["distance_m"] = 0.0 if at_end else NEAR_M * rng.uniform()
    return SourceEntry.model_validate(wish)


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
