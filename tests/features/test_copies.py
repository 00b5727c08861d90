"""Copies planted with known delay, height and loss are found as such."""

import numpy as np
import pytest
from closed_form import double_exponential
from one_pulse import features_of, single
from scipy.signal import butter, sosfilt

from pdclass.features import copies
from pdclass.pulses import PulseSet


def found(wave, *, noise_v=0.001, **chain):
    return features_of(single(wave, noise_v=noise_v, **chain))


def pulse():
    return double_exponential(10e-9, 60e-9, span_s=15e-6)


def with_copies(*copies):
    wave = pulse()
    return wave + sum(height * np.roll(pulse(), delay) for delay, height in copies)


def test_two_copies_are_found_with_delay_height_and_sign():
    """Copies of 0.5 after 3 us and of -0.2 after 8 us, the stronger first; and the ratio of their delays."""
    values = found(with_copies((300, 0.5), (800, -0.2)))
    assert values["copy_1_delay_us"] == pytest.approx(3.0, abs=0.02)
    assert values["copy_1_ratio"] == pytest.approx(0.5, abs=0.03)
    assert values["copy_2_delay_us"] == pytest.approx(8.0, abs=0.02)
    assert values["copy_2_ratio"] == pytest.approx(-0.2, abs=0.03)
    assert values["copy_delay_ratio"] == pytest.approx(8 / 3, abs=0.03)
    assert values["copy_1_likeness"] > 0.98


def test_a_copy_of_equal_shape_has_one_level_in_every_band():
    """A copy of 0.5 is 6 dB down at every frequency."""
    values = found(with_copies((400, 0.5)))
    for band in ("1_2p5", "2p5_5", "5_9"):
        assert values[f"copy_1_level_{band}_db"] == pytest.approx(20 * np.log10(0.5), abs=0.5)


def test_a_low_passed_copy_loses_its_high_frequencies_and_its_likeness():
    """Behind a low-pass at 3 MHz the copy is down at 5-9 MHz by what the filter takes, wider and less alike."""
    filtered = sosfilt(butter(1, 3e6, fs=100e6, output="sos"), pulse())
    plain, lossy = found(with_copies((400, 0.5))), found(pulse() + 0.5 * np.roll(filtered, 400))
    fallen = {band: plain[f"copy_1_level_{band}_db"] - lossy[f"copy_1_level_{band}_db"] for band in ("1_2p5", "5_9")}
    assert fallen["1_2p5"] == pytest.approx(1.2, abs=0.6)
    assert fallen["5_9"] == pytest.approx(7.8, abs=1.5)
    assert lossy["copy_1_width_ns"] > plain["copy_1_width_ns"]
    assert lossy["copy_1_likeness"] < plain["copy_1_likeness"] - 0.03


@pytest.mark.parametrize("fall_ns", [60, 200, 400, 900])
def test_a_pulse_without_copies_has_none(fall_ns):
    """However slowly it falls, its own tail is no copy; chance is taken for one in at most one of ten at 30 dB."""
    wave = double_exponential(10e-9, fall_ns * 1e-9, span_s=15e-6)
    assert np.isnan(found(wave, noise_v=0.001)["copy_1_ratio"])
    noisy = [found(wave, noise_v=0.03, seed=seed)["copy_1_ratio"] for seed in range(40)]
    assert np.sum(np.isfinite(noisy)) <= 4


def test_a_copy_before_the_pulse_is_over_is_none():
    """Of a pulse that falls with 900 ns, a copy after 1 us lies within its own tail: nothing is made of it."""
    wave = double_exponential(10e-9, 900e-9, span_s=15e-6)
    assert np.isnan(found(wave + 0.3 * np.roll(wave, 100))["copy_1_delay_us"])
    assert found(wave + 0.3 * np.roll(wave, 600))["copy_1_delay_us"] == pytest.approx(6.0, abs=0.03)


@pytest.mark.parametrize("delay_us", [0.45, 1, 2, 6, 12])
def test_an_early_copy_of_a_short_pulse_is_found(delay_us):
    """The beginning of a short pulse is over after 0.4 us: a copy of 0.3 is found from there on."""
    wave = double_exponential(5e-9, 60e-9, span_s=15e-6)
    values = found(wave + 0.3 * np.roll(wave, round(100 * delay_us)), noise_v=0.01)
    assert values["copy_1_delay_us"] == pytest.approx(delay_us, abs=0.02)
    assert values["copy_1_ratio"] == pytest.approx(0.3, abs=0.08)


def test_the_second_copy_is_apart_from_the_first():
    """The flank of a strong copy is not taken for another one."""
    values = found(with_copies((500, 0.6), (900, 0.1)))
    assert values["copy_2_delay_us"] == pytest.approx(9.0, abs=0.02)


def under_carriers(seed):
    """A copy of 0.3 after 6 us, at 34 dB, under three to six carriers of twice the noise, one of which fades."""
    rng, t = np.random.default_rng(seed), np.arange(2000) / 100e6
    alone = single(with_copies((600, 0.3)), noise_v=0.02, seed=seed)
    waves = alone.waves.copy()
    for number in range(rng.integers(3, 7)):
        fade = 1.0 if number else np.cos(np.pi * t / 20e-6)
        tone = np.cos(2 * np.pi * rng.uniform(0.5e6, 1.6e6) * t + rng.uniform(0, 6.28))
        waves += (0.04 * fade * tone).astype(np.float32)
    return PulseSet(waves, alone.chains, alone.table)


def test_a_copy_survives_carriers(monkeypatch):
    """Two of three copies are found under carriers and none is invented; were no lines cut, half would be lost."""
    pulses = [under_carriers(seed) for seed in range(20)]
    delays = np.array([features_of(each)["copy_1_delay_us"] for each in pulses])
    assert np.sum(np.isfinite(delays)) >= 13
    assert delays[np.isfinite(delays)] == pytest.approx(np.full(np.isfinite(delays).sum(), 6.0), abs=0.03)
    monkeypatch.setattr(copies, "cut_lines", lambda spectra, pulses: None)
    uncut = [features_of(each)["copy_1_delay_us"] for each in pulses]
    assert np.sum(np.isfinite(uncut)) <= 10
