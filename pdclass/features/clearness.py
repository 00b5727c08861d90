"""From which ratio of peak to noise a feature is clear: its spread then stays below half of what classes differ by.

The figures are measured, not declared: `benchmarks/feature_metrology.py` writes them. They change no value, only what
a sentence says about it.
"""

from __future__ import annotations

import math
from collections.abc import Mapping

#: Nothing is known of ratios above this one [dB].
HIGHEST_DB = 40.0


def how_blurred(name: str, snr_db: float) -> str | None:
    """What noise does to a measured value, in words; None where it is clear or nothing is known.

    Parameters
    ----------
    name : of the feature.
    snr_db : measured peak over noise, carriers reduced [dB]; NaN = unknown.
    """
    clear_db = CLEAR_SNR_DB.get(name, math.nan)
    if math.isnan(clear_db) or not snr_db < min(clear_db, HIGHEST_DB):
        return None
    beyond = f"clear from {clear_db:.0f} dB" if math.isfinite(clear_db) else f"not clear up to {HIGHEST_DB:.0f} dB"
    # rounded down, so that it still reads as below the limit
    return f"noise blurs it at {math.floor(snr_db)} dB; {beyond}"


#: Measured peak over noise [dB]; infinite = not clear at any ratio up to the highest, NaN = not known yet,
#: for the base bundle does not hold the feature.
CLEAR_SNR_DB: Mapping[str, float] = {
    "rise_ns": 11.0,
    "rise_raw_ns": 11.0,
    "fall_ns": 14.0,
    "width_50_ns": 16.0,
    "width_10_ns": 11.0,
    "width_ratio": 24.0,
    "asymmetry": 16.0,
    "tail_ns": 40.0,
    "centroid_mhz": 11.0,
    "spectral_spread_mhz": 16.0,
    "rolloff_85_mhz": 11.0,
    "rolloff_95_mhz": 11.0,
    "share_0p1_1_mhz": 11.0,
    "share_1_3_mhz": 19.0,
    "share_3_7_mhz": 19.0,
    "share_7_14_mhz": 11.0,
    "share_14_25_mhz": 24.0,
    "scale_evenness": 16.0,
    "scale_mean_level": 14.0,
    "swings": 30.0,
    "swings_per_us": 16.0,
    "overshoot": 16.0,
    "undershoot_before": math.inf,
    "equivalent_length_ns": math.inf,
    "equivalent_width_mhz": 11.0,
    "onset_to_peak_ns": 11.0,
    "energy_before_peak": 40.0,
    "crest_factor": 14.0,
    "late_0p3_0p6_db": 16.0,
    "late_0p6_1p2_db": 24.0,
    "first_0p3_delay_0p1_1p3_ns": 14.0,
    "first_0p3_delay_1p3_2p5_ns": 24.0,
    "first_0p3_delay_2p5_4p5_ns": 24.0,
    "first_0p3_delay_4p5_7_ns": 16.0,
    "first_0p3_delay_7_10_ns": 30.0,
    "first_0p3_delay_10_13p5_ns": 24.0,
    "first_0p3_delay_13p5_18_ns": 24.0,
    "first_0p3_delay_18_25_ns": 19.0,
    "first_0p6_delay_0p1_0p5_ns": 14.0,
    "first_0p6_delay_0p5_1p3_ns": 24.0,
    "first_0p6_delay_1p3_2p5_ns": 24.0,
    "first_0p6_delay_2p5_4p5_ns": 24.0,
    "first_0p6_delay_4p5_7_ns": 30.0,
    "first_0p6_delay_7_10_ns": 24.0,
    "first_0p6_delay_10_13p5_ns": 30.0,
    "first_0p6_delay_13p5_18_ns": 30.0,
    "first_0p6_delay_18_25_ns": 40.0,
    "copy_1_delay_us": 40.0,
    "copy_1_ratio": 40.0,
    "copy_1_likeness": 24.0,
    "copy_1_width_ns": math.inf,
    "copy_1_flank": math.inf,
    "copy_1_level_1_2p5_db": 40.0,
    "copy_1_level_2p5_5_db": 40.0,
    "copy_1_level_5_9_db": 40.0,
    "copy_1_level_9_14_db": 40.0,
    "copy_2_delay_us": 30.0,
    "copy_2_ratio": 40.0,
    "copy_delay_ratio": 40.0,
    "first_1p2_level_0p5_1p3_db": 14.0,
    "first_1p2_level_1p3_2p5_db": 16.0,
    "first_1p2_level_2p5_4p5_db": 24.0,
    "first_1p2_level_4p5_7_db": 24.0,
    "first_1p2_level_7_10_db": 19.0,
    "first_1p2_level_10_13p5_db": 19.0,
    "first_1p2_level_13p5_18_db": 16.0,
    "first_1p2_level_18_25_db": 24.0,
    "first_root_tilt_db": 40.0,
    "first_straight_tilt_db": 40.0,
    "first_dispersion_ns": 30.0,
    "mode_mhz": 24.0,
    "mode_q": 24.0,
    "mode_share": 24.0,
}
