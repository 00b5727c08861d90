"""Every feature of the catalogue measured plainly, pulse by pulse: what `pdclass.features` is held against.

Short functions on one window each, with numpy alone and nothing compiled: the peer of the benchmark and the oracle of
the tests. It shares the definitions with the package, and none of its code.
"""

from __future__ import annotations

import numpy as np
from plain_features.arrival import measure_arrival
from plain_features.copies import measure_copies
from plain_features.edges import measure_edges
from plain_features.modes import measure_modes
from plain_features.ringing import measure_ringing
from plain_features.scales import measure_scales
from plain_features.spectrum import measure_spectrum
from plain_features.spread import measure_spread
from plain_features.tilt import measure_tilt
from plain_features.window import ONSET, Window, prepared

from pdclass.features import CATALOGUE
from pdclass.pulses import FloatArray, PulseSet

MEASURES = (
    measure_edges,
    measure_spectrum,
    measure_scales,
    measure_ringing,
    measure_spread,
    measure_arrival,
    measure_copies,
    measure_tilt,
    measure_modes,
)
#: Measured on all of the own samples: nothing where the record ends within them, less than 1 us after the onset.
OF_WHOLE = (measure_spectrum, measure_scales, measure_ringing, measure_spread)


def plain_table(pulses: PulseSet) -> FloatArray:
    """Values of the whole catalogue, (pulses, features), as `pdclass.features.feature_table` has them."""
    values = np.full((len(pulses.table), len(CATALOGUE)), np.nan)
    for place in range(len(values)):
        chain = pulses.chains[int(pulses.table["chain"].iloc[place])]
        window = prepared(pulses.waves[place], chain, float(pulses.table["duration_us"].iloc[place]))
        if window is not None:
            values[place] = plain_values(window)
    return values


def plain_values(window: Window) -> FloatArray:
    """Values of one pulse, NaN where the chain or the noise does not allow one or it leaves its range."""
    found: dict[str, float] = {}
    cut = window.end == window.last < ONSET + 100
    for measure in MEASURES:
        found |= {} if measure in OF_WHOLE and cut else measure(window)
    if cut:
        del found["tail_ns"]
    values = np.full(len(CATALOGUE), np.nan)
    for place, feature in enumerate(CATALOGUE):
        low, high = feature.valid_range
        clear = feature.needs_snr_db == 0 or window.snr_db >= feature.needs_snr_db
        value = found.get(feature.name, np.nan)
        if window.reach_hz >= feature.needs_hz and clear and low <= value <= high:
            values[place] = value
    return values
