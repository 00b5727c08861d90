"""The whitening filter makes noise white, keeps onsets in place and is found from the record alone."""

import numpy as np
import pytest
from closed_form import background

from pdclass.extract.bank import whitened
from pdclass.extract.whiten import noise_spectrum, spread_starts, whitening_filter


def test_autoregressive_noise_gets_its_own_coefficients_back():
    """For noise x[n] = 1.5 x[n-1] - 0.9 x[n-2] + e the filter is 1, -1.5, 0.9 (Yule-Walker)."""
    rng = np.random.default_rng(1)
    noise = np.zeros(400_000)
    drive = rng.normal(0, 1, noise.size)
    for n in range(2, noise.size):
        noise[n] = 1.5 * noise[n - 1] - 0.9 * noise[n - 2] + drive[n]
    spectrum = noise_spectrum(noise, spread_starts([(0, noise.size)], 4096, 80))
    assert whitening_filter(spectrum, 2) == pytest.approx([1, -1.5, 0.9], abs=0.03)


def test_carriers_are_gone_after_whitening():
    """A record ruled by carriers has, whitened, hardly more power than its white noise alone."""
    signal = background(np.random.default_rng(2), 400_000)
    taps = whitening_filter(noise_spectrum(signal, spread_starts([(0, signal.size)], 4096, 80)), 64)
    assert signal.std() > 2.2 * 20
    assert whitened(signal, taps, 0.0, (0, signal.size), 1000, 100_000).std() < 1.1 * 20


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
