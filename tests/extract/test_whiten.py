"""The whitening filter makes noise white, keeps onsets in place and is found from the record alone."""

import numpy as np
import pytest
from closed_form import background

from pdclass.extract.bank import SUB_BLOCK, dither_table, gathered, padded, whiten_into
from pdclass.extract.whiten import (
    PIECE_SAMPLES,
    gated_filter,
    middle_power,
    noise_spectrum,
    quiet_level,
    spread_starts,
    whitening_filter,
)


def whitened(counts, taps, level, bounds, first, last):
    """Samples `first` to `last` of a segment through one filter."""
    taps, out = padded(taps), np.empty(last - first, np.float32)
    raw, grid = np.empty(SUB_BLOCK + taps.size, np.float32), (1 << 62, 1, 0, 1)
    unbent, table = np.ones(1, np.float32), dither_table(counts)
    whiten_into(counts, table, level, taps[None], unbent, grid, bounds, first, raw, out)
    return out


def spectrum_of(signal, pieces=3):
    """The robust spectrum of a signal in epochs of three pieces."""
    starts = spread_starts([(0, signal.size)], PIECE_SAMPLES, 240)
    starts = starts[: starts.size // pieces * pieces]
    taken = gathered(signal, starts, 0.0, np.hanning(PIECE_SAMPLES).astype(np.float32))
    return noise_spectrum(middle_power(taken.reshape(-1, pieces, PIECE_SAMPLES)))


def autoregressive(samples, seed=1):
    """Noise x[n] = 1.5 x[n-1] - 0.9 x[n-2] + e."""
    rng = np.random.default_rng(seed)
    noise, drive = np.zeros(samples), rng.normal(0, 1, samples)
    for n in range(2, samples):
        noise[n] = 1.5 * noise[n - 1] - 0.9 * noise[n - 2] + drive[n]
    return noise


def test_autoregressive_noise_gets_its_own_coefficients_back():
    """For noise x[n] = 1.5 x[n-1] - 0.9 x[n-2] + e the filter is 1, -1.5, 0.9 (Yule-Walker)."""
    assert whitening_filter(spectrum_of(autoregressive(400_000)), 2) == pytest.approx([1, -1.5, 0.9], abs=0.03)


def test_carriers_are_gone_after_whitening():
    """A record ruled by carriers has, whitened, hardly more power than its white noise alone."""
    signal = background(np.random.default_rng(2), 400_000)
    taps = whitening_filter(spectrum_of(signal), 63)
    assert signal.std() > 2.2 * 20
    assert whitened(signal, taps, 0.0, (0, signal.size), 1000, 100_000).std() < 1.1 * 20


def test_a_carrier_that_is_there_a_tenth_of_the_time_is_in_the_filter():
    """Noise with a carrier in a tenth of it is whitened there too; a median alone would not know of it."""
    rng = np.random.default_rng(3)
    signal = rng.normal(0, 20, 400_000)
    inside = slice(200_000, 240_000)
    signal[inside] += 200 * np.cos(2 * np.pi * 0.3e6 * np.arange(40_000) / 100e6)
    taps = whitening_filter(spectrum_of(signal), 63)
    assert whitened(signal, taps, 0.0, (0, signal.size), 205_000, 235_000).std() < 1.3 * 20


@pytest.mark.parametrize("pieces", [1, 2, 3, 4, 7])
def test_the_power_is_the_lower_median_over_pieces(pieces):
    """However many pieces, it is the lower median of their periodograms, bin by bin."""
    signals = np.random.default_rng(4).normal(0, 1, (5, pieces, 64)).astype(np.float32)
    expected = np.sort(np.abs(np.fft.rfft(signals)) ** 2, axis=1)[:, (pieces - 1) // 2]
    assert middle_power(signals) == pytest.approx(expected, rel=1e-3)


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_what_is_no_number_passes_into_the_spectrum(bad):
    """A sample that is no number makes the spectrum of its epoch not finite, so that it can be refused."""
    signals = np.ones((2, 3, 64), np.float32)
    signals[1, 1, 5] = bad
    with np.errstate(invalid="ignore"):
        assert [bool(np.isfinite(row).all()) for row in middle_power(signals)] == [True, False]


def test_impulses_do_not_teach_the_filter():
    """Noise under rings of 5 MHz every 10 us gets the filter that it has without them."""
    rng = np.random.default_rng(5)
    noise, t = 20 * autoregressive(8 * 4096, seed=5), np.arange(300) / 100e6
    signal = noise.copy()
    for start in range(0, signal.size - 300, 1000):
        ring = np.exp(-t / 1e-6) * np.sin(2 * np.pi * 5e6 * t + rng.uniform(0, 6))
        signal[start : start + 300] += 8000 * rng.uniform(0.7, 1.3) * ring
    pieces = signal.astype(np.float32).reshape(8, 4096)
    spoilt = whitening_filter(spectrum_of(signal), 63)
    quiet = gated_filter(pieces, spoilt, 200)
    own = whitening_filter(spectrum_of(noise), 63)

    def level(taps):
        return whitened(noise.astype(np.float32), taps, 0.0, (0, noise.size), 100, noise.size).std()

    assert level(spoilt) > 1.5 * level(own)
    assert level(quiet) < 1.2 * level(own)


def test_the_quiet_level_is_that_of_the_noise():
    """A fifth of the samples standing out moves the level by a fifth, not by their height."""
    white = np.random.default_rng(6).normal(0, 1, 50_000).astype(np.float32)
    assert quiet_level(white) == pytest.approx(1, rel=0.03)
    white[::5] = 1000
    assert 1 < quiet_level(white[:-1]) < 1.4


def test_nothing_moves_before_its_onset():
    """The filter is causal: a step leaves everything before it at zero."""
    taps = np.array([1, -0.5, 0.25], np.float32)
    step = np.zeros(100, np.float32)
    step[50:] = 1
    out = whitened(step, taps, 0.0, (0, 100), 0, 100)
    assert not out[:50].any()
    assert out[50:54] == pytest.approx([1, 0.5, 0.75, 0.75])


def test_pieces_never_cross_a_gap():
    """Pieces lie inside one segment each, however short the segments are."""
    bounds = [(0, 10_000), (10_000, 10_100), (10_100, 30_000)]
    starts = spread_starts(bounds, 4096, 100)
    assert all(any(first <= s and s + 4096 <= last for first, last in bounds) for s in starts)
    assert len(starts) == 6
