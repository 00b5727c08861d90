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
