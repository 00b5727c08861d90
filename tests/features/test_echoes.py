"""The strongest later copy within the window, with and without carriers."""

import numpy as np
import pytest
from closed_form import double_exponential
from one_pulse import features_of, single

from pdclass.pulses import PulseSet


def with_echo(ratio, delay):
    wave = double_exponential(10e-9, 60e-9, span_s=15e-6)
    return wave + ratio * np.roll(wave, delay)


def carried(pulses, height_v):
    """The same pulses under five carriers, more than are taken out, one of which fades."""
    t = np.arange(pulses.waves.shape[1]) / 100e6
    waves = pulses.waves.copy()
    for number, hz in enumerate((0.2e6, 0.7e6, 0.95e6, 1.4e6, 6.1e6)):
        fade = np.cos(np.pi * t / 40e-6) if number == 0 else 1.0
        waves += (height_v * fade * np.cos(2 * np.pi * hz * t + number)).astype(np.float32)
    return PulseSet(waves, pulses.chains, pulses.table)


@pytest.mark.parametrize(("ratio", "delay"), [(0.5, 300), (-0.3, 700), (0.1, 1100)])
def test_delay_and_ratio_are_those_of_the_copy(ratio, delay):
    """A copy is found with its delay, its height and its sign."""
    found = features_of(single(with_echo(ratio, delay)))
    assert found["echo_delay_us"] == pytest.approx(delay / 100, abs=0.015)
    assert found["echo_ratio"] == pytest.approx(ratio, abs=0.02)


def test_carriers_invent_no_echo():
    """A lone pulse under carriers of twice its noise has no echo."""
    for seed in range(8):
        found = features_of(carried(single(with_echo(0.0, 100), noise_v=0.01, seed=seed), 0.02))
        assert np.isnan(found["echo_delay_us"])


def test_an_echo_survives_carriers():
    """A copy of 0.6 is found at its place under carriers of twice the noise, and nowhere else."""
    delays = [
        features_of(carried(single(with_echo(0.6, 600), noise_v=0.01, seed=seed), 0.02))["echo_delay_us"]
        for seed in range(8)
    ]
    known = [delay for delay in delays if np.isfinite(delay)]
    assert len(known) >= 6
    assert known == pytest.approx([6.0] * len(known), abs=0.03)


def test_a_pulse_whose_noise_is_unknown_has_no_echo():
    """Without a pre-trigger no copy is called one."""
    pulses = single(with_echo(0.5, 300))
    waves = pulses.waves.copy()
    waves[:, :460] = np.nan
    assert np.isnan(features_of(PulseSet(waves, pulses.chains, pulses.table))["echo_ratio"])
