"""Transforms of many waves at once."""

import numpy as np
import pytest

from pdclass.features.transforms import spectra, waves_of

WAVES = np.random.default_rng(0).normal(size=(128, 2000)).astype(np.float32)


@pytest.mark.parametrize("size", [2000, 2048])
@pytest.mark.parametrize("count", [1, 2, 3, 127, 128])
def test_a_row_has_the_same_bits_in_any_batch(size, count):
    """Alone, in any place and in any company."""
    whole = spectra(WAVES, size)
    back = waves_of(whole, size)
    for first in {0, 1, 5} & set(range(129 - count)) or {0}:
        assert np.array_equal(spectra(WAVES[first : first + count], size), whole[first : first + count])
        assert np.array_equal(waves_of(whole[first : first + count], size), back[first : first + count])


def test_back_and_forth_is_the_same_wave():
    """And the spectrum is that of numpy in double precision, to single precision."""
    np.testing.assert_allclose(waves_of(spectra(WAVES, 2048), 2048)[:, :2000], WAVES, atol=1e-5)
    np.testing.assert_allclose(spectra(WAVES, 2048), np.fft.rfft(WAVES.astype(np.float64), 2048), atol=2e-4)
