"""Features of a set of pulses, batch by batch; no result depends on the company it came in."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from pdclass.errors import RefusedError
from pdclass.features.catalogue import BY_NAME, CATALOGUE, FAMILIES
from pdclass.features.edges import PLACES, measured_places
from pdclass.features.window import ONSET, STEP_NS, Windows, chain_reach_hz, prepared
from pdclass.pulses import FloatArray, PulseSet

#: So many windows stay in the fast cache of a processor; no result depends on it.
BATCH = 128


class Measured(NamedTuple):
    """Features of pulses, and what says why one is missing (`feature.why_missing`).

    Attributes
    ----------
    values : (pulses, features) in each feature's unit; NaN = unmeasurable.
    snr_db : (pulses,) peak over noise, carriers reduced [dB]; NaN where it is unknown.
    reach_hz : (pulses,) highest frequency that the chain carries [Hz].
    """

    values: FloatArray
    snr_db: FloatArray
    reach_hz: FloatArray


def feature_table(pulses: PulseSet, names: Sequence[str] | None = None) -> FloatArray:
    """The values alone of what `measured` finds, (pulses, features) in each feature's unit; NaN = unmeasurable."""
    return measured(pulses, names).values


def measured(pulses: PulseSet, names: Sequence[str] | None = None) -> Measured:
    """Measure features of every pulse.

    Parameters
    ----------
    pulses : the pulses.
    names : features wanted, in order; the whole catalogue by default.

    Raises
    ------
    RefusedError
        If a name is not in the catalogue.
    """
    wanted = tuple(names) if names is not None else tuple(feature.name for feature in CATALOGUE)
    unknown = [name for name in wanted if name not in BY_NAME]
    if unknown:
        raise RefusedError(f"feature '{unknown[0]}' is not in this version's catalogue; use the version that has it")
    families = [name for name, (features, _) in FAMILIES.items() if any(f.name in wanted for f in features)]
    count = len(pulses.table)
    reach_hz = np.array([chain_reach_hz(chain) for chain in pulses.chains])[pulses.table["chain"].to_numpy(np.int64)]
    found = Measured(np.full((count, len(wanted)), np.nan), np.full(count, np.nan), reach_hz)
    for first in range(0, count, BATCH):
        windows, rows = _windows(pulses, slice(first, first + BATCH))
        if rows.size:
            values = _values(windows, families)
            found.values[first + rows] = np.stack([values[name] for name in wanted], axis=1)
            found.snr_db[first + rows] = windows.snr_db
    return found


def measured_edges(pulses: PulseSet, place: int) -> dict[str, object]:
    """What a drawing of one pulse needs: `time_us` and `wave_v` (onset at 0, analysis band) and edge times [us].

    Keys of the times are `PLACES` of the edges and `end`; empty where nothing is measurable.
    """
    windows, rows = _windows(pulses, slice(place, place + 1))
    if not rows.size:
        return {}
    kept, scale = int(windows.last[0]), float(windows.height_v[0])
    *places, height = measured_places(windows)[0].tolist()
    times = {name: (where - ONSET) * STEP_NS / 1e3 for name, where in zip(PLACES, places, strict=True)}
    time_us = (np.arange(kept) - ONSET) * STEP_NS / 1e3
    wave_v = windows.wave[0, :kept].astype(np.float64) * scale
    end_us = (int(windows.end[0]) - ONSET) * STEP_NS / 1e3
    return {"time_us": time_us, "wave_v": wave_v, "height_v": height * scale, **times, "end": end_us}


def _windows(pulses: PulseSet, rows: slice) -> tuple[Windows, np.ndarray]:
    table = pulses.table.iloc[rows]
    chains = [pulses.chains[place] for place in table["chain"].to_numpy(np.int64)]
    return prepared(pulses.waves[rows], chains, table["duration_us"].to_numpy(np.float64))


def _values(windows: Windows, families: Sequence[str]) -> dict[str, FloatArray]:
    """Values of some families, those NaN that the chain or the noise does not allow or that leave their range."""
    found: dict[str, FloatArray] = {}
    snr_db = windows.snr_db
    for family in families:
        features, measure = FAMILIES[family]
        for feature, values in zip(features, measure(windows).T, strict=True):
            low, high = feature.valid_range
            carried = windows.reach_hz >= feature.needs_hz
            clear = (feature.needs_snr_db == 0) | (snr_db >= feature.needs_snr_db)
            found[feature.name] = np.where(carried & clear & (values >= low) & (values <= high), values, np.nan)
    return found
