"""First arrival: which frequencies of a pulse come late, before any echo can.

A path along a cable takes away the high frequencies and delays the low ones (its losses are minimum-phase); a wide,
even source takes away the high ones and delays nothing. A near end that rings holds its own frequency back.
"""

from __future__ import annotations

from itertools import pairwise

import numba
import numpy as np

from pdclass.features.feature import Feature
from pdclass.features.kernels import sum_between, weighed
from pdclass.features.window import ANALYSIS_RATE_HZ, GUARD, ONSET, STEP_NS, Windows
from pdclass.pulses import FloatArray, IntArray, WaveArray

_njit = numba.njit(cache=True, nogil=True)

EDGES_MHZ = (0.1, 0.5, 1.3, 2.5, 4.5, 7.0, 10.0, 13.5, 18.0, 25.0)
#: Length of the first arrival [us], over how much of its end it fades out [samples], and its bands.
LENGTHS = ((0.3, 14, (EDGES_MHZ[0], *EDGES_MHZ[2:])), (0.6, 24, EDGES_MHZ))
#: Every chain's lower corner is moved to this one: the tail then tells of the pulse and not of the transformer.
COMMON_LOW_HZ = 0.3e6
_FFT = 2048
#: A band has so many times the noise's power and this share of the strongest band, else its delay is chance.
_CLEAR, _SHARE = 6.0, 3e-3
_LONGEST_NS = 2000.0


def measure_arrival(windows: Windows) -> FloatArray:
    """The features of this family, (pulses, features): NaN where a band does not stand out of the noise.

    Where the noise is unknown, or fewer samples were recorded than the arrival is long, nothing is measured.
    """
    found = np.full((len(windows), len(ARRIVAL)), np.nan)
    column = 0
    for length_us, fade, edges in LENGTHS:
        samples = GUARD + round(length_us * ANALYSIS_RATE_HZ / 1e6)
        bands = found[:, column : column + len(edges) - 1]
        _delays_into(
            bands,
            windows.wave,
            windows.last,
            windows.noise,
            windows.noise_power,
            windows.end,
            windows.low_hz,
            fade_out(samples, fade),
            np.array(first_bins(edges, _FFT)),
            cosine_means(first_bins(edges, _FFT), _FFT, samples),
        )
        column += len(edges) - 1
    return found


def fade_out(samples: int, fade: int) -> FloatArray:
    """Ones, (samples,), of which the last `fade` fall as a raised cosine."""
    weights = np.ones(samples)
    weights[samples - fade :] = 0.5 + 0.5 * np.cos(np.pi * (np.arange(fade) + 0.5) / fade)
    return weights


def first_bins(edges_mhz: tuple[float, ...], size: int) -> tuple[int, ...]:
    """First bin of each band of a transform of `size` samples, and one past the last bin."""
    return tuple(int(np.ceil(edge * 1e6 * size / ANALYSIS_RATE_HZ)) for edge in edges_mhz)


def cosine_means(starts: tuple[int, ...], size: int, lags: int) -> FloatArray:
    """What a correlation is weighed with to give the mean of its spectrum over each band, (bands, lags).

    The power of a short wave at bin k is r(0) + 2 sum_l r(l) cos(2 pi k l/size) with its autocorrelation r: band
    means need no transform (N. Wiener, A. Khintchine).
    """
    angle = 2 * np.pi / size * np.outer(np.arange(starts[0], starts[-1]), np.arange(lags))
    waves = np.where(np.arange(lags) > 0, 2.0, 1.0) * np.cos(angle)
    return np.array([waves[low - starts[0] : high - starts[0]].mean(axis=0) for low, high in pairwise(starts)])


@_njit
def begin_behind_common_corner(
    wave: WaveArray, low_hz: float, piece: FloatArray
) -> None:  # pragma: no cover - compiled
    """Write the wave from `ONSET - GUARD` on as if the chain's first-order lower corner lay at 0.3 MHz.

    Unchanged where the corner is unknown. (s + a)/(s + b) as a recursion whose integral is trapezoidal: within 0.2 %
    of it below 25 MHz. Nothing is amplified but what lies below a corner above 0.3 MHz, at most by their ratio.
    """
    start = ONSET - GUARD
    for i in range(piece.size):
        piece[i] = wave[start + i]
    if not low_hz > 0:
        return
    per_sample = 2 * np.pi / ANALYSIS_RATE_HZ
    gain, decay = per_sample * (low_hz - COMMON_LOW_HZ), np.exp(-per_sample * COMMON_LOW_HZ)
    past = 0.0
    for i in range(start):
        past = wave[i] + decay * past
    for i in range(piece.size):
        past = piece[i] + decay * past
        piece[i] += gain * (past - 0.5 * piece[i])


@_njit
def noise_behind_common_corner(
    power: WaveArray, scale: float, low_hz: float, out: FloatArray
) -> None:  # pragma: no cover - compiled
    """Write a noise spectrum times `scale` as it is behind the common corner, up to the bins of `out`."""
    step_hz = ANALYSIS_RATE_HZ / (2 * (power.size - 1))
    if not low_hz > 0:
        for k in range(out.size):
            out[k] = power[k] * scale
        return
    for k in range(out.size):
        square = (k * step_hz) ** 2
        out[k] = power[k] * scale * (square + low_hz**2) / (square + COMMON_LOW_HZ**2)


@_njit
def correlate_into(piece: FloatArray, lags: FloatArray) -> None:  # pragma: no cover - compiled
    """Write the autocorrelation of a piece, as many lags as it has samples."""
    lags[:] = 0.0
    for n in range(piece.size):
        value, later = piece[n], piece[n:]
        for lag in range(later.size):
            lags[lag] += value * later[lag]


@_njit
def _moments_into(piece: FloatArray, moments: FloatArray) -> None:  # pragma: no cover - compiled
    """Write sum_n x(n) x(n + lag) (n + lag/2): its cosine transform is Re(X* Y), Y the transform of n x(n)."""
    moments[:] = 0.0
    for n in range(piece.size):
        value, later = piece[n], piece[n:]
        for lag in range(later.size):
            moments[lag] += value * (n + 0.5 * lag) * later[lag]


@_njit
def _delays_into(
    found: FloatArray,
    waves: WaveArray,
    last: IntArray,
    noise: FloatArray,
    noise_power: WaveArray,
    end: IntArray,
    low_hz: FloatArray,
    fade: FloatArray,
    starts: IntArray,
    weights: FloatArray,
) -> None:  # pragma: no cover - compiled
    """Write delays by band against the centre of the energy [ns], pulse by pulse.

    The delay of a band is that of its energy, Re(X* Y)/|X|² with Y the transform of t x(t): no phase is unwrapped.
    """
    bands, samples = weights.shape
    piece, lags, moments = np.empty(samples), np.empty(samples), np.empty(samples)
    density, strength, late = np.empty(starts[-1]), np.empty(bands), np.empty(bands)
    energy = np.sum(fade**2)
    for row in range(len(waves)):
        if not noise[row] > 0 or last[row] < ONSET - GUARD + samples:
            continue
        begin_behind_common_corner(waves[row], low_hz[row], piece)
        piece *= fade
        correlate_into(piece, lags)
        _moments_into(piece, moments)
        scale = energy / (end[row] - ONSET + GUARD)
        noise_behind_common_corner(noise_power[row], scale, low_hz[row], density)
        total, centre = 0.0, 0.0
        for band in range(bands):
            width = starts[band + 1] - starts[band]
            strength[band], late[band] = weighed(lags, weights[band]), weighed(moments, weights[band])
            total += width * strength[band]
            centre += width * late[band]
        floor = _SHARE * strength.max()
        for band in range(bands):
            hidden = _CLEAR * sum_between(density, starts[band], starts[band + 1]) / (starts[band + 1] - starts[band])
            if strength[band] > max(hidden, floor):
                found[row, band] = (late[band] / strength[band] - centre / total) * STEP_NS


def _name(length_us: float, low: float, high: float) -> str:
    return f"first_{length_us:g}_delay_{low:g}_{high:g}_ns".replace(".", "p")


def _delay(length_us: float, low: float, high: float) -> Feature:
    return Feature(
        _name(length_us, low, high),
        "ns",
        f"delay of the energy between {low:g} and {high:g} MHz in the first {length_us:g} µs against its centre",
        f"delay at {low:g}-{high:g} MHz {{value}}",
        "later",
        "earlier",
        (-_LONGEST_NS, _LONGEST_NS),
        20.0,
        "group delay by the transform of t x(t) (A. V. Oppenheim, R. W. Schafer, 1989, from memory)",
        needs_hz=0.8 * high * 1e6,
        needs_snr_db=6.0,
    )


ARRIVAL = tuple(_delay(length_us, *band) for length_us, _, edges in LENGTHS for band in pairwise(edges))
