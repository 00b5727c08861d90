"""Echoes are told from pulses by shape, size, speed and recurrence."""

import numpy as np
import pytest
import scipy.fft
from closed_form import as_capture, double_exponential

from pdclass.extract import ExtractSettings, extract
from pdclass.extract.echoes import PATHS_S, path_likeness

RATE_HZ = 100e6
STRICT = ExtractSettings(false_events_per_cycle=0.01)


def travelled(wave, squared_s, samples=2000):
    """The wave after a skin-effect path exp(-K sqrt(s)) with K² = `squared_s`."""
    s = 2j * np.pi * scipy.fft.rfftfreq(4 * samples, 1 / RATE_HZ)
    return scipy.fft.irfft(scipy.fft.rfft(wave, 4 * samples) * np.exp(-np.sqrt(squared_s * s)), 4 * samples)[:samples]


def record(pairs, *, samples=1_000_000, sigma=10.0, seed=2):
    """Noise with (onset, height, wave) planted."""
    rng = np.random.default_rng(seed)
    signal = rng.normal(0, sigma, samples)
    for onset, height, wave in pairs:
        signal[onset : onset + wave.size] += height * wave
    return as_capture(signal)


def test_a_copy_after_more_cable_with_a_recurring_delay_is_an_echo():
    """Ten pulses, each followed after 12 us by a smaller, slower copy: ten pulses and ten echoes of them."""
    wave = double_exponential(10e-9, 60e-9)
    copy = travelled(wave, 30e-9)
    heights = np.linspace(1500, 3000, 10)
    pairs = [(50_000 + 80_000 * k, h, wave) for k, h in enumerate(heights)]
    pairs += [(50_000 + 80_000 * k + 1200, 0.6 * h, copy) for k, h in enumerate(heights)]
    found = extract(record(pairs), STRICT)
    table = found.pulses.table
    assert (found.found, found.echoes) == (20, 10)
    parents = table.loc[table["echo_of"].dropna()]
    children = table.loc[table["echo_of"].notna()]
    delays = children["onset_sample"].to_numpy() - parents["onset_sample"].to_numpy()
    assert delays == pytest.approx(np.full(10, 1200), abs=10)


def test_random_pulses_of_one_source_are_not_echoes():
    """Pulses of one shape at random times and heights are kept, none is called an echo of another."""
    rng = np.random.default_rng(4)
    wave = double_exponential(20e-9, 100e-9)
    onsets = np.sort(rng.choice(np.arange(20, 990), 120, replace=False)) * 1000 + rng.integers(0, 400, 120)
    found = extract(record([(int(o), rng.uniform(300, 3000), wave) for o in onsets]), STRICT)
    assert found.found == 120
    assert found.echoes == 0


def test_a_faster_or_larger_later_pulse_is_never_an_echo():
    """What comes later and is faster, or larger, did not travel further."""
    slow, fast = travelled(double_exponential(10e-9, 60e-9), 100e-9), double_exponential(10e-9, 60e-9)
    larger = [(200_000, 800, fast), (201_500, 2000, fast)]
    faster = [(500_000, 8000, slow), (501_500, 600, fast)]
    assert extract(record(larger + faster), STRICT).echoes == 0


def test_likeness_grows_with_the_right_path_and_stays_low_for_another_shape():
    """A copy is most alike after about the path it took; a burst of another frequency is not alike at all."""
    wave = double_exponential(10e-9, 60e-9, span_s=3e-6).astype(np.float32) * 100
    copy = travelled(wave, float(PATHS_S[6])).astype(np.float32)[:300]
    scores = path_likeness(wave, copy, RATE_HZ)
    assert abs(int(np.argmax(scores)) - 6) <= 1
    assert scores.max() > 0.95
    t = np.arange(300) / RATE_HZ
    other = (100 * np.sin(2 * np.pi * 11e6 * t) * np.exp(-t / 2e-6)).astype(np.float32)
    assert path_likeness(wave, other, RATE_HZ).max() < 0.75


@pytest.mark.parametrize("period_us", [10, 50])
def test_a_periodic_train_is_no_chain_of_echoes(period_us):
    """Bursts at a steady interval and of changing height are pulses, every one; none is an echo of another."""
    rng = np.random.default_rng(5)
    wave = double_exponential(20e-9, 150e-9)
    onsets = np.arange(1000, 990_000, period_us * 100)
    found = extract(record([(int(o), rng.uniform(500, 1500), wave) for o in onsets]), STRICT)
    assert abs(found.found - len(onsets)) <= 1
    assert found.echoes == 0
