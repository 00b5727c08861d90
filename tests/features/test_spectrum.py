"""Spectral features against closed forms."""

import numpy as np
import pytest
from one_pulse import features_of, single

from pdclass.features.spectrum import centroid_and_spread, rolloff

MHZ = np.arange(3, 513) * 100 / 2048


def test_a_gaussian_has_its_centroid_in_closed_form():
    """The one-sided centroid of a Gaussian pulse lies at 0.0897936/sigma and its mean square at 1/(8 pi² sigma²)."""
    sigma_us = 0.02
    fine = np.arange(0, 30, 0.001)
    centre, spread = centroid_and_spread(fine, np.exp(-((2 * np.pi * fine * sigma_us) ** 2)))
    assert centre == pytest.approx(0.0897936 / sigma_us, rel=1e-3)
    assert spread == pytest.approx(np.sqrt(1 / (8 * np.pi**2) - 0.0897936**2) / sigma_us, rel=1e-3)


def test_the_rolloff_of_an_even_spectrum_is_its_share():
    """Where every bin holds as much, 85 % of the power lies below 85 % of the way."""
    assert rolloff(MHZ, np.ones(MHZ.size), 0.85) == pytest.approx(MHZ[0] + 0.85 * np.ptp(MHZ), abs=MHZ[1] - MHZ[0])


def test_nothing_is_said_without_power():
    """Where noise outweighs the signal there is no centre, no spread and no rolloff."""
    negative = np.full(MHZ.size, -1.0)
    assert np.isnan(centroid_and_spread(MHZ, negative)).all()
    assert np.isnan(rolloff(MHZ, negative, 0.95))


def test_noise_cancels_from_the_band_shares():
    """The noise is subtracted with its sign: the median share of a slow pulse at 20 dB is that without noise."""
    wave = np.exp(-0.5 * ((np.arange(600) - 60) / 15) ** 2)
    clear = features_of(single(wave, noise_v=1e-5))
    noisy = [features_of(single(wave, noise_v=0.05, seed=seed)) for seed in range(15)]
    for name in ("share_0p1_1_mhz", "share_1_3_mhz"):
        assert np.median([values[name] for values in noisy]) == pytest.approx(clear[name], abs=0.02)
