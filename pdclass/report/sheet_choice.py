"""Which pulses a labelling sheet shows: spread over height and likeness, each standing for those like it."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.cluster.hierarchy import fcluster, linkage

from pdclass.features import feature_table
from pdclass.pulses import FloatArray, PulseSet
from pdclass.training.evaluate import SNR_EDGES_DB

#: Above so many pulses of one band only so many, evenly taken in their order, are compared with each other.
MOST_COMPARED = 2000
#: A feature farther out than this counts as this far: one odd number does not make a pulse unlike all others.
FARTHEST = 4.0


@dataclass(frozen=True)
class Chosen:
    """One pulse of a sheet: its place in the set, and how many pulses it stands for, itself among them."""

    place: int
    stands_for: int


def chosen_pulses(pulses: PulseSet, most: int) -> list[Chosen]:
    """At most `most` pulses in the order of the set; echoes are left out.

    With more pulses than that the places are shared evenly over the bands of height that hold pulses (what a thin
    band leaves free goes to the others). Within a band pulses are parted into as many heaps of like ones, by Ward's
    method on their scaled features, and of each heap the pulse nearest to its middle is shown.

    References
    ----------
    J. H. Ward, J. Am. Stat. Assoc. 58, 236-244, 1963 (from memory).
    """
    alone = np.flatnonzero(pulses.table["echo_of"].isna().to_numpy())
    if len(alone) <= most:
        return [Chosen(int(place), 1) for place in alone]
    values = _scaled(feature_table(pulses.take(alone)))
    snr = pulses.table["snr_db"].to_numpy(np.float64)[alone]
    band = np.searchsorted(SNR_EDGES_DB[1:-1], np.nan_to_num(snr, nan=-np.inf), side="right")
    members = [np.flatnonzero(band == number) for number in range(len(SNR_EDGES_DB) - 1)]
    quotas = _shared_evenly([len(rows) for rows in members], most)
    found = [
        Chosen(int(alone[rows[place]]), count)
        for rows, quota in zip(members, quotas, strict=True)
        if quota
        for place, count in _representatives(values[rows], quota)
    ]
    return sorted(found, key=lambda one: one.place)


def _scaled(values: FloatArray) -> FloatArray:
    """Features from their median in units of half the distance between quartiles, at most `FARTHEST` of them.

    What is unmeasurable lies in the middle; so does a feature that hardly ever differs.
    """
    scaled = np.zeros(values.shape)
    for column in range(values.shape[1]):
        known = ~np.isnan(values[:, column])
        if not known.any():
            continue
        low, middle, high = np.percentile(values[known, column], [25, 50, 75])
        if high > low:
            away = (values[known, column] - middle) / ((high - low) / 2)
            scaled[known, column] = np.clip(away, -FARTHEST, FARTHEST)
    return scaled


def _shared_evenly(sizes: list[int], most: int) -> list[int]:
    """How many of each band: equal shares, none more than the band holds."""
    quotas = [0] * len(sizes)
    left = most
    while left:
        open_bands = [at for at, size in enumerate(sizes) if quotas[at] < size]
        if not open_bands:
            break
        share = max(1, left // len(open_bands))
        for at in open_bands:
            added = min(share, sizes[at] - quotas[at], left)
            quotas[at] += added
            left -= added
    return quotas


def _representatives(values: FloatArray, count: int) -> list[tuple[int, int]]:
    """Place of the middle pulse of each of `count` heaps, and how many pulses lie nearest to it."""
    if count >= len(values):
        return [(place, 1) for place in range(len(values))]
    step = -(-len(values) // MOST_COMPARED)
    compared = np.arange(0, len(values), step)
    count = min(count, len(compared))
    heaps = (
        np.ones(1, np.int32) if len(compared) == 1 else fcluster(linkage(values[compared], "ward"), count, "maxclust")
    )
    middles = [_middle(values, compared[heaps == heap]) for heap in np.unique(heaps)]
    nearest: NDArray[Any] = np.array([np.argmin(((values[middles] - row) ** 2).sum(axis=1)) for row in values])
    return [(place, int((nearest == at).sum())) for at, place in enumerate(middles)]


def _middle(values: FloatArray, members: NDArray[Any]) -> int:
    apart = ((values[members] - values[members].mean(axis=0)) ** 2).sum(axis=1)
    return int(members[np.argmin(apart)])
