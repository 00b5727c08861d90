"""How far a pulse lies from everything the model was trained on.

Features are centred on the median and divided by the robust spread (interquartile range / 1.349) of the
reference pulses, then clipped at +-8, so that one wild feature weighs in but cannot alone carry the mean far.
The distance between two pulses is the mean absolute difference over the features that both have; the novelty of
a pulse is its distance to the fifth-nearest reference pulse.

Missing values: a feature that a pulse lacks (no later copy, a band within the noise) says nothing of it. A pair is
compared if it shares half of the features that the pulse has, and a quarter of all; a pulse that has fewer than a
quarter of all, or fewer than five reference pulses to be compared with, is infinitely far.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.model.doubt import group_quantile
from pdclass.model.forest import checked_values
from pdclass.pulses import FloatArray, IntArray, WaveArray

CLIP = 8.0
NEIGHBOURS = 5
LIMIT_SHARE = Fraction(99, 100)
_NORMAL_IQR = 1.349
_NO_GROUP = -1


@dataclass(frozen=True)
class NoveltyReference:
    """What a pulse is compared with.

    Attributes
    ----------
    centre, scale : (features,), median and robust spread of the reference, in each feature's unit; scale > 0.
    rows : (reference pulses, features), scaled and clipped, NaN where unmeasurable.
    limit : a pulse beyond it is unfamiliar; infinite where nothing is.
    """

    centre: FloatArray
    scale: FloatArray
    rows: FloatArray
    limit: float


def make_reference(values: FloatArray, centre: FloatArray, scale: FloatArray, limit: float) -> NoveltyReference:
    """The comparison set from raw feature values (reference pulses, features) and what is already known of it."""
    return NoveltyReference(centre, scale, _scaled(values, centre, scale), limit)


def fit_novelty(
    reference: FloatArray,
    reference_groups: NDArray[Any],
    judged: FloatArray,
    judged_groups: NDArray[Any],
) -> NoveltyReference:
    """A comparison set whose limit is the 99th percentile of the judged pulses' novelty, groups weighing the same.

    References of a judged pulse's own group are left out, as they would be for a circuit never seen.

    Parameters
    ----------
    reference : (reference pulses, features).
    judged : (pulses, features), the pulses of the conform groups.
    reference_groups, judged_groups : the group of each row.
    """
    centre, scale = _robust(reference)
    unlimited = make_reference(reference, centre, scale, np.inf)
    names = np.unique(np.asarray([*reference_groups, *judged_groups], dtype=str))
    of_reference = np.searchsorted(names, np.asarray(reference_groups, dtype=str))
    of_judged = np.searchsorted(names, np.asarray(judged_groups, dtype=str))
    far = _distances(unlimited, judged, of_reference, of_judged)
    # an infinitely far pulse is unfamiliar whatever the limit: it must not move it
    near = np.isfinite(far)
    limit = group_quantile(far[near].astype(np.float64), np.asarray(judged_groups)[near], LIMIT_SHARE, beyond=0)
    return NoveltyReference(centre, scale, unlimited.rows, limit)


def novelty(reference: NoveltyReference, values: FloatArray) -> WaveArray:
    """Distance of each pulse to its fifth-nearest reference pulse [robust spreads], float32, infinite allowed."""
    of_reference = np.zeros(len(reference.rows), np.int64)
    return _distances(reference, values, of_reference, np.full(len(values), _NO_GROUP, np.int64))


def unfamiliar(reference: NoveltyReference, novelty: WaveArray) -> NDArray[np.bool_]:
    """Which pulses lie beyond the limit; an infinitely far pulse always does."""
    return np.asarray((novelty > np.float32(reference.limit)) | ~np.isfinite(novelty), np.bool_)


def _robust(values: FloatArray) -> tuple[FloatArray, FloatArray]:
    centre, scale = np.zeros(values.shape[1]), np.ones(values.shape[1])
    for column in range(values.shape[1]):
        known = values[~np.isnan(values[:, column]), column]
        if known.size:
            low, middle, high = np.quantile(known, [0.25, 0.5, 0.75])
            centre[column] = middle
            # a feature that most pulses share has no interquartile range: its mean deviation, else 1
            spread = (high - low) / _NORMAL_IQR or float(np.mean(np.abs(known - middle)))
            scale[column] = spread if spread > 0 else 1.0
    return centre, scale


def _scaled(values: FloatArray, centre: FloatArray, scale: FloatArray) -> FloatArray:
    return np.asarray(np.clip((checked_values(values, len(centre)) - centre) / scale, -CLIP, CLIP), np.float64)


def _distances(
    reference: NoveltyReference, values: FloatArray, of_reference: IntArray, of_judged: IntArray
) -> WaveArray:
    rows = _scaled(values, reference.centre, reference.scale)
    out = np.empty(len(rows), np.float32)
    _nearest(np.ascontiguousarray(reference.rows.T), of_reference, rows, of_judged, NEIGHBOURS, out)
    return out


@compiled
def _nearest(
    columns: FloatArray,
    of_reference: IntArray,
    rows: FloatArray,
    of_rows: IntArray,
    neighbours: int,
    out: WaveArray,
) -> None:
    n_features, n_reference = columns.shape
    total, shared = np.empty(n_reference), np.empty(n_reference)
    for row in range(rows.shape[0]):
        total[:], shared[:] = 0.0, 0.0
        own = np.sum(~np.isnan(rows[row]))
        # all reference pulses side by side, feature after feature: each pair is summed in one fixed order
        for f in range(n_features):
            _add_gaps(rows[row, f], columns[f], total, shared)
        best = np.full(neighbours, np.inf)
        for other in range(n_reference):
            if 2 * shared[other] < own or 4 * shared[other] < n_features or of_reference[other] == of_rows[row]:
                continue
            distance, place = total[other] / shared[other], neighbours - 1
            if distance >= best[place]:
                continue
            while place > 0 and best[place - 1] > distance:
                best[place] = best[place - 1]
                place -= 1
            best[place] = distance
        out[row] = best[neighbours - 1]


@compiled
def _add_gaps(x: float, known: FloatArray, total: FloatArray, shared: FloatArray) -> None:
    if np.isnan(x):
        return
    for other in range(known.size):
        gap = abs(x - known[other])
        both = gap == gap  # noqa: PLR0124 (false for NaN; the loop then stays free of branches)
        total[other] += gap if both else 0.0
        shared[other] += 1.0 if both else 0.0
