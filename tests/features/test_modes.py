"""What the family of modes finds in pulses that ring and in pulses that do not."""

import numpy as np
import pytest
from closed_form import damped_sine, double_exponential
from one_pulse import features_of, single

from pdclass.features.modes import oscillations, poles

T_S = np.arange(256) / 100e6


def test_a_ringing_pulse_tells_its_frequency_and_quality():
    """A damped sine of 7 MHz and 0.4 us rings at 7 MHz with Q = pi f tau = 8.8, and hardly anything else is there."""
    found = features_of(single(damped_sine(7e6, 0.4e-6, 100e6, 12e-6)))
    assert found["mode_mhz"] == pytest.approx(7.0, abs=0.02)
    assert found["mode_q"] == pytest.approx(8.80, rel=0.02)
    assert found["mode_share"] > 0.99


def test_a_pulse_that_does_not_ring_has_no_frequency():
    """After a double exponential the share of ringing is next to nothing, and frequency and quality are NaN."""
    found = features_of(single(double_exponential(10e-9, 50e-9, 100e6, 12e-6)))
    assert found["mode_share"] < 0.01
    assert np.isnan(found["mode_mhz"])
    assert np.isnan(found["mode_q"])


def test_noise_moves_frequency_and_quality_little():
    """At 30 dB, and still at 20 dB, frequency and quality of a damped sine stay within 1 and 10 %."""
    for noise_v in (0.03, 0.1):
        many = [
            features_of(single(damped_sine(3e6, 1.5e-6, 100e6, 12e-6), noise_v=noise_v, seed=seed)) for seed in range(8)
        ]
        assert np.median([found["mode_mhz"] for found in many]) == pytest.approx(3.0, rel=0.01)
        assert np.median([found["mode_q"] for found in many]) == pytest.approx(14.14, rel=0.1)


def test_two_modes_come_in_the_order_of_their_energy():
    """Of two damped sines the one with more energy comes first."""
    weak, strong = 0.4 * np.sin(2 * np.pi * 9e6 * T_S), np.sin(2 * np.pi * 2e6 * T_S)
    first, second = oscillations((weak + strong) * np.exp(-T_S / 0.8e-6), 100e6)[:2]
    assert first.frequency_hz == pytest.approx(2e6, rel=1e-6)
    assert second.frequency_hz == pytest.approx(9e6, rel=1e-6)


def test_real_exponentials_are_poles_on_the_real_axis():
    """Two decays without swing give two real poles, exp(-step/tau), and no oscillation of any weight."""
    wave = np.exp(-T_S / 50e-9) - np.exp(-T_S / 0.5e-6)
    found = poles(wave, order=2)
    np.testing.assert_allclose(np.sort(found.real), np.exp(-10e-9 / np.array([50e-9, 0.5e-6])), rtol=1e-6)
    assert all(mode.share < 1e-9 for mode in oscillations(wave, 100e6))


def test_too_little_after_the_peak_is_unmeasurable():
    """With half a microsecond of own samples there is nothing to fit eight exponentials to."""
    found = features_of(single(damped_sine(7e6, 0.4e-6, 100e6, 12e-6), duration_us=0.5))
    assert np.isnan(found["mode_share"])
