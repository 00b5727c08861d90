"""Windows and what is read off them."""

import numpy as np
import pytest
from closed_form import as_capture

from pdclass.extract.cut import any_beyond, clipped, clipped_samples, clipping_note, middle, signed_peaks, windows
from pdclass.pulses import Chain


def test_windows_are_the_samples_times_the_size_of_a_count():
    """Each window is a slice of the record; what lies outside its segment is NaN."""
    signal = np.random.default_rng(1).normal(0, 100, 20_000)
    capture = as_capture(signal, segments=np.array([[0, 0], [10_000, 50_000]]))
    waves = windows(capture, np.array([200, 5000, 9900, 10_100, 19_990]))
    volts = capture.counts.astype(np.float32) * np.float32(1e-4)
    assert np.array_equal(waves[1], volts[4500:6500])
    assert np.array_equal(waves[0][300:], volts[:1700])
    assert np.isnan(waves[0][:300]).all()
    assert np.isfinite(waves[2]).sum() == 600
    assert np.isfinite(waves[3]).sum() == 1600
    assert np.isfinite(waves[4]).sum() == 510


@pytest.mark.parametrize("count", [1, 2, 3, 84, 85, 500])
def test_the_middle_is_the_upper_median(count):
    """Selection gives what sorting gives, equal values among them."""
    values = np.random.default_rng(count).integers(0, 30, count).astype(np.float32)
    assert middle(values.copy()) == np.sort(values)[count // 2]


def test_peaks_are_signed_and_counted_from_the_baseline():
    """The largest own excursion from the pre-trigger's median counts, not what comes after the pulse's end."""
    waves = np.full((2, 2000), 0.5, np.float32)
    waves[:, 600] = [-2.5, 1.5]
    waves[:, 900] = 9
    waves[1, :100] = np.nan
    assert signed_peaks(waves, np.array([200, 200]), 500) == pytest.approx([-3, 1])
    assert any_beyond(waves, 8.9)
    assert not any_beyond(waves, 9.0)


def test_clipping_is_seen_at_the_rails_only():
    """Samples at the end of the range of 12 bits mark the pulse that holds them, also far behind its window."""
    counts = np.zeros(60_000)
    counts[[1010, 30_100, 58_000]] = [2047, -2048, 2046]
    capture = as_capture(counts, chain=Chain(100e6, 1e-3, 12))
    places = np.array([[1000, 1100], [10_000, 31_000], [50_000, 59_000]])
    assert clipped(capture, windows(capture, places[:, 0]), places).tolist() == [True, True, False]
    assert clipped_samples(capture, 0, 60_000) == 2
    assert clipping_note(capture, 60) == []
    assert "1.0% of the samples" in clipping_note(capture, 600)[0]
