"""Energies by wavelet scale against PyWavelets."""

import numpy as np
import pytest
from one_pulse import features_of, single

from pdclass.features.scales import LEVELS, scale_gains
from pdclass.wavelets import scale_energies


def test_energies_are_those_of_the_transform_on_the_average_over_its_places():
    """PyWavelets' symlet of eight moments, averaged over all shifts of its grid, gives what the gains give."""
    rng, size = np.random.default_rng(4), 8192
    wave = np.zeros(size)
    wave[3000:3300] = rng.normal(size=300) * np.exp(-np.arange(300) / 60)
    shifted = [scale_energies(np.roll(wave, shift), LEVELS) for shift in range(2**LEVELS)]
    power = np.abs(np.fft.rfft(wave)) ** 2 * 2 / size
    power[[0, -1]] /= 2
    np.testing.assert_allclose(scale_gains(LEVELS, size // 2 + 1) @ power, np.mean(shifted, axis=0), rtol=1e-6)


def test_scales_share_the_power_without_loss():
    """What no scale takes is the coarsest approximation: at half the rate all is in the finest, at 0 nothing in any."""
    gains = scale_gains(LEVELS, 1025)
    assert gains[0, -1] == pytest.approx(1)
    assert gains[:, 0] == pytest.approx(0, abs=1e-12)
    assert gains.min() >= -1e-12
    assert gains.sum(axis=0).max() <= 1 + 1e-12


def test_a_tone_lies_on_its_scale():
    """A ringing at 4.5 MHz lies at level 4, which holds 3.1 to 6.3 MHz; at half the frequency one level higher."""
    t = np.arange(1200) / 100e6
    found = [features_of(single(np.exp(-t / 2e-6) * np.sin(2 * np.pi * f * t), noise_v=1e-4)) for f in (4.5e6, 2.25e6)]
    assert found[0]["scale_mean_level"] == pytest.approx(4.0, abs=0.3)
    assert found[1]["scale_mean_level"] - found[0]["scale_mean_level"] == pytest.approx(1.0, abs=0.15)
