"""Features of a set of pulses, batch by batch; no result depends on the company it came in."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from pdclass.errors import RefusedError
from pdclass.features.catalogue import BY_NAME, CATALOGUE, FAMILIES
from pdclass.features.edges import PLACES, measured_places
from pdclass.features.feature import Feature
from pdclass.features.window import ONSET, STEP_NS, Windows, chain_band_hz, counting_noise_v, prepared
from pdclass.pulses import FloatArray, PulseSet

#: What is measured on all of the own samples, and wrong on a part of them.
_OF_WHOLE = frozenset(
    [
        "tail_ns",
        *(feature.name for name in ("spectrum", "scales", "ringing", "spread") for feature in FAMILIES[name][0]),
    ]
)
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
    families = [part for part in FAMILIES.values() if any(feature.name in wanted for feature in part[0])]
    features = [feature for part, _ in families for feature in part]
    columns = [[feature.name for feature in features].index(name) for name in wanted]
    chain, duration_us = pulses.table["chain"].to_numpy(np.int64), pulses.table["duration_us"].to_numpy(np.float64)
    low_hz, reach_hz = chain_band_hz(pulses.chains)[:, chain]
    least_v = counting_noise_v(pulses.chains)[chain]
    found = Measured(np.full((len(chain), len(wanted)), np.nan), np.full(len(chain), np.nan), reach_hz)
    for first in range(0, len(chain), BATCH):
        batch = slice(first, first + BATCH)
        of_chain = reach_hz[batch], low_hz[batch], least_v[batch]
        windows, rows = prepared(pulses.waves[batch], duration_us[batch], *of_chain)
        if rows.size:
            values = np.concatenate([measure(windows) for _, measure in families], axis=1)
            whole = np.array([feature.name in _OF_WHOLE for feature in features])
            values[np.ix_(windows.cut_short, whole)] = np.nan
            found.values[first + rows] = _allowed(values, windows, features)[:, columns]
            found.snr_db[first + rows] = windows.snr_db
    return found


def _allowed(values: FloatArray, windows: Windows, features: Sequence[Feature]) -> FloatArray:
    """The values, those NaN that the chain or the noise does not allow or that leave their range."""
    low, high = np.array([feature.valid_range for feature in features]).reshape(-1, 2).T
    needs_hz = np.array([feature.needs_hz for feature in features])
    needs_snr_db = np.array([feature.needs_snr_db or -np.inf for feature in features])
    snr_db = np.nan_to_num(windows.snr_db, nan=-np.inf)
    allowed = (windows.reach_hz[:, None] >= needs_hz) & (snr_db[:, None] >= needs_snr_db)
    return np.where(allowed & (values >= low) & (values <= high), values, np.nan)


def measured_edges(pulses: PulseSet, place: int) -> dict[str, object]:
    """What a drawing of one pulse needs: `time_us` and `wave_v` (onset at 0, analysis band) and edge times [us].

    Keys of the times are `PLACES` of the edges and `end`; empty where nothing is measurable.
    """
    row = pulses.table.iloc[[place]]
    chain, duration_us = row["chain"].to_numpy(np.int64), row["duration_us"].to_numpy(np.float64)
    low_hz, reach_hz = chain_band_hz(pulses.chains)[:, chain]
    least_v = counting_noise_v(pulses.chains)[chain]
    windows, rows = prepared(pulses.waves[[place]], duration_us, reach_hz, low_hz, least_v)
    if not rows.size:
        return {}
    kept, scale = int(windows.last[0]), float(windows.height_v[0])
    *places, height = measured_places(windows)[0].tolist()
    times = {name: (where - ONSET) * STEP_NS / 1e3 for name, where in zip(PLACES, places, strict=True)}
    time_us = (np.arange(kept) - ONSET) * STEP_NS / 1e3
    wave_v = windows.wave[0, :kept].astype(np.float64) * scale
    end_us = (int(windows.end[0]) - ONSET) * STEP_NS / 1e3
    return {"time_us": time_us, "wave_v": wave_v, "height_v": height * scale, **times, "end": end_us}
