"""Spread of a pulse: what noise may have left of an energy is no value."""

import numpy as np
import pytest
from closed_form import double_exponential
from one_pulse import features_of, single

SHORT = double_exponential(10e-9, 30e-9, span_s=6e-6)
OF_ENERGY = ("energy_before_peak", "tail_ns", "share_14_25_mhz", "centroid_mhz", "equivalent_width_mhz")


def values(name, *, noise_v, duration_us, count=20):
    found = [features_of(single(SHORT, noise_v=noise_v, duration_us=duration_us, seed=seed)) for seed in range(count)]
    return np.array([each[name] for each in found])


@pytest.mark.parametrize("name", OF_ENERGY)
def test_energy_that_noise_may_have_left_is_no_value(name):
    """A short pulse at 12 dB in 14 us of noise: missing mostly; in its own time it is there."""
    hidden = values(name, noise_v=0.25, duration_us=14.0)
    assert np.isnan(hidden).mean() > 0.8
    assert np.isfinite(values(name, noise_v=0.02, duration_us=0.5)).all()


def test_no_crest_factor_is_that_of_energy_that_is_not_there():
    """At 10 dB it is missing or near that of the pulse without noise, never the largest that is allowed."""
    found = values("crest_factor", noise_v=0.3, duration_us=3.0, count=60)
    clear = values("crest_factor", noise_v=1e-4, duration_us=3.0, count=1)[0]
    assert np.isnan(found).any()
    assert np.nanmax(found) < 2 * clear


def test_no_length_is_kept_because_chance_made_it_long():
    """At 23 dB in 3 us of noise the length of an 18 ns pulse is missing nearly always; in its own time it is right."""
    hidden = values("equivalent_length_ns", noise_v=0.07, duration_us=3.0)
    assert np.isnan(hidden).mean() >= 0.9
    clear = values("equivalent_length_ns", noise_v=1e-5, duration_us=0.4, count=1)[0]
    noisy = values("equivalent_length_ns", noise_v=0.01, duration_us=0.4)
    assert np.nanmedian(noisy) == pytest.approx(clear, rel=0.2)


def test_half_of_the_peak_sample_lies_before_the_peak():
    """An even pulse has half of its energy before its peak."""
    wave = np.exp(-0.5 * ((np.arange(600) - 30) / 1.5) ** 2)
    found = features_of(single(wave, noise_v=1e-4, duration_us=2.0))
    assert found["energy_before_peak"] == pytest.approx(0.5, abs=0.02)


def test_a_late_level_does_not_hang_on_the_noise():
    """Noise is taken out of the beginning, too: the median level at 17 dB is that without noise to half a dB."""
    wave = SHORT + 0.7 * np.roll(SHORT, 42)
    clear = features_of(single(wave, noise_v=1e-4))["late_0p3_0p6_db"]
    noisy = [features_of(single(wave, noise_v=0.14, seed=seed))["late_0p3_0p6_db"] for seed in range(60)]
    assert np.nanmedian(noisy) == pytest.approx(clear, abs=0.5)
