"""Every feature's bias and spread against noise, sampling rate and sensor band: FEATURES.md and one page of curves.

Reference pulses are closed-form shapes and simulated pulses of the four classes. The truth is the same pulse 60 dB
over the noise, sampled at 100 MS/s, behind the reference sensor. Run by hand; takes a few minutes on one core.
"""

import os

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "NUMBA_NUM_THREADS"):
    os.environ[name] = "1"

from dataclasses import replace
from pathlib import Path

import numpy as np
import pandas as pd
from metrology.page import Errors, Findings, draw, write_clearness, write_tables
from metrology.reference import REFERENCE_HZ, REFERENCE_RATE_HZ, reference_pulses, windows

from pdclass.features import CATALOGUE, FAMILIES, measured

ROOT = Path(__file__).parent.parent
SNR_DB = (6, 9, 12, 15, 18, 24, 30, 40)
RATES_HZ = (62.5e6, 100e6, 125e6, 200e6, 250e6)
UPPER_HZ = (10e6, 14e6, 20e6, 28e6, 40e6)
LOWER_HZ = (0.05e6, 0.1e6, 0.3e6, 1e6)
#: The sensor behind which sampling rates are compared: all of them carry it [Hz].
NARROW_HZ, SLOWEST_HZ = (0.1e6, 20e6), 62.5e6
CLEAN_DB = 60.0
DRAWS = 12
#: Measurable in fewer of the pulses than this, a feature has no figure.
LEAST_SHARE = 0.25
#: A spread below this share of the difference between classes is clear.
CLEAR_SHARE = 0.5
NOISES = ("white", "carriers")
NAMES = [feature.name for feature in CATALOGUE]


def open_gates():
    """Measure whatever the noise: what is to be found out is where a gate belongs. Returns the declared gates [dB]."""
    declared = {feature.name: feature.needs_snr_db for feature in CATALOGUE}
    for family, (features, measure) in list(FAMILIES.items()):
        FAMILIES[family] = (tuple(replace(feature, needs_snr_db=0.0) for feature in features), measure)
    return declared


def values_of(pulses, snr_db, **noise):
    seen = measured(windows(pulses, snr_db, **noise))
    return seen.values.reshape(len(pulses), -1, len(NAMES)), float(np.nanmedian(seen.snr_db))


def errors(values, truth, seen_db):
    """Errors of (pulses, draws, features) against (pulses, features)."""
    error = values - truth[:, None]
    known = np.isfinite(truth)
    found = np.isfinite(error).sum(axis=(0, 1)) / np.maximum(known.sum(axis=0) * values.shape[1], 1)
    flat = error.reshape(-1, error.shape[-1])
    columns = [column[np.isfinite(column)] for column in flat.T]
    low, middle, high = np.array([np.percentile(one, [16, 50, 84]) if one.size else 3 * [np.nan] for one in columns]).T
    enough = found >= LEAST_SHARE
    return Errors(np.where(enough, middle, np.nan), np.where(enough, (high - low) / 2, np.nan), found, seen_db)


def truth_of(pulses):
    return values_of(pulses, CLEAN_DB)[0][:, 0]


def against_noise():
    pulses = reference_pulses()
    truth = truth_of(pulses)
    found = {}
    for noise in NOISES:
        for snr_db in SNR_DB:
            values, seen_db = values_of(pulses, snr_db, carriers=noise == "carriers", draws=DRAWS)
            found[noise, snr_db] = errors(values, truth, seen_db)
    return found


def against_rate():
    truth = truth_of(reference_pulses(NARROW_HZ, REFERENCE_RATE_HZ, SLOWEST_HZ))
    return {
        rate_hz: errors(*values_and_truth(reference_pulses(NARROW_HZ, rate_hz, SLOWEST_HZ), truth))
        for rate_hz in RATES_HZ
    }


def against_band():
    truth = truth_of(reference_pulses())
    bands = [(REFERENCE_HZ[0], upper) for upper in UPPER_HZ] + [(lower, REFERENCE_HZ[1]) for lower in LOWER_HZ]
    return {band_hz: errors(*values_and_truth(reference_pulses(band_hz), truth)) for band_hz in dict.fromkeys(bands)}


def values_and_truth(pulses, truth):
    values, seen_db = values_of(pulses, CLEAN_DB, draws=4)
    return values, truth, seen_db


def class_differences():
    """Largest less smallest class median of every feature among the base bundle's reference pulses; NaN if absent."""
    reference = pd.read_parquet(ROOT / "models" / "base" / "reference.parquet")
    medians = reference.groupby("label")[[name for name in NAMES if name in reference]].median()
    return (medians.max() - medians.min()).reindex(NAMES).to_numpy()


def clear_from(noise, difference):
    """Smallest ratio of peak to noise on the grid from which on the spread stays clear [dB]; infinite = nowhere, NaN = not known."""
    spread = np.array([noise[snr_db].spread for snr_db in SNR_DB])
    with np.errstate(invalid="ignore"):
        clear = spread < CLEAR_SHARE * difference
    stays = np.logical_and.accumulate(clear[::-1], axis=0)[::-1]
    first = np.where(stays.any(axis=0), np.array(SNR_DB, float)[stays.argmax(axis=0)], np.inf)
    # what the base bundle's reference lacks has no difference between classes to be held against
    return np.where(np.isnan(difference), np.nan, first)


def main():
    declared = open_gates()
    noise, rate, band = against_noise(), against_rate(), against_band()
    difference = class_differences()
    clear = {kind: clear_from({snr: noise[kind, snr] for snr in SNR_DB}, difference) for kind in NOISES}
    found = Findings(noise, rate, band, difference, declared, clear, REFERENCE_HZ)
    write_tables(found, ROOT / "benchmarks" / "FEATURES.md")
    write_clearness(found, ROOT / "pdclass" / "features" / "clearness.py")
    draw(found, ROOT / "docs" / "pictures" / "feature-metrology.png")


if __name__ == "__main__":
    main()
