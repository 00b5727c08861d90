"""The one visible list of features, and the family that measures each."""

from __future__ import annotations

from collections.abc import Callable, Mapping

from pdclass.features.arrival import ARRIVAL, measure_arrival
from pdclass.features.copies import COPIES, measure_copies
from pdclass.features.edges import EDGES, measure_edges
from pdclass.features.feature import Feature
from pdclass.features.modes import MODES, measure_modes
from pdclass.features.ringing import RINGING, measure_ringing
from pdclass.features.scales import SCALES, measure_scales
from pdclass.features.spectrum import SPECTRUM, measure_spectrum
from pdclass.features.spread import SPREAD, measure_spread
from pdclass.features.tilt import TILT, measure_tilt
from pdclass.features.window import Windows
from pdclass.pulses import FloatArray

#: A family's measuring: a batch of windows to (pulses, features of the family) in the order of its tuple.
Measure = Callable[[Windows], FloatArray]

FAMILIES: Mapping[str, tuple[tuple[Feature, ...], Measure]] = {
    "edges": (EDGES, measure_edges),
    "spectrum": (SPECTRUM, measure_spectrum),
    "scales": (SCALES, measure_scales),
    "ringing": (RINGING, measure_ringing),
    "spread": (SPREAD, measure_spread),
    "arrival": (ARRIVAL, measure_arrival),
    "copies": (COPIES, measure_copies),
    "tilt": (TILT, measure_tilt),
    "modes": (MODES, measure_modes),
}

CATALOGUE: tuple[Feature, ...] = (
    *EDGES,
    *SPECTRUM,
    *SCALES,
    *RINGING,
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
