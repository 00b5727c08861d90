"""Carriers, noise and switching instants are what they say."""

import numpy as np
import pytest

from pdclass.sim.interference import (
    Background,
    Carrier,
    background_wave,
    carrier_wave,
    draw_carrier,
    medium_wave_hz,
    switching_times,
)

RATE_HZ = 100e6
PLAIN = Carrier(909e3, 2.0, 0.0, 0.25, (1000.0,), ((1.0, 0.0),))


def test_medium_wave_raster():
    """120 channels from 531 to 1602 kHz, multiples of 9 kHz."""
    channels = [medium_wave_hz(channel) for channel in range(120)]
    assert (channels[0], channels[-1]) == (531e3, 1602e3)
    assert all(hz % 9e3 == 0 for hz in channels)


def test_an_unmodulated_carrier_is_a_cosine():
    """Without modulation a carrier is the exact cosine of its frequency, phase and height."""
    wave = carrier_wave(PLAIN, 0, 100_001, RATE_HZ)
    time_s = np.arange(100_001) / RATE_HZ
    assert np.abs(wave - 2 * np.cos(2 * np.pi * (909e3 * time_s + 0.25))).max() < 1e-5


def test_a_carrier_goes_on_over_a_gap():
    """A later stretch is the same oscillation, not a new one."""
    carrier = draw_carrier(1.0, rng=np.random.default_rng(1))
    whole, part = carrier_wave(carrier, 0, 64_000, RATE_HZ), carrier_wave(carrier, 32_005, 20_000, RATE_HZ)
    # the envelope is held for 16 samples, so that another start moves its steps, by less than 1 %
    assert np.abs(whole[32_005:52_005] - part).max() < 0.01


def test_modulation_has_its_depth():
    """The envelope swings by the depth about one."""
    carrier = Carrier(1e6, 1.0, 0.5, 0.0, (2000.0,), ((1.0, 0.0),))
    height = np.abs(carrier_wave(carrier, 0, 200_000, RATE_HZ)).reshape(-1, 1000).max(axis=1)
    assert height.max() == pytest.approx(1.5, abs=0.01)
    assert height.min() == pytest.approx(0.5, abs=0.02)


def test_noise_has_its_deviation():
    """White and low-passed noise add in power."""
    background = Background((), 1.5, 2e6)
    wave = background_wave(background, 0, 1_000_000, RATE_HZ, rng=np.random.default_rng(3))
    assert wave.dtype == np.float32
    assert wave.std() == pytest.approx(np.sqrt(1 + 1.5**2), rel=0.02)


def test_converter_switches_twice_a_period():
    """Two edges a period, sorted, inside the stretch."""
    times = switching_times(0.05, 4e3, 0.01, rng=np.random.default_rng(4))
    assert abs(times.size - 400) <= 3
    assert (np.diff(times) >= 0).all()
    assert times[0] >= 0
    assert times[-1] < 0.05
