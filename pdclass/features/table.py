"""Features of a set of pulses, pulse by pulse, so that no result depends on the company it came in."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np

from pdclass.errors import RefusedError
from pdclass.features.catalogue import BY_NAME, CATALOGUE, FAMILIES
from pdclass.features.edges import measured_places
from pdclass.features.window import ONSET, STEP_NS, Window, Windows, prepared, stacked
from pdclass.pulses import FloatArray, PulseSet

#: So many windows stay in the fast cache of a processor; no result depends on it.
BATCH = 128


def feature_table(pulses: PulseSet, names: Sequence[str] | None = None) -> FloatArray:
    """Measure features of every pulse.

    Parameters
    ----------
    pulses : the pulses.
    names : features wanted, in order; the whole catalogue by default.

    Returns
    -------
    (pulses, features) in each feature's unit; NaN = unmeasurable.

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
    values = np.full((len(pulses.table), len(wanted)), np.nan)
    for first in range(0, len(values), BATCH):
        rows = range(first, min(first + BATCH, len(values)))
        usable = [(row, window) for row in rows if (window := _window(pulses, row)) is not None]
        if usable:
            found = _measured(stacked([window for _, window in usable]), families)
            values[[row for row, _ in usable]] = np.stack([found[name] for name in wanted], axis=1)
    return values


class Measured(NamedTuple):
    """Features of some pulses, and what decides whether one can be measured.

    Attributes
    ----------
    values : (pulses, features) in each feature's unit; NaN = unmeasurable.
    snr_db : (pulses,) peak over noise, carriers reduced [dB]; NaN = unknown.
    reach_hz : (pulses,) highest frequency that the chain carries [Hz].
    """

    values: FloatArray
    snr_db: FloatArray
    reach_hz: FloatArray


def measured(pulses: PulseSet, names: Sequence[str] | None = None) -> Measured:
    """Features of every pulse as `feature_table` gives them, with its noise and the reach of its chain."""
    windows = [_window(pulses, row) for row in range(len(pulses.table))]
    snr_db = np.array([np.nan if window is None else window.snr_db for window in windows])
    reach_hz = np.array([np.nan if window is None else window.reach_hz for window in windows])
    return Measured(feature_table(pulses, names), snr_db, reach_hz)


def measured_edges(pulses: PulseSet, place: int) -> dict[str, object]:
    """What a drawing of one pulse needs: `time_us` and `wave_v` (onset at 0, analysis band) and edge times [us].

    Keys of the times are those of `measured_places` (without `height`) and `end`; empty where nothing is measurable.
    """
    window = _window(pulses, place)
    if window is None:
        return {}
    scale = window.height_v
    at = measured_places(window)
    times = {name: (where - ONSET) * STEP_NS / 1e3 for name, where in at.items() if name != "height"}
    time_us = (np.arange(window.wave.size) - ONSET) * STEP_NS / 1e3
    kept = slice(0, window.last)
    shown = {"time_us": time_us[kept], "wave_v": window.wave[kept] * scale, "height_v": at["height"] * scale}
    return {**shown, **times, "end": (window.end - ONSET) * STEP_NS / 1e3}


def _window(pulses: PulseSet, place: int) -> Window | None:
    chain = pulses.chains[int(pulses.table["chain"].iloc[place])]
    return prepared(pulses.waves[place], chain, float(pulses.table["duration_us"].iloc[place]))


def _measured(windows: Windows, families: Sequence[str]) -> dict[str, FloatArray]:
    """Values of some families, those NaN that the chain or the noise does not allow or that leave their range."""
    found: dict[str, FloatArray] = {}
    for family in families:
        features, measure = FAMILIES[family]
        for feature, values in zip(features, measure(windows).T, strict=True):
            low, high = feature.valid_range
            carried = windows.reach_hz >= feature.needs_hz
            clear = (feature.needs_snr_db == 0) | (windows.snr_db >= feature.needs_snr_db)
            found[feature.name] = np.where(carried & clear & (values >= low) & (values <= high), values, np.nan)
    return found
