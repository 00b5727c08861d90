"""Ringing: how often a pulse swings through zero and how far it swings back."""

from __future__ import annotations

import numpy as np

from plain_features.window import ANALYSIS_RATE_HZ, ONSET, Window

#: Swings smaller than this share of the peak, or than three noise levels, are not counted.
_SMALLEST_SWING = 0.08


def measure_ringing(window: Window) -> dict[str, float]:
    """The features of this family, by name."""
    own = window.wave[ONSET : window.end]
    threshold = max(_SMALLEST_SWING, 3 * window.noise if window.noise > 0 else 0.0)
    signs = np.sign(own[np.abs(own) > threshold])
    swings = int(np.count_nonzero(np.diff(signs)))
    strong = np.flatnonzero(np.abs(own) > threshold)
    span_us = max(float(strong[-1] - strong[0]), 1.0) / ANALYSIS_RATE_HZ * 1e6 if strong.size else np.nan
    after = window.wave[window.peak : window.end]
    before = window.wave[ONSET : window.peak]
    return {
        "swings": float(swings),
        "swings_per_us": swings / span_us if swings else 0.0,
        "overshoot": float(max(0.0, -after.min())),
        "undershoot_before": float(max(0.0, -before.min())) if before.size else 0.0,
    }
