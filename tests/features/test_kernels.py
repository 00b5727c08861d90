"""Compiled pieces against numpy."""

import numpy as np
import pytest

from pdclass.features.kernels import lowest, median, median_size, place_of_largest, sum_of_squares


def drawn(size, seed=0):
    return np.random.default_rng(seed).normal(size=size).astype(np.float32)


@pytest.mark.parametrize("size", [1, 2, 3, 16, 459, 460])
def test_medians_are_those_of_numpy(size):
    """Exact for odd and even counts, with ties, zeros and either sign."""
    for wave in (drawn(size), np.round(drawn(size, 1)), -np.abs(drawn(size, 2)), np.zeros(size, np.float32)):
        assert median(wave) == np.median(wave.astype(np.float64))
        assert median_size(wave) == np.median(np.abs(wave).astype(np.float64))


@pytest.mark.parametrize("size", [1, 15, 16, 37, 2000])
def test_sums_and_extremes_are_those_of_numpy(size):
    """Whether the samples fill whole vectors or not."""
    wave = drawn(size)
    assert sum_of_squares(wave) == pytest.approx(np.sum(wave.astype(np.float64) ** 2), rel=1e-12)
    assert lowest(wave) == min(wave.min(), 0.0)
    assert place_of_largest(wave) == np.argmax(np.abs(wave))
