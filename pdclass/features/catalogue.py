"""The one visible list of features, and the family that measures each."""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from pdclass.features.arrival import ARRIVAL, measure_arrival
from pdclass.features.copies import COPIES, measure_copies
from pdclass.features.echoes import ECHOES, measure_echoes
from pdclass.features.edges import EDGES, measure_edges
from pdclass.features.feature import Feature
from pdclass.features.modes import MODES, measure_modes
from pdclass.features.ringing import RINGING, measure_ringing
from pdclass.features.scales import SCALES, measure_scales
from pdclass.features.spectrum import SPECTRUM, measure_spectrum
from pdclass.features.spread import SPREAD, measure_spread
from pdclass.features.tilt import TILT, measure_tilt
from pdclass.features.window import Window, Windows
from pdclass.pulses import FloatArray

#: A family's measuring: a batch of windows to (pulses, features of the family) in the order of its tuple.
Measure = Callable[[Windows], FloatArray]


def by_row(features: tuple[Feature, ...], measure: Callable[[Window], dict[str, float]]) -> Measure:
    """A measuring of single windows as one of batches."""

    def measured(windows: Windows) -> FloatArray:
        rows = [measure(windows.row(place)) for place in range(len(windows))]
        return np.array([[row[feature.name] for feature in features] for row in rows]).reshape(-1, len(features))

    return measured


FAMILIES: Mapping[str, tuple[tuple[Feature, ...], Measure]] = {
    "edges": (EDGES, by_row(EDGES, measure_edges)),
    "spectrum": (SPECTRUM, by_row(SPECTRUM, measure_spectrum)),
    "scales": (SCALES, by_row(SCALES, measure_scales)),
    "ringing": (RINGING, by_row(RINGING, measure_ringing)),
    "echoes": (ECHOES, by_row(ECHOES, measure_echoes)),
    "spread": (SPREAD, by_row(SPREAD, measure_spread)),
    "arrival": (ARRIVAL, by_row(ARRIVAL, measure_arrival)),
    "copies": (COPIES, by_row(COPIES, measure_copies)),
    "tilt": (TILT, measure_tilt),
    "modes": (MODES, measure_modes),
}

CATALOGUE: tuple[Feature, ...] = (
    *EDGES,
    *SPECTRUM,
    *SCALES,
    *RINGING,
    *ECHOES,
    *SPREAD,
    *ARRIVAL,
    *COPIES,
    *TILT,
    *MODES,
)

BY_NAME: Mapping[str, Feature] = {feature.name: feature for feature in CATALOGUE}


def feature_digests() -> dict[str, str]:
    """Digest of every feature's declaration, by name: what a bundle is checked against."""
    return {feature.name: feature.digest for feature in CATALOGUE}
