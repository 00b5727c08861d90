"""The walk over a record finds the same events in stretches of any length, and needs memory for one stretch."""

import dataclasses
import tracemalloc

import numpy as np
import pytest
from closed_form import as_capture, background, damped_sine, double_exponential

from pdclass.extract import extract
from pdclass.extract.background import Background
from pdclass.extract.bank import dither_table, padded
from pdclass.extract.walk import segment_events

#: A background that whitens nothing: what leaves five noise levels is flagged.
AS_IT_IS = Background(
    level=0.0,
    dither=dither_table(np.zeros(1, np.float32)),
    epoch_samples=1 << 40,
    first_epochs=np.zeros(1, np.int64),
    segment_firsts=np.zeros(1, np.int64),
    filters=padded(np.ones(1, np.float32))[None],
    limits=np.full((1, 1), 5.2, np.float32),
    gains=np.ones(1, np.float32),
)


def white_events(white, *block_samples):
    """Events of samples that are white already."""
    return segment_events(as_capture(white, dtype=np.float32), AS_IT_IS, (0, white.size), *block_samples)


@pytest.mark.parametrize("block_samples", [313, 4096, 70_001])
def test_stretches_of_any_length_give_the_same_bits(block_samples):
    """Pulses, a burst longer than a piece, and events at the record's ends come out bit for bit the same."""
    rng = np.random.default_rng(1)
    white = rng.normal(0, 1, 200_000).astype(np.float32)
    white[:300] += 20 * double_exponential(12e-9, 60e-9)[:300]
    white[199_950:] += 20
    white[40_000:150_000] += 6 * np.sin(0.8 * np.arange(110_000))
    for onset in (10_000, 10_120, 20_000, 60_000, 90_000, 170_000):
        white[onset : onset + 600] += 40 * double_exponential(12e-9, 60e-9)
    whole, parts = white_events(white), white_events(white, block_samples)
    assert len(whole.places) > 8
    for name in ("places", "feet", "shapes"):
        assert np.array_equal(getattr(whole, name), getattr(parts, name), equal_nan=True), name


def test_pulses_between_converter_bursts_are_found():
    """With rings of 3 us and five times their peak every 10 us, 90 % of pulses at 12 noise levels between are found."""
    rng = np.random.default_rng(2)
    white = rng.normal(0, 1, 400_000).astype(np.float32)
    ring = damped_sine(4e6, 1e-6, span_s=3e-6)
    for onset in range(500, 399_000, 1000):
        white[onset : onset + 300] += 60 * rng.uniform(0.8, 1.2) * ring
    pulses = np.arange(3000, 390_000, 3000) + 500 + rng.integers(310, 930, 129)
    for number, onset in enumerate(pulses):
        shape = double_exponential(*((12e-9, 60e-9), (30e-9, 150e-9))[number % 2])
        white[onset : onset + 600] += rng.choice([-12, 12]) * shape
    found = white_events(white).places[:, 0]
    assert np.mean([np.abs(found - onset).min() <= 10 for onset in pulses]) >= 0.9
    assert len(found) <= 1.02 * (399 + len(pulses))


@pytest.mark.parametrize("over", [1.5, 5.0])
@pytest.mark.parametrize(("rise_s", "fall_s"), [(12e-9, 60e-9), (80e-9, 250e-9)])
def test_a_clipped_pulse_is_one_event_marked_clipped(over, rise_s, fall_s):
    """A pulse beyond the digitiser's range is one event in carriers; where it comes back is no second one."""
    rng = np.random.default_rng(3)
    signal = background(rng, 400_000)
    wave = double_exponential(rise_s, fall_s)
    onsets = np.arange(10) * 40_000 + 3000
    for onset in onsets:
        signal[onset : onset + wave.size] += rng.choice([-1, 1]) * over * 8191 * wave
    table = extract(as_capture(np.clip(signal, -8192, 8191))).pulses.table
    near = [np.abs(table["onset_sample"] - onset) < 3000 for onset in onsets]
    assert [int(rows.sum()) for rows in near] == [1] * len(onsets)
    assert table["clipped"][np.any(near, axis=0)].all()


def test_a_record_clipped_in_its_carriers_says_so():
    """With a hundredth of the samples at the rails pulses are still found, and a note gives the share."""
    rng = np.random.default_rng(4)
    signal = background(rng, 400_000, sigma=100, carriers=((0.198e6, 3600), (0.693e6, 3600)))
    wave = double_exponential(12e-9, 60e-9)
    onsets = np.arange(10) * 40_000 + 3000
    for onset in onsets:
        signal[onset : onset + wave.size] -= np.sign(signal[onset]) * 5000 * wave
    clipped = np.clip(signal, -8192, 8191)
    share = np.mean((clipped <= -8192) | (clipped >= 8191))
    assert 0.001 < share < 0.05
    found = extract(as_capture(clipped))
    assert f"{share:.1%} of the samples stand at the end of the digitiser's range" in found.notes[-1]
    hits = [np.abs(found.pulses.table["onset_sample"] - onset).min() <= 10 for onset in onsets]
    assert np.mean(hits) >= 0.8


def peak_bytes(path):
    """The most that numpy held while a mapped record was searched."""
    capture = as_capture(np.zeros(0))
    capture = dataclasses.replace(capture, counts=np.memmap(path, np.int16, "r"))
    tracemalloc.start()
    extract(capture)
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    return peak


def test_memory_does_not_grow_with_the_record(tmp_path):
    """A mapped record of 24 million samples needs no more memory than one of 8 million, and less than 64 MB."""
    noise = np.rint(np.random.default_rng(5).normal(0, 10, 1_000_000)).astype(np.int16)
    peaks = []
    for times in (8, 24):
        path = tmp_path / f"{times}.bin"
        np.tile(noise, times).tofile(path)
        peaks.append(peak_bytes(path))
    assert peaks[1] < 1.1 * peaks[0] + 4e6
    assert peaks[1] < 64e6
