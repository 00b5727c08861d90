"""What the drawings of features show."""

import numpy as np
import pandas as pd
import pytest
from closed_form import damped_sine, double_exponential
from one_pulse import single

from pdclass.pulses import PulseSet
from pdclass.report.feature_examples import (
    bands,
    echogram,
    energy_so_far,
    feature_example,
    levels_db,
    scale_shares,
    strongest,
)


def example(wave, **fields):
    pulses = single(wave, **fields)
    return feature_example(PulseSet(pulses.waves, pulses.chains, pulses.table.assign(label="cable")), 0, "a pulse")


def test_an_example_is_one_high_whatever_its_gain_and_sign():
    """The peak is +1 and the onset at 0; the values are those of the features."""
    shown = example(double_exponential(20e-9, 100e-9), height_v=-0.3, noise_v=1e-4)
    assert np.abs(shown.wave).max() == pytest.approx(1.0, abs=0.02)
    assert 0 < shown.time_us[np.argmax(shown.wave)] < 0.1
    assert shown.noise == pytest.approx(1e-4 / 0.3, rel=0.5)
    assert shown.values["rise_ns"] > 0


def test_a_copy_is_a_peak_of_the_echogram_at_its_delay():
    """The echogram drawn has the copy where the feature has it, with its sign."""
    wave = double_exponential(20e-9, 90e-9, span_s=12e-6)
    delay_us, gram = echogram(example(wave - 0.4 * np.roll(wave, 200), duration_us=8.0))
    place = 100 + np.argmax(np.abs(gram[100:]))
    assert delay_us[place] == pytest.approx(2.0, abs=0.02)
    assert gram[place] == pytest.approx(-0.4, abs=0.05)
    shown = example(wave - 0.4 * np.roll(wave, 200), duration_us=8.0)
    assert shown.values["copy_1_delay_us"] == pytest.approx(delay_us[place], abs=0.02)


def test_the_spectrum_of_a_damped_sine_is_highest_at_its_frequency():
    """Levels are over the largest, which lies at the frequency of the sine; the noise lies below."""
    mhz, level, noise = levels_db(example(damped_sine(7e6, 0.6e-6), noise_v=1e-3))
    assert level.max() == 0
    assert mhz[np.argmax(level)] == pytest.approx(7.0, abs=0.3)
    assert np.median(noise) < -20


def test_energy_ends_at_one_and_scales_add_up_to_one():
    """All of the energy has passed at the end, and is shared out among the levels."""
    shown = example(damped_sine(9e6, 0.4e-6))
    _, passed = energy_so_far(shown)
    assert passed[-1] == pytest.approx(1.0)
    level, share = scale_shares(shown)
    assert share.sum() == pytest.approx(1.0)
    assert level[np.argmax(share)] == 3


def test_bands_are_read_from_names():
    """Two numbers in a name are a band; p is the point."""
    found = bands({"share_0p1_1_mhz": 0.0, "centroid_mhz": 1.0}, r"share_([0-9p]+)_([0-9p]+)_mhz")
    assert list(found) == [("share_0p1_1_mhz", 0.1, 1.0)]


def test_the_strongest_pulse_is_alone_whole_and_of_the_label():
    """Clipped pulses, echoes, crowded windows and other labels are passed over."""
    rows = {
        "label": ["cable", "cable", "cable", "cable", "local", "cable"],
        "snr_db": [20.0, 50.0, 51.0, 52.0, 53.0, 30.0],
        "clipped": [False, True, False, False, False, False],
        "echo_of": [None, None, "a", None, None, None],
        "window_mates": [0, 0, 0, 1, 0, 0],
    }
    pulses = PulseSet(np.zeros((6, 4), np.float32), (), pd.DataFrame(rows))
    assert strongest(pulses, "cable") == 5
