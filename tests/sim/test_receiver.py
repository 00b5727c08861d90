"""The receiving chain has the corners, the rounding and the clipping that it says."""

import numpy as np
import pytest

from pdclass.sim.receiver import Receiver, anti_alias_response, chain_band_hz, quantise, sensor_response

RECEIVER = Receiver(100e6, 14, 5.0, 100e3, 20e6)


def test_sensor_corners():
    """The current transformer is 3 dB down at both corners, and passes no direct current."""
    hz = np.array([100e3, 1.5e6, 20e6])
    gain = np.abs(sensor_response(RECEIVER, 2j * np.pi * hz)) / 5.0
    assert gain[[0, 2]] == pytest.approx(np.sqrt(0.5), rel=1e-3)
    assert gain[1] == pytest.approx(1, abs=0.01)
    assert sensor_response(RECEIVER, np.zeros(1, complex)) == 0


@pytest.mark.parametrize(("rate_hz", "corner_hz"), [(62.5e6, 25e6), (100e6, 40e6), (250e6, 48e6)])
def test_anti_alias_corner(rate_hz, corner_hz):
    """The anti-alias filter is 3 dB down at 0.4 of the rate (at most 40 MHz), and falls by 24 dB an octave."""
    gain = np.abs(anti_alias_response(rate_hz, 2j * np.pi * corner_hz * np.array([0, 1, 2, 4])))
    assert gain[:2] == pytest.approx([1, np.sqrt(0.5)], rel=1e-9)
    assert 20 * np.log10(gain[2] / gain[3]) == pytest.approx(24.1, abs=0.3)


def test_stated_band_is_that_of_the_whole_chain():
    """The stated corners are those where sensor and filter together are 3 dB down."""
    low, high = chain_band_hz(RECEIVER)
    s = 2j * np.pi * np.array([low, high])
    gain = np.abs(sensor_response(RECEIVER, s) * anti_alias_response(100e6, s)) / 5.0
    assert gain == pytest.approx(np.sqrt(0.5), rel=0.005)
    assert 90e3 < low < 110e3
    assert high < 20.5e6


def test_counts_are_rounded_and_clipped():
    """A count is the nearest whole number; what is beyond the range stays at its ends."""
    counts = quantise(np.array([0.4, 0.6, -0.6, 127.4, 500.0, -500.0]) * 1e-3, 1e-3, 8)
    assert counts.dtype == np.int8
    assert counts.tolist() == [0, 1, -1, 127, 127, -128]
    assert quantise(np.array([1e9, -1e9], np.float32), 1.0, 16).tolist() == [32767, -32768]
    assert quantise(np.zeros(1), 1.0, 9).dtype == np.int16
