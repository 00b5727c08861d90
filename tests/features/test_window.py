"""Windows made ready in batches against the plain way, one by one."""

from dataclasses import replace

import numpy as np
import pytest
from closed_form import double_exponential
from one_pulse import features_of, single
from plain_features.window import prepared as plainly

from pdclass.features.window import ONSET, SAMPLES, Windows, chain_band_hz, counting_noise_v, prepared
from pdclass.pulses import PulseSet

FIELDS = ("wave", "raw", "noise_power", "noise", "height_v", "end", "last", "peak")


def joined(sets):
    """Single pulses of one chain as one set."""
    tables = [pulses.table for pulses in sets]
    table = (
        tables[0]
        .loc[tables[0].index.repeat(len(sets))]
        .assign(duration_us=np.array([t["duration_us"].iloc[0] for t in tables], np.float32))
    )
    return PulseSet(np.concatenate([pulses.waves for pulses in sets]), sets[0].chains, table)


def some(rate_hz, count=20):
    """Pulses of several widths and lengths in noise, every third under a carrier, some behind another event."""
    sets, place = [], np.arange(round(20e-6 * rate_hz)) / rate_hz
    for seed in range(count):
        wave = double_exponential(10e-9 * (1 + seed % 4), 60e-9 * (1 + seed % 5), rate_hz, 12e-6)
        pulses = single(wave, rate_hz=rate_hz, noise_v=0.01, seed=seed, duration_us=1.0 + seed / 4)
        waves = pulses.waves + (seed % 3 == 0) * 0.2 * np.cos(2 * np.pi * 6.1e6 * place + seed).astype(np.float32)
        if seed % 5 == 4:
            waves[0, round(1e-6 * rate_hz)] += 1.0
        sets.append(PulseSet(waves, pulses.chains, pulses.table))
    return joined(sets)


def windows_of(pulses):
    low_hz, reach_hz = chain_band_hz(pulses.chains * len(pulses.table))
    least_v = counting_noise_v(pulses.chains * len(pulses.table))
    return prepared(pulses.waves, pulses.table["duration_us"].to_numpy(np.float64), reach_hz, low_hz, least_v)


@pytest.mark.parametrize("rate_hz", [40e6, 62.5e6, 100e6, 250e6])
def test_every_field_is_that_of_the_plain_way(rate_hz):
    """Waves to a part in ten thousand of the peak, places to the sample."""
    pulses = some(rate_hz)
    windows, rows = windows_of(pulses)
    assert rows.tolist() == list(range(len(pulses.table)))
    for row in rows:
        plain = plainly(pulses.waves[row], pulses.chains[0], float(pulses.table["duration_us"].iloc[row]))
        for name in FIELDS:
            own, theirs = getattr(windows, name)[row], getattr(plain, name)
            np.testing.assert_allclose(own, theirs, rtol=2e-4, atol=1e-4, err_msg=f"{name} of {row}")
        size = windows.end[row] - ONSET + 20
        np.testing.assert_allclose(windows.own[row, :size], plain.own, atol=1e-4)
        assert not windows.own[row, size:].any()


@pytest.mark.parametrize("count", [1, 2, 3, 7])
def test_no_window_depends_on_its_company(count):
    """The same bits alone, in small batches, in any place."""
    pulses = some(100e6)
    whole = windows_of(pulses)[0]
    for first in (0, 4, 20 - count):
        part = windows_of(pulses.take(np.arange(first, first + count)))[0]
        for name in (*FIELDS, "own_power"):
            own, theirs = getattr(part, name), getattr(whole, name)[first : first + count]
            assert np.array_equal(own, theirs, equal_nan=True), name


def test_what_cannot_be_measured_is_left_out():
    """Nothing recorded, too little, nothing before the onset, or no height: the row is not among those returned."""
    pulses = some(100e6, 6)
    waves = pulses.waves.copy()
    waves[0] = np.nan
    waves[1, 400:] = np.nan
    waves[2, : ONSET + 5] = np.nan
    waves[3] = 0.25
    windows, rows = windows_of(PulseSet(waves, pulses.chains, pulses.table))
    assert rows.tolist() == [4, 5]
    assert isinstance(windows, Windows)
    assert windows.wave.shape == (2, SAMPLES)


def test_a_gap_is_filled_and_ends_what_is_known():
    """A window that begins or ends late has its first and last recorded sample there, and stays finite."""
    pulses = some(100e6, 2)
    waves = pulses.waves.copy()
    waves[:, :300], waves[:, 1700:] = np.nan, np.nan
    windows, rows = windows_of(PulseSet(waves, pulses.chains, pulses.table))
    assert rows.size == 2
    assert windows.last.tolist() == [1700, 1700]
    assert np.isfinite(windows.wave).all()


@pytest.mark.parametrize(("last", "missing"), [(505, True), (560, True), (700, False)])
def test_a_pulse_that_the_record_cuts_is_not_measured_as_a_whole(last, missing):
    """Where the record ends within the pulse, less than 1 us after its onset, nothing of the whole is measured."""
    pulses = single(double_exponential(10e-9, 200e-9, span_s=12e-6), duration_us=3.0)
    pulses.waves[:, last:] = np.nan
    values = features_of(pulses)
    for name in ("centroid_mhz", "crest_factor", "swings", "scale_mean_level", "tail_ns", "equivalent_width_mhz"):
        assert np.isnan(values[name]) == missing, name


def test_a_short_pulse_that_ends_before_the_record_is_measured():
    """What ends within its record is whole, however short the record."""
    pulses = single(double_exponential(10e-9, 30e-9, span_s=12e-6), duration_us=0.3)
    pulses.waves[:, 560:] = np.nan
    assert np.isfinite(features_of(pulses)["centroid_mhz"])


@pytest.mark.parametrize("noise_counts", [0.0, 0.2, 1.0])
def test_the_noise_of_few_counts_is_no_lower_than_that_of_rounding(noise_counts):
    """At 40 MS/s and 1/127 a count, the median noise level is within 3 dB of the noise and the rounding together."""
    count, levels = 1 / 127, []
    for seed in range(20):
        wave = double_exponential(20e-9, 200e-9, 40e6, 12e-6)
        pulses = single(wave, rate_hz=40e6, noise_v=noise_counts * count, seed=seed)
        waves = (np.rint(pulses.waves / count) * count).astype(np.float32)
        chain = replace(pulses.chains[0], volts_per_count=count)
        windows, _ = windows_of(PulseSet(waves, (chain,), pulses.table))
        levels.append(windows.noise[0] * abs(windows.height_v[0]))
    true = count * np.hypot(noise_counts, 1 / np.sqrt(12))
    assert 20 * np.log10(np.median(levels) / true) == pytest.approx(0, abs=3.0)
