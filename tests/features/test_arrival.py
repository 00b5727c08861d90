"""Delays of the first arrival against closed forms."""

import numpy as np
import pytest
from one_pulse import features_of, single
from scipy.signal import bilinear, lfilter

from pdclass.features import BY_NAME
from pdclass.features.arrival import EDGES_MHZ, behind_common_corner
from pdclass.pulses import PulseSet


def found(wave, **chain):
    """Values by name, of a pulse that nothing hides."""
    return features_of(single(wave, noise_v=1e-5, **chain))


def gaussian(sigma_s, centre_s=0.15e-6, rate_hz=100e6):
    t = np.arange(1200) / rate_hz
    return np.exp(-0.5 * ((t - centre_s) / sigma_s) ** 2)


def high_passed(wave, corner_hz, rate_hz=100e6):
    """First-order high-pass, bilinear."""
    omega = 2 * np.pi * corner_hz
    return lfilter(*bilinear([1, 0], [1, omega], rate_hz), wave)


def test_an_even_pulse_delays_no_band():
    """A Gaussian pulse, however wide, arrives at all frequencies at once; nothing but the source is wide."""
    for sigma_s in (10e-9, 25e-9):
        values = found(gaussian(sigma_s), band_hz=(0.3e6, 40e6))
        delays = [values[f"first_0p6_delay_{band}_ns"] for band in ("1p3_2p5", "2p5_4p5", "4p5_7")]
        assert np.ptp(delays) < 1.0


def test_a_one_pole_low_pass_delays_low_frequencies():
    """Behind 1/(1 + s tau) the delay falls by tau/(1 + (w tau)^2) from band to band."""
    tau = 30e-9
    t = np.arange(1200) / 100e6
    fine = np.arange(0, 12e-6, 0.5e-9)
    smooth = np.convolve(np.exp(-0.5 * ((fine - 60e-9) / 8e-9) ** 2), np.exp(-fine / tau))[: fine.size]
    values = found(np.interp(t, fine, smooth / smooth.max()), band_hz=(0.3e6, 40e6))

    def expected(low, high):
        f = np.linspace(low, high, 200) * 1e6
        weight = np.exp(-((2 * np.pi * f * 8e-9) ** 2)) / (1 + (2 * np.pi * f * tau) ** 2)
        return np.sum(weight * tau / (1 + (2 * np.pi * f * tau) ** 2)) / np.sum(weight) * 1e9

    measured = values["first_0p6_delay_1p3_2p5_ns"] - values["first_0p6_delay_7_10_ns"]
    assert measured == pytest.approx(expected(1.3, 2.5) - expected(7, 10), abs=1.5)
    assert measured > 12


def test_the_lower_corner_of_a_chain_is_made_common():
    """Behind corners of 50 and 300 kHz the same pulse keeps its features once the corners are known, else not."""
    wave = gaussian(20e-9)
    names = [name for name in BY_NAME if name.startswith("first_0p6")]
    slow, fast = (high_passed(wave, corner) for corner in (50e3, 300e3))
    known = found(slow, band_hz=(50e3, 40e6)), found(fast, band_hz=(300e3, 40e6))
    for name in names:
        one, two = (values[name] for values in known)
        assert np.isnan(one) == np.isnan(two)
        assert not abs(one - two) > BY_NAME[name].tolerance / 2, name
    told_wrong = found(slow, band_hz=(300e3, 40e6))
    wrong = abs(told_wrong["first_0p6_delay_0p1_0p5_ns"] - known[1]["first_0p6_delay_0p1_0p5_ns"])
    assert wrong > 2 * BY_NAME["first_0p6_delay_0p1_0p5_ns"].tolerance


def test_an_unknown_corner_leaves_the_wave_alone():
    """Without a lower corner nothing is done."""
    waves = np.random.default_rng(0).normal(size=(2, 2000)).astype(np.float32)
    pieces = behind_common_corner(waves, np.array([np.nan, 1e6]), 80)
    assert np.array_equal(pieces[0], waves[0, 480:560])
    assert not np.allclose(pieces[1], waves[1, 480:560])


def test_bands_join_without_gaps():
    """The bands cover the analysis band once."""
    assert list(EDGES_MHZ) == sorted(EDGES_MHZ)
    assert (EDGES_MHZ[0], EDGES_MHZ[-1]) == (0.1, 25.0)


def test_a_window_that_ends_early_has_no_delays_of_what_is_missing():
    """With 0.45 us recorded after the onset the first 0.3 us are measured, the first 0.6 us are not."""
    cut = single(gaussian(15e-9), noise_v=1e-5)
    waves = cut.waves.copy()
    waves[:, 545:] = np.nan
    values = features_of(PulseSet(waves, cut.chains, cut.table))
    assert np.isfinite(values["first_0p3_delay_2p5_4p5_ns"])
    assert np.isnan(values["first_0p6_delay_2p5_4p5_ns"])
