"""A lone window tells its noise and its peak by closed formulas."""

from __future__ import annotations

import numpy as np
import pytest

from pdclass.capture.waves import peak_v, pretrigger_noise_v, signal_to_noise_db


def test_the_noise_is_the_scaled_median_deviation_before_the_onset():
    """Of 1, 2, 3, 4, 100 the median deviation is 1: one outlier does not matter, nor what follows the onset."""
    wave = np.full((1, 20), 50.0, np.float32)
    wave[0, :5] = [1, 2, 3, 4, 100]
    assert pretrigger_noise_v(wave)[0] == pytest.approx(1 / 0.6745)


def test_gaussian_noise_is_measured_as_its_standard_deviation():
    """MAD/0.6745 of Gaussian noise is its standard deviation, within the scatter of 5000 samples."""
    wave = np.random.default_rng(3).normal(scale=0.02, size=(1, 20_000)).astype(np.float32)
    assert pretrigger_noise_v(wave)[0] == pytest.approx(0.02, rel=0.05)


def test_noise_without_a_record_before_the_onset_is_unknown():
    """A window that begins after the onset has no noise of its own."""
    wave = np.ones((1, 20), np.float32)
    wave[0, :5] = np.nan
    assert np.isnan(pretrigger_noise_v(wave)[0])


def test_the_peak_is_signed_and_looked_for_after_the_onset():
    """What stands before the onset belongs to another event, unless nothing else was recorded."""
    wave = np.zeros((2, 20), np.float32)
    wave[:, 2] = 9
    wave[:, 7:9] = [1, -3]
    wave[1, 5:] = np.nan
    assert peak_v(wave).tolist() == [-3, 9]


def test_the_ratio_is_in_decibels_and_unknown_without_noise():
    """Ten times the noise is 20 dB; a ratio to nothing is unknown."""
    found = signal_to_noise_db(np.array([-1.0, 1.0, 0.0]), np.array([0.1, 0.0, 0.1]))
    assert found[0] == pytest.approx(20.0)
    assert np.isnan(found[1:]).all()
