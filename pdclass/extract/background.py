"""What a record sounds like without pulses, and its samples held against that."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated as Bounded
from typing import Any

import numpy as np
from numpy.typing import NDArray
from pydantic import Field

from pdclass.errors import InputError
from pdclass.extract import bank, whiten
from pdclass.extract.events import threshold_sigmas
from pdclass.pulses import Capture, WaveArray, window_samples
from pdclass.settings import Settings

FILTER_ORDER = 64
SPECTRUM_PIECES = 256
NOISE_PIECES = 48
NOISE_PIECE_SAMPLES = 16384
WIDEST_BOX_S = 2e-6
_SMALLEST_PIECE = 512
#: The reference pulse of the detection limit: Gaussian, 50 ns wide at half height.
LIMIT_PULSE_WIDTH_S = 50e-9


class ExtractSettings(Settings):
    """How pulses are found.

    Attributes
    ----------
    false_events_per_cycle : false events a mains cycle that a Gaussian background would give.
    longest_echo_us : longest delay of an echo [us].
    cycle_s : the cycle meant by the false-event rate where the capture does not state its mains [s].
    """

    false_events_per_cycle: Bounded[float, Field(gt=0, le=1e5)] = 1.0
    longest_echo_us: Bounded[float, Field(gt=0, le=1000)] = 60.0
    cycle_s: Bounded[float, Field(gt=0, le=1)] = 0.02


@dataclass(frozen=True)
class Background:
    """What the record sounds like without pulses.

    Attributes
    ----------
    taps : whitening filter.
    offset : level of the record [count].
    limits : (scales,) threshold of the box sums [count, whitened].
    noise : noise level of the whitened record [count].
    """

    taps: WaveArray
    offset: float
    limits: WaveArray
    noise: float


def measure_background(capture: Capture, settings: ExtractSettings) -> Background:
    """Fit the whitening filter and the thresholds to pieces spread over the whole record.

    Raises
    ------
    InputError
        If the record or its segments are too short, hold NaN or infinite samples, or hold no noise.
    """
    bounds, rate_hz, counts = capture.segment_bounds(), capture.chain.rate_hz, capture.counts
    piece = whiten.PIECE_SAMPLES
    while piece > _SMALLEST_PIECE and not len(whiten.spread_starts(bounds, piece, 1)):
        piece //= 2
    starts = whiten.spread_starts(bounds, piece, SPECTRUM_PIECES)
    needed = max(piece, 2 * window_samples(rate_hz))
    if not len(starts) or max(last - first for first, last in bounds) < needed:
        raise InputError(
            f"{capture.name}: samples: expected a segment of at least {needed} (two windows of 20 us), found "
            f"{counts.size} in {len(bounds)} segments; record longer without gaps"
        )
    offset = whiten.record_level(counts, starts, piece)
    spectrum = whiten.noise_spectrum(counts, starts, piece)
    if not np.isfinite(spectrum).all() or spectrum.max() <= 0:
        raise InputError(f"{capture.name}: samples: expected finite values with noise, found neither; check the sensor")
    taps = whiten.whitening_filter(spectrum, FILTER_ORDER)
    scales = int(np.log2(WIDEST_BOX_S * rate_hz)) + 1
    span = NOISE_PIECE_SAMPLES if len(whiten.spread_starts(bounds, NOISE_PIECE_SAMPLES, 1)) else needed
    pieces = [
        bank.whitened(counts, taps, offset, (start, start + span), start, start + span)[FILTER_ORDER:]
        for start in whiten.spread_starts(bounds, span, NOISE_PIECES).tolist()
    ]
    noise = bank.box_noise(pieces, scales)
    if not noise.min() > 0:
        raise InputError(f"{capture.name}: no noise in the record (most samples are equal); is the sensor connected?")
    cycle_s = 1 / capture.chain.mains_hz if capture.chain.mains_hz else settings.cycle_s
    sigmas = threshold_sigmas(scales, cycle_s * rate_hz, settings.false_events_per_cycle)
    return Background(taps, offset, (sigmas * noise).astype(np.float32), float(noise[0]))


def detection_limit_counts(background: Background, rate_hz: float) -> float:
    """Peak [count] of the smallest Gaussian pulse, 50 ns wide at half height, that reaches a threshold."""
    sigma = LIMIT_PULSE_WIDTH_S * rate_hz / 2.3548200
    reach = int(8 * sigma) + 2
    pulse = np.exp(-0.5 * (np.arange(-reach, reach + 1) / sigma) ** 2)
    box = np.convolve(pulse, background.taps.astype(np.float64))
    gains = []
    for scale, limit in enumerate(background.limits):
        if scale:
            half = 1 << (scale - 1)
            box = np.convolve(box, np.concatenate([[1.0], np.zeros(half - 1), [1.0]]))
        gains.append(np.abs(box).max() / limit)
    return float(1 / max(gains))


def scanned(
    counts: NDArray[Any], background: Background, bounds: tuple[int, int], first: int, last: int
) -> tuple[WaveArray, NDArray[np.bool_]]:
    """A stretch of a segment whitened to noise of variance 1, and which of its samples leave the background.

    Parameters
    ----------
    counts : the record.
    background : of this record.
    bounds : first and one past the last sample of the segment.
    first, last : the stretch wanted, within the segment; where it is cut changes no bit of the result.

    Returns
    -------
    (last - first,) float32 whitened samples in noise levels; (last - first,) centres of box sums above threshold.
    """
    reach = (1 << (background.limits.size - 1)) - 1
    begin, end = max(first - reach, bounds[0]), min(last + reach, bounds[1])
    white = bank.whitened(counts, background.taps, background.offset, bounds, begin, end)
    inside = slice(first - begin, last - begin)
    own = white[inside] / np.float32(background.noise)
    flags = np.zeros(white.size, np.bool_)
    bank.flag_boxes(white, background.limits, flags)
    return own, flags[inside]
