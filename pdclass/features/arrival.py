"""First arrival: which frequencies of a pulse come late, before any echo can.

A path along a cable takes away the high frequencies and delays the low ones (its losses are minimum-phase); a wide,
even source takes away the high ones and delays nothing. A near end that rings holds its own frequency back.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.features.feature import Feature
from pdclass.features.kernels import weighed
from pdclass.features.window import ANALYSIS_RATE_HZ, GUARD, ONSET, STEP_NS, Windows
from pdclass.pulses import FloatArray, IntArray, WaveArray

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
    pieces = behind_common_corner(windows.wave, windows.low_hz, GUARD + _samples(LENGTHS[-1][0]))
    floors = _floors(windows.noise_power, windows.low_hz, np.array(first_bins(EDGES_MHZ, _FFT)))
    floors /= (windows.end - ONSET + GUARD)[:, None]
    known = windows.noise > 0
    found = [_delays(pieces, floors, known, windows.last, *length) for length in LENGTHS]
    return np.concatenate(found, axis=1)


def _samples(length_us: float) -> int:
    return round(length_us * ANALYSIS_RATE_HZ / 1e6)


def _delays(
    pieces: FloatArray,
    floors: FloatArray,
    known: NDArray[np.bool_],
    last: IntArray,
    length_us: float,
    fade: int,
    edges: tuple[float, ...],
) -> FloatArray:
    """Delays by band of arrivals of one length [ns], (pulses, bands); `floors` sum over each band of `EDGES_MHZ`."""
    found = np.full((len(pieces), len(edges) - 1), np.nan)
    usable = np.flatnonzero(known & (last >= ONSET + _samples(length_us)))
    joined = np.add.reduceat(floors, [EDGES_MHZ.index(edge) for edge in edges[:-1]], axis=1)
    starts, samples = first_bins(edges, _FFT), GUARD + _samples(length_us)
    weights = np.ascontiguousarray(cosine_means(starts, _FFT, samples).T)
    _delays_into(found, usable, pieces, joined, fade_out(samples, fade), np.diff(starts).astype(np.float64), weights)
    return found


def fade_out(samples: int, fade: int) -> FloatArray:
    """Ones, (samples,), of which the last `fade` fall as a raised cosine."""
    weights = np.ones(samples)
    weights[samples - fade :] = 0.5 + 0.5 * np.cos(np.pi * (np.arange(fade) + 0.5) / fade)
    return weights


def first_bins(edges_mhz: tuple[float, ...], size: int) -> tuple[int, ...]:
    """First bin of each band of a transform of `size` samples, and one past the last bin."""
    return tuple(int(np.ceil(edge * 1e6 * size / ANALYSIS_RATE_HZ)) for edge in edges_mhz)


@lru_cache(maxsize=8)
def cosine_means(starts: tuple[int, ...], size: int, lags: int) -> FloatArray:
    """What a correlation is weighed with to give the mean of its spectrum over each band, (bands, lags).

    The power of a short wave at bin k is r(0) + 2 sum_l r(l) cos(2 pi k l/size) with its autocorrelation r: band
    means need no transform (N. Wiener, A. Khintchine).
    """
    angle = 2 * np.pi / size * np.outer(np.arange(starts[0], starts[-1]), np.arange(lags))
    waves = np.where(np.arange(lags) > 0, 2.0, 1.0) * np.cos(angle)
    return np.array([waves[low - starts[0] : high - starts[0]].mean(axis=0) for low, high in pairwise(starts)])


@compiled
def behind_common_corner(
    waves: WaveArray, low_hz: FloatArray, samples: int
) -> FloatArray:  # pragma: no cover - compiled
    """Waves from `ONSET - GUARD` on as if each chain's first-order lower corner lay at 0.3 MHz, (pulses, samples).

    Unchanged where the corner is unknown. (s + a)/(s + b) as a recursion whose integral is trapezoidal: within 0.2 %
    of it below 25 MHz. Nothing is amplified but what lies below a corner above 0.3 MHz, at most by their ratio.
    """
    start = ONSET - GUARD
    turn = 2 * np.pi / ANALYSIS_RATE_HZ
    decay = np.exp(-turn * COMMON_LOW_HZ)
    fading = decay ** np.arange(start - 1.0, -1.0, -1.0)
    pieces = np.empty((len(waves), samples))
    for row in range(len(waves)):
        pieces[row] = waves[row, start : start + samples]
        if not low_hz[row] > 0:
            continue
        gain, past = turn * (low_hz[row] - COMMON_LOW_HZ), weighed(waves[row, :start], fading)
        for i in range(samples):
            past = pieces[row, i] + decay * past
            pieces[row, i] += gain * (past - 0.5 * pieces[row, i])
    return pieces


@compiled
def _floors(powers: WaveArray, low_hz: FloatArray, starts: IntArray) -> FloatArray:  # pragma: no cover - compiled
    """Noise power as it is behind the common corner, summed over each band, (pulses, bands)."""
    hz = np.arange(starts[-1]) * ANALYSIS_RATE_HZ / _FFT
    share = 1 / (hz**2 + COMMON_LOW_HZ**2)
    sums, moved = np.empty((len(powers), starts.size - 1)), np.empty(hz.size)
    for row in range(len(powers)):
        change = low_hz[row] ** 2 - COMMON_LOW_HZ**2 if low_hz[row] > 0 else 0.0
        for k in range(hz.size):
            moved[k] = powers[row, k] * (1 + change * share[k])
        for band in range(starts.size - 1):
            sums[row, band] = _added(moved[starts[band] : starts[band + 1]])
    return sums


@compiled
def _added(values: FloatArray) -> float:  # pragma: no cover - compiled
    """Sum of a few values, in four sums side by side."""
    a, b, c, d, whole = 0.0, 0.0, 0.0, 0.0, values.size // 4 * 4
    for k in range(0, whole, 4):
        a, b, c, d = a + values[k], b + values[k + 1], c + values[k + 2], d + values[k + 3]
    for k in range(whole, values.size):
        a += values[k]
    return a + b + (c + d)


@compiled
def correlate_into(early: FloatArray, late: FloatArray, lags: FloatArray) -> None:  # pragma: no cover - compiled
    """Write sum_n early(n) late(n + lag) for each lag, four terms at a time so that the lags fill vectors.

    `late` goes on with zeros: it holds three samples more than `early` and `lags` together, `early` a multiple of four.
    """
    lags[:] = 0.0
    for n in range(0, early.size, 4):
        a, b, c, d = early[n], early[n + 1], early[n + 2], early[n + 3]
        first, second, third, fourth = late[n:], late[n + 1 :], late[n + 2 :], late[n + 3 :]
        for lag in range(lags.size):
            lags[lag] += a * first[lag] + b * second[lag] + (c * third[lag] + d * fourth[lag])


@compiled
def band_means_into(lags: FloatArray, weights: FloatArray, means: FloatArray) -> None:  # pragma: no cover - compiled
    """Write the mean over each band of the spectrum of a correlation; `weights` (lags, bands) as of `cosine_means`."""
    means[:] = 0.0
    for lag in range(lags.size):
        for band in range(means.size):
            means[band] += lags[lag] * weights[lag, band]


@compiled
def _delays_into(
    found: FloatArray,
    usable: IntArray,
    pieces: FloatArray,
    floors: FloatArray,
    fade: FloatArray,
    widths: FloatArray,
    weights: FloatArray,
) -> None:  # pragma: no cover - compiled
    """Write delays by band against the centre of the energy [ns], pulse by pulse.

    The delay of a band is that of its energy, Re(X* Y)/|X|² with Y the transform of t x(t): no phase is unwrapped.
    Re(X* Y) is the cosine transform of sum_n x(n) x(n + lag) (n + lag/2).
    """
    samples, bands = weights.shape
    early, moment = np.zeros((samples + 3) // 4 * 4), np.zeros((samples + 3) // 4 * 4)
    late, lags, moments = np.zeros(early.size + samples + 3), np.empty(samples), np.empty(samples)
    strength, delayed, energy = np.empty(bands), np.empty(bands), np.sum(fade**2)
    for row in usable:
        for i in range(samples):
            early[i] = pieces[row, i] * fade[i]
            late[i], moment[i] = early[i], i * early[i]
        correlate_into(early, late, lags)
        correlate_into(moment, late, moments)
        for lag in range(samples):
            moments[lag] += 0.5 * lag * lags[lag]
        band_means_into(lags, weights, strength)
        band_means_into(moments, weights, delayed)
        total, centre, hidden = 0.0, 0.0, _SHARE * strength.max()
        for band in range(bands):
            total, centre = total + widths[band] * strength[band], centre + widths[band] * delayed[band]
        for band in range(bands):
            if strength[band] > max(_CLEAR * energy * floors[row, band] / widths[band], hidden):
                found[row, band] = (delayed[band] / strength[band] - centre / total) * STEP_NS


def _name(length_us: float, low: float, high: float) -> str:
    return f"first_{length_us:g}_delay_{low:g}_{high:g}_ns".replace(".", "p")


def _delay(length_us: float, low: float, high: float) -> Feature:
    return Feature(
        _name(length_us, low, high),
        "ns",
        f"delay of the energy between {low:g} and {high:g} MHz in the first {length_us:g} µs against the mean",
        f"delay at {low:g}-{high:g} MHz in the first {length_us:g} µs is {{value}}",
        "later",
        "earlier",
        (-_LONGEST_NS, _LONGEST_NS),
        20.0,
        "group delay by the transform of t x(t) (A. V. Oppenheim, R. W. Schafer, 1989, from memory)",
        needs_hz=0.8 * high * 1e6,
        needs_snr_db=6.0,
        absent="too little power in this band",
        below_zero="ahead of the mean",
        edition=2,
    )


ARRIVAL = tuple(_delay(length_us, *band) for length_us, _, edges in LENGTHS for band in pairwise(edges))
