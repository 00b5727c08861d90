"""What lasts in a record: its robust spectrum, and the prediction-error filter that whitens it."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import scipy.fft
from numpy.typing import NDArray

from pdclass.compiled import compiled
from pdclass.pulses import FloatArray, IntArray, WaveArray

PIECE_SAMPLES = 1024
#: A floor under the spectrum, as a share of its mean: keeps the recursion stable when a filter has emptied a band.
_FLOOR = 1e-9
#: The same for an autocorrelation with gaps, which need not be that of any spectrum: tried one after the other.
_LIFTS = (1e-6, 1e-4, 1e-2, 1.0)
#: So many deviations of the quieter samples lie within the gate; the quarter of a normal law's samples lies within
#: the other number of them.
_GATE, _QUARTER = 3.5, 0.3186394
#: What two epochs share counts where it rises by so many times more than in most bins.
_CLEAR_RISE = 1.5
_PASSES = 2
_THREE = 3
_LEAST_KEPT = 0.1
#: Every so many-th sample serves the noise level: neighbours tell nearly the same.
_COMB = 7
_SPOILT_BEFORE, _SPOILT_AFTER = 16, 48


def spread_starts(bounds: Sequence[tuple[int, int]], piece: int, count: int) -> IntArray:
    """Starts of at most `count` pieces of `piece` samples, spread evenly over the segments, none across a gap.

    They depend on the record alone, so that no block size of the later pass can change what they say.
    Segments shorter than a piece hold none.
    """
    room = [np.arange(first, last - piece + 1, piece) for first, last in bounds]
    starts = np.concatenate([np.zeros(0, np.int64), *room]).astype(np.int64)
    if len(starts) <= count:
        return starts
    return starts[np.linspace(0, len(starts) - 1, count).astype(np.int64)]


def middle_power(signals: WaveArray) -> WaveArray:
    """Lower median over tapered pieces of their periodograms, (epochs, pieces, samples) -> (epochs, bins)."""
    spectra = scipy.fft.rfft(signals)
    if signals.shape[1] == _THREE:
        return np.asarray(_middle_of_three(spectra))
    middle = (signals.shape[1] - 1) // 2
    return np.asarray(np.partition(spectra.real**2 + spectra.imag**2, middle, axis=1)[:, middle], np.float32)


@compiled
def _middle_of_three(spectra: NDArray[np.complex64]) -> WaveArray:  # pragma: no cover - compiled
    epochs, _, bins = spectra.shape
    out = np.empty((epochs, bins), np.float32)
    for row in range(epochs):
        first, second, third, line = spectra[row, 0], spectra[row, 1], spectra[row, 2], out[row]
        for i in range(bins):
            a = first[i].real * first[i].real + first[i].imag * first[i].imag
            b = second[i].real * second[i].real + second[i].imag * second[i].imag
            c = third[i].real * third[i].real + third[i].imag * third[i].imag
            # the last term lets no NaN or infinity pass unseen
            line[i] = max(min(a, b), min(max(a, b), c)) + np.float32(0.0) * (a + b + c)
    return out


def noise_spectrum(epochs: WaveArray) -> FloatArray:
    """The spectrum of everything that lasts in a stretch, whether or not it is there all the time.

    In every bin the lower median over epochs; where what two neighbouring epochs share rises above it by more than
    it does in most bins, that: a carrier that comes, goes or moves is in the filter, a pulse in one epoch is not.

    Parameters
    ----------
    epochs : (epochs, bins) robust power spectra of successive short epochs [count²].

    Returns
    -------
    (bins,) power a bin [count²].
    """
    middle = (len(epochs) - 1) // 2
    usual = np.partition(np.ascontiguousarray(epochs.T), middle, axis=1)[:, middle].astype(np.float64)
    shared = np.minimum(epochs[1:], epochs[:-1]) if len(epochs) > 1 else epochs
    rise = shared.max(axis=0) / np.maximum(usual, 1e-30)
    rise /= _CLEAR_RISE * np.median(rise)
    return np.asarray(usual * np.maximum(1.0, rise), np.float64)


def whitening_filter(spectrum: FloatArray, order: int) -> WaveArray:
    """The prediction-error filter of a power spectrum, by the Levinson recursion.

    Parameters
    ----------
    spectrum : (bins,) one-sided power spectrum.
    order : how many past samples predict the next one.

    Returns
    -------
    (order + 1,) float32 taps, the first one 1: causal, so that an onset stays where it is.

    References
    ----------
    N. Levinson, J. Math. Phys. 25, 261-278, 1946 (from memory).
    """
    return _levinson(scipy.fft.irfft(spectrum + _FLOOR * spectrum.mean())[: order + 1])[0]


@compiled
def _levinson(correlation: FloatArray) -> tuple[WaveArray, float]:  # pragma: no cover - compiled
    """The filter of an autocorrelation, and the power that it leaves (0 or less: no spectrum has that)."""
    order, left = correlation.size - 1, correlation[0]
    taps, past = np.zeros(order + 1), np.zeros(order + 1)
    taps[0] = 1.0
    for m in range(1, order + 1):
        total = correlation[m]
        for i in range(1, m):
            total += taps[i] * correlation[m - i]
        reflection = -total / left
        past[:m] = taps[:m]
        for i in range(1, m):
            taps[i] = past[i] + reflection * past[m - i]
        taps[m] = reflection
        left *= 1 - reflection * reflection
        if left <= 0:
            break
    return taps.astype(np.float32), left


def gated_filter(signals: WaveArray, taps: WaveArray, impulse: int) -> WaveArray:
    """A whitening filter for what lies between impulses, from the samples that no impulse touches.

    What stands out of the whitened signals is cut from the raw ones, with what it spoils, and the filter is fitted
    to the autocorrelation of the rest, sum(x m x' m') / sum(m m') over pairs a lag apart; again and again. The
    first filter has learnt the impulses and lets only their beginnings stand out: then `impulse` samples are cut.

    Parameters
    ----------
    signals : (pieces, samples) float32 raw pieces without their level.
    taps : (order + 1,) the filter that the impulses spoilt.
    impulse : samples that a long impulse lasts.
    """
    order, kept = taps.size - 1, np.ones(signals.shape, np.bool_)
    for after in (max(impulse, _SPOILT_AFTER), *(_SPOILT_AFTER,) * _PASSES):
        white = np.stack([np.convolve(signal, taps)[: signal.size] for signal in signals])
        fewer = kept & ~_spoilt(np.abs(white) > _GATE * quiet_level(white), after)
        if fewer.mean() < _LEAST_KEPT:
            break
        # what was cut stays cut: the filter must not learn the impulses again
        kept = fewer
        taps = _stable_predictor(_gated_correlation(signals, kept, order))
    return taps


def quiet_level(white: WaveArray) -> float:
    """Noise level of whitened samples from their quietest quarter, for signals in which much stands out."""
    return float(quiet_levels(np.abs(white[..., ::_COMB]).reshape(1, -1))[0])


def quiet_levels(heights: WaveArray) -> WaveArray:
    """(parts,) noise levels of whitened magnitudes (parts, samples), each from the quietest quarter of its own."""
    quarter = heights.shape[1] // 4
    return np.partition(heights, quarter, axis=1)[:, quarter] / np.float32(_QUARTER)


def _spoilt(out: NDArray[np.bool_], after: int) -> NDArray[np.bool_]:
    """Samples near those that stand out, (pieces, samples)."""
    count = np.cumsum(np.pad(out, ((0, 0), (after + 1, _SPOILT_BEFORE))), axis=1)
    return np.asarray(count[:, _SPOILT_BEFORE + after + 1 :] > count[:, : -_SPOILT_BEFORE - after - 1])


def _gated_correlation(signals: WaveArray, kept: NDArray[np.bool_], order: int) -> FloatArray:
    cut, one = np.where(kept, signals, 0).astype(np.float64), kept.astype(np.float64)
    size = scipy.fft.next_fast_len(signals.shape[1] + order, real=True)
    power = (np.abs(scipy.fft.rfft(cut, size)) ** 2).sum(axis=0)
    pairs = (np.abs(scipy.fft.rfft(one, size)) ** 2).sum(axis=0)
    return np.asarray((scipy.fft.irfft(power, size) / np.maximum(scipy.fft.irfft(pairs, size), 1.0))[: order + 1])


def _stable_predictor(correlation: FloatArray) -> WaveArray:
    """The filter of an autocorrelation, lifted at lag zero as little as makes it that of a possible spectrum."""
    for lift in _LIFTS:
        lifted = correlation.copy()
        lifted[0] *= 1 + lift
        taps, left = _levinson(lifted)
        if left > 0:
            break
    return taps
