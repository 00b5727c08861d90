"""The windows of a pulse table: what a wave must be, and what a lone window says of noise and peak."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from pdclass.errors import InputError, complaint
from pdclass.pulses import WaveArray, onset_in_window

WAVE_LIMIT_V = 1000.0
_BLOCK_ROWS = 1024
_MAD_OF_UNIT_GAUSS = 0.6745


def wave_rows(column: Any, samples: int) -> WaveArray:
    """A batch of an Arrow list column, every list of the same length, as (rows, samples) float32 [V]."""
    values = column.flatten().to_numpy(zero_copy_only=False)
    # beyond float32 is beyond a kilovolt, which is refused with its row named
    with np.errstate(over="ignore"):
        return np.asarray(values, np.float32).reshape(len(column), samples)


def check_waves(where: str, waves: WaveArray) -> None:
    """Refuse waves that cannot be a record of a pulse.

    Raises
    ------
    InputError
        If a window has no finite sample, NaN between finite samples (outside of the record NaN is right), a
        sample above 1 kV or infinite, or all samples equal; the message names the row, counted from 0.
    """
    for first in range(0, len(waves), _BLOCK_ROWS):
        block = waves[first : first + _BLOCK_ROWS]
        known = ~np.isnan(block)
        inside = np.maximum.accumulate(known, axis=1) & np.maximum.accumulate(known[:, ::-1], axis=1)[:, ::-1]
        low = np.where(known, block, np.float32(np.inf)).min(axis=1)
        high = np.where(known, block, np.float32(-np.inf)).max(axis=1)
        rules = (
            (~known.any(axis=1), "a finite sample", "NaN throughout", "leave the row out"),
            ((inside & ~known).any(axis=1), "NaN at the ends only", "NaN inside", "leave the row out"),
            (np.maximum(high, -low) > WAVE_LIMIT_V, "at most 1 kV", "more", "write the waves in volts"),
            (low == high, "a signal", "all samples equal", "leave the row out"),
        )
        for broken, expected, found, advice in rules:
            if broken.any():
                row = int(np.argmax(broken))
                shown = f"{max(high[row], -low[row]):g} V" if found == "more" else found
                field = f"wave, row {first + row}"
                raise InputError(complaint(where, field, expected=expected, found=shown, advice=advice))


def pretrigger_noise_v(waves: WaveArray) -> WaveArray:
    """MAD/0.6745 of the samples before the onset of each window [V]; NaN where there are none."""
    before = waves[:, : onset_in_window(waves.shape[1])].astype(np.float64)
    level = np.full(len(waves), np.nan)
    for row, samples in enumerate(before):
        there = samples[~np.isnan(samples)]
        if there.size:
            level[row] = np.median(np.abs(there - np.median(there))) / _MAD_OF_UNIT_GAUSS
    return level.astype(np.float32)


def peak_v(waves: WaveArray) -> WaveArray:
    """Signed excursion of largest magnitude from the onset on [V], from the median of what lies before it.

    Where nothing follows the onset the whole window is looked at; where nothing lies before it, from zero.
    """
    onset = onset_in_window(waves.shape[1])
    peaks = np.zeros(len(waves), np.float32)
    for row, wave in enumerate(waves):
        before = wave[:onset][~np.isnan(wave[:onset])]
        level = np.median(before) if before.size else np.float32(0.0)
        after = (wave[onset:] if not np.isnan(wave[onset:]).all() else wave) - level
        peaks[row] = after[np.nanargmax(np.abs(after))]
    return peaks


def signal_to_noise_db(peaks_v: NDArray[Any], noises_v: NDArray[Any]) -> WaveArray:
    """20 log10(|peak|/noise) [dB]; NaN where either is zero or unknown."""
    peak, noise = np.abs(np.asarray(peaks_v, np.float64)), np.asarray(noises_v, np.float64)
    level = np.full(len(peak), np.nan)
    there = (peak > 0) & (noise > 0)
    level[there] = 20.0 * np.log10(peak[there] / noise[there])
    return level.astype(np.float32)
