"""The numerical Laplace transform gives back what it was made of."""

import numpy as np
import pytest

from pdclass.sim.grid import DAMPING_PER_S, LEAD_S, RECORD_S, laplace_grid, record_samples, to_samples


def _gaussian(sigma_s, centre_s):
    s = laplace_grid()
    return sigma_s * np.sqrt(2 * np.pi) * np.exp((s * sigma_s) ** 2 / 2 - s * centre_s)


@pytest.mark.parametrize(
    ("rate_hz", "samples"),
    [(40e6, 3200), (62.5e6, 5000), (100e6, 8000), (125e6, 10000), (200e6, 16000), (250e6, 20000)],
)
def test_every_rate_has_whole_samples_and_the_closed_form(rate_hz, samples):
    """A Gaussian comes back as its closed form at every rate, on a whole number of samples."""
    wave = to_samples(_gaussian(25e-9, 3e-6), rate_hz)
    time_s = np.arange(samples) / rate_hz
    assert record_samples(rate_hz) == wave.size == samples
    # the damping lifts the rounding error of the late record, far below any pulse of interest
    assert np.abs(wave - np.exp(-(((time_s - 3e-6) / 25e-9) ** 2) / 2)).max() < 1e-6


def test_a_slow_decay_is_not_wrapped_round():
    """An exponential of 20 us, still alive at the record's end, is right late and absent before its begin."""
    s, tau_s = laplace_grid(), 20e-6
    wave = to_samples(np.exp((s * 30e-9) ** 2 / 2 - s * LEAD_S) / (s + 1 / tau_s), 100e6)
    time_s = np.arange(wave.size) / 100e6
    late = (time_s > 3e-6) & (time_s < RECORD_S - 6e-6)
    assert np.abs(wave[late] - np.exp(-(time_s[late] - LEAD_S) / tau_s)).max() < 5e-4
    # what ends at 80 us comes round once, by the factor exp(-5) smaller
    assert np.abs(wave[time_s < LEAD_S - 0.3e-6]).max() < 1.1 * np.exp(-DAMPING_PER_S * RECORD_S) * np.exp(-3.9)


def test_shift_by_part_of_a_sample():
    """A delay of 0.37 samples in the spectrum is a delay of 0.37 samples in time."""
    s, rate_hz = laplace_grid(), 100e6
    wave = to_samples(_gaussian(40e-9, 3e-6) * np.exp(-s * 0.37 / rate_hz), rate_hz)
    time_s = np.arange(wave.size) / rate_hz
    centroid = (time_s * wave).sum() / wave.sum()
    assert centroid == pytest.approx(3e-6 + 0.37 / rate_hz, abs=1e-12)


def test_batches_are_single_records():
    """Several spectra at once give the same bytes as one after the other."""
    both = np.stack([_gaussian(10e-9, 3e-6), _gaussian(50e-9, 9e-6)])
    together = to_samples(both, 62.5e6)
    assert all(np.array_equal(together[k], to_samples(both[k], 62.5e6)) for k in range(2))
