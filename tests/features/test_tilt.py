"""Levels, tilts and dispersion of the first arrival against limits."""

from itertools import pairwise

import numpy as np
import pytest
from one_pulse import features_of, single
from scipy.signal import bilinear, lfilter

from pdclass.features.tilt import EDGES_MHZ, slopes


def found(wave, **chain):
    """Values by name, of a pulse that nothing hides."""
    return features_of(single(wave, noise_v=1e-5, duration_us=12.0, **chain))


def gaussian(sigma_s, centre_s=0.15e-6):
    return np.exp(-0.5 * ((np.arange(1400) / 100e6 - centre_s) / sigma_s) ** 2)


def test_both_slopes_of_a_plane_are_found():
    """Level = 3 - 2 x + 0.5 z comes back whatever the weights; where x and z are one, there is no answer."""
    rng = np.random.default_rng(1)
    z = np.linspace(1, 16, 30)
    x = np.sqrt(z)
    one, other = slopes(x, z, 3 - 2 * x + 0.5 * z, rng.uniform(0.1, 2, 30))
    assert one == pytest.approx(-2, rel=1e-9)
    assert other == pytest.approx(0.5, rel=1e-9)
    assert np.isnan(slopes(x, x, x, np.ones(30))[0])


def test_a_narrow_even_pulse_has_no_tilt_and_no_dispersion():
    """A Gaussian of 4 ns is flat within the fit and comes at one time: all three are next to nothing."""
    values = found(gaussian(4e-9), band_hz=None)
    assert abs(values["first_root_tilt_db"]) < 0.5
    assert abs(values["first_straight_tilt_db"]) < 0.2
    assert abs(values["first_dispersion_ns"]) < 1.0


def test_a_wide_even_pulse_tilts_and_does_not_disperse():
    """A Gaussian of 25 ns has lost its high frequencies as a long cable does, but all come at once."""
    values = found(gaussian(25e-9), band_hz=None)
    assert values["first_1p2_level_10_13p5_db"] < values["first_1p2_level_2p5_4p5_db"] - 5
    assert abs(values["first_dispersion_ns"]) < 1.0


def test_levels_are_those_of_the_spectrum():
    """Levels of a Gaussian differ from band to band as exp(-(2 pi f sigma)^2) does, averaged over the band."""
    sigma, step = 12e-9, 1 / 64
    values = found(gaussian(sigma), band_hz=None)
    pairs = list(pairwise(EDGES_MHZ))[1:6]
    f = [np.arange(low, high, step) * 1e6 for low, high in pairs]
    # sigma and the Gaussian of the analysis band, -3 dB at 25 MHz
    expected = [10 * np.log10(np.mean(np.exp(-((2 * np.pi * each * sigma) ** 2 + np.log(2) * (each / 25e6) ** 2))))
                for each in f]  # fmt: skip
    levels = [values[f"first_1p2_level_{low:g}_{high:g}_db".replace(".", "p")] for low, high in pairs]
    np.testing.assert_allclose(np.diff(levels), np.diff(expected), atol=0.5)


@pytest.mark.parametrize("corner_hz", [0.05e6, 1e6])
def test_the_lower_corner_of_the_chain_does_not_pass_for_dispersion(corner_hz):
    """The same pulse behind chains that begin at 0.05, at 0.3 and at 1 MHz has the same tilts and dispersion."""
    one, other = (
        found(lfilter(*bilinear([1, 0], [1, 2 * np.pi * low_hz], 100e6), gaussian(10e-9)), band_hz=(low_hz, 40e6))
        for low_hz in (corner_hz, 0.3e6)
    )
    for name, much in (("first_root_tilt_db", 0.02), ("first_straight_tilt_db", 0.01), ("first_dispersion_ns", 0.1)):
        assert one[name] == pytest.approx(other[name], abs=much)


def test_what_the_noise_hides_is_unmeasurable():
    """Far above a slow pulse there is only noise: the level there is NaN, that at 1.3-2.5 MHz is not."""
    values = features_of(single(gaussian(60e-9), noise_v=0.03, duration_us=3.0))
    assert np.isnan(values["first_1p2_level_13p5_18_db"])
    assert np.isfinite(values["first_1p2_level_1p3_2p5_db"])


def test_a_window_without_noise_or_with_too_few_samples_is_unmeasurable():
    """What was recorded must reach to the end of the first arrival."""
    cut = single(gaussian(10e-9))
    cut.waves[:, 600:] = np.nan
    assert np.isnan(features_of(cut)["first_root_tilt_db"])
