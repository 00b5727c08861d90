"""The noise beside a pulse is that of the record near it, whatever the pulses and the size of a count."""

import numpy as np
import pytest
from closed_form import as_capture

from pdclass.extract.noise import comb, noise_beside, noise_level


@pytest.mark.parametrize("scale", [1e-5, 1.0, 300.0])
def test_the_histogram_gives_the_median_absolute_deviation(scale):
    """Within a percent of MAD/0.6745 of the same samples, with a tenth of them far away and any offset."""
    rng = np.random.default_rng(1)
    values = rng.normal(50 * scale, scale, 2500)
    values[:250] += 1000 * scale
    exact = np.median(np.abs(values - np.median(values))) / 0.6744898
    assert noise_level(values.astype(np.float32), False) == pytest.approx(exact, rel=0.01)


@pytest.mark.parametrize("sigma", [0.4, 0.7, 1.5, 6.0, 900.0])
def test_whole_numbers_do_not_make_it_jump(sigma):
    """With noise of about a count the level still follows it, within rounding's own noise and a tenth."""
    counts = np.rint(np.random.default_rng(2).normal(3, sigma, 50_000)).astype(np.float32)
    assert noise_level(counts, True) == pytest.approx(np.hypot(sigma, 1 / np.sqrt(12)), rel=0.15)


def test_a_standing_record_has_no_noise_and_none_has_nan():
    """Equal whole numbers leave the width of a count; no sample leaves NaN."""
    assert noise_level(np.full(1000, 7, np.float32), True) < 0.5
    assert np.isnan(noise_level(np.zeros(0, np.float32), True))


def test_each_pulse_has_the_noise_near_it():
    """Where the noise trebles, pulses more than a millisecond away on either side have their own level."""
    signal = np.random.default_rng(3).normal(0, 10, 1_000_000)
    signal[500_000:] *= 3
    signal[200_000:200_500] += 1e4
    places = np.array([[200_000, 200_500], [390_000, 390_100], [610_000, 610_100], [999_900, 1_000_000]])
    levels = noise_beside(as_capture(signal, dtype=np.float32), places) / 1e-4
    assert levels == pytest.approx([10, 10, 30, 30], rel=0.08)


def test_no_noise_from_another_segment():
    """A pulse just before a gap takes nothing from behind it."""
    signal = np.random.default_rng(4).normal(0, 10, 400_000)
    signal[200_000:] *= 20
    capture = as_capture(signal, segments=np.array([[0, 0], [200_000, 900_000]]), dtype=np.float32)
    assert noise_beside(capture, np.array([[199_000, 199_100]]))[0] / 1e-4 == pytest.approx(10, rel=0.08)


def test_the_comb_lies_inside_its_brick_and_is_not_even():
    """Places rise, stay inside, and are not evenly spaced."""
    places = comb(50_000)
    assert (places.min() >= 0, places.max() < 50_000) == (True, True)
    assert len(set(np.diff(places).tolist())) > 10
