"""The background follows what changes in a record, and what is held against it does not depend on cuts."""

from itertools import pairwise

import numpy as np
import pytest
from closed_form import as_capture, background, double_exponential

from pdclass.extract.background import (
    EPOCHS_PER_STRETCH,
    ExtractSettings,
    detection_limit_counts,
    epoch_places,
    flagged_runs,
    measure_background,
    whitened,
)
from pdclass.extract.bank import SUB_BLOCK

RATE_HZ = 100e6
SETTINGS = ExtractSettings()
T = np.arange(2_000_000) / RATE_HZ


def whole(capture):
    """The background, and the events of the record: flagged runs more than 3 us apart."""
    held = measure_background(capture, SETTINGS)
    runs = np.concatenate([flagged_runs(capture.counts, held, bounds, *bounds) for bounds in capture.segment_bounds()])
    apart = np.flatnonzero(runs[1:, 0] - runs[:-1, 1] >= 300) + 1
    return held, np.array([part[[0, -1], [0, 1]] for part in np.split(runs, apart) if len(part)]).reshape(-1, 2)


def flags(counts, held, bounds, *stretch):
    """Which samples of a stretch leave the background."""
    set_there = np.zeros(stretch[1] - stretch[0], np.bool_)
    for first, last in flagged_runs(counts, held, bounds, *stretch) - stretch[0]:
        set_there[first:last] = True
    return set_there


def keyed(on_s, period_s, ramp_s=50e-6):
    """An envelope that is switched on and off with raised-cosine ramps."""
    into = np.mod(T, period_s)
    return 0.5 - 0.5 * np.cos(np.pi * np.clip(np.minimum(into, on_s - into) / ramp_s, 0, 1))


def tones(rng, low_hz=35e3, high_hz=488e3, count=60):
    """Many tones with phases of their own, of deviation 1."""
    turns = [np.cos(2 * np.pi * hz * T + rng.uniform(0, 6.3)) for hz in np.linspace(low_hz, high_hz, count)]
    return np.sum(turns, axis=0) * np.sqrt(2 / count)


CHANGING = {
    "frames of many tones": lambda rng: 80 * tones(rng) * keyed(3e-3, 5e-3),
    "short frames": lambda rng: 80 * tones(rng) * keyed(1e-3, 9e-3),
    "a keyed carrier": lambda rng: 150 * np.cos(2 * np.pi * 0.132e6 * T) * keyed(2e-3, 3e-3),
    "a carrier that drifts": lambda rng: 80 * np.cos(2 * np.pi * (0.7e6 + 2e6 * T) * T),
    "a carrier that fades": lambda rng: 150 * np.exp(-T / 4e-3) * np.cos(2 * np.pi * 0.9e6 * T),
    "a carrier that starts": lambda rng: 150 * (T > 11e-3) * np.sin(2 * np.pi * 1.2e6 * (T - 11e-3)),
}


@pytest.mark.parametrize("name", CHANGING)
def test_a_carrier_that_changes_is_no_storm_and_hides_nothing(name):
    """Carriers that come, go, fade or drift give hardly a false event in a cycle, and pulses at 12 are found."""
    rng = np.random.default_rng(1)
    quiet = rng.normal(0, 20, T.size) + CHANGING[name](rng)
    assert len(whole(as_capture(quiet))[1]) <= 4
    wave, onsets = 240 * double_exponential(12e-9, 60e-9), np.arange(50) * 40_000 + rng.integers(2000, 30_000, 50)
    for onset in onsets:
        quiet[onset : onset + wave.size] += wave
    runs = whole(as_capture(quiet))[1]
    assert np.mean([np.any((runs[:, 0] < onset + 50) & (runs[:, 1] > onset)) for onset in onsets]) >= 0.95


def test_noise_that_rises_for_a_while_raises_the_threshold_there_alone():
    """Three milliseconds of doubled noise give no storm; elsewhere the level falls by less than a tenth."""
    rng = np.random.default_rng(2)
    signal = rng.normal(0, 20, T.size)
    signal[600_000:900_000] *= 2
    capture = as_capture(signal)
    held, runs = whole(capture)
    white = whitened(capture.counts, held, (0, T.size), 0, T.size)
    assert len(runs) <= 4
    assert white[700_000:800_000].std() == pytest.approx(1, abs=0.1)
    assert white[1_200_000:1_900_000].std() == pytest.approx(1, abs=0.1)


@pytest.mark.parametrize(("share", "times"), [(0.3, 3), (0.5, 4), (0.6, 6)])
def test_noise_that_switches_its_level_is_no_impulse(share, times):
    """Noise several times louder for a share of every 5 ms gives hardly a false event in a cycle."""
    signal = np.random.default_rng(6).normal(0, 20, T.size) * np.where(share * 5e-3 > T % 5e-3, times, 1)
    assert len(whole(as_capture(signal))[1]) <= 4


def test_converter_bursts_leave_the_pulses_between_them():
    """Bursts of 3 us every 10 us, five times the pulses' peak, each different: pulses at 12 between them stand out."""
    rng = np.random.default_rng(3)
    signal, t = rng.normal(0, 20, T.size), np.arange(300) / RATE_HZ
    for start in range(0, T.size - 300, 1000):
        ring = np.exp(-t / 1e-6) * np.sin(2 * np.pi * 5e6 * rng.uniform(0.9, 1.1) * t + rng.uniform(0, 6.3))
        signal[start : start + 300] += 1200 * rng.uniform(0.7, 1.3) * ring
    onsets = np.arange(200) * 10_000 + rng.integers(400, 850, 200)
    wave = 240 * double_exponential(12e-9, 60e-9)[:150]
    for onset in onsets:
        signal[onset : onset + wave.size] += wave
    capture = as_capture(signal)
    held = measure_background(capture, SETTINGS)
    white = whitened(capture.counts, held, (0, T.size), 0, T.size)
    out = flags(capture.counts, held, (0, T.size), 0, T.size)
    assert held.noise < 1.25 * 20
    found = [np.abs(white[o : o + 20]).max() > max(5.5, 1.2 * np.abs(white[o - 20 : o - 1]).max()) for o in onsets]
    assert np.mean([out[o : o + 20].any() for o in onsets]) >= 0.9
    assert np.mean(found) >= 0.9
    assert np.median([np.abs(white[o : o + 20]).max() for o in onsets]) > 7


@pytest.mark.parametrize("dtype", [np.int16, np.float32])
def test_no_bit_depends_on_where_the_record_is_cut(dtype):
    """White samples are the same in pieces of any length, and flags in those of whole sub-blocks."""
    rng = np.random.default_rng(4)
    signal = background(rng, 300_000)
    signal[100_000:100_600] += 400 * double_exponential(12e-9, 60e-9)[:600]
    capture = as_capture(signal, segments=np.array([[0, 0], [120_001, 900_000]]), dtype=dtype)
    held = measure_background(capture, SETTINGS)
    for bounds in capture.segment_bounds():
        for part, steps in ((whitened, (61, 997, 50_000)), (flags, (SUB_BLOCK, 5 * SUB_BLOCK))):
            whole = part(capture.counts, held, bounds, *bounds)
            for step in steps:
                cuts = [*range(bounds[0], bounds[1], step), bounds[1]]
                parts = [part(capture.counts, held, bounds, a, b) for a, b in pairwise(cuts)]
                assert np.concatenate(parts).tobytes() == whole.tobytes()


def test_epochs_hang_on_the_start_of_their_segment():
    """Every segment begins an epoch; what is left over at its end belongs to its last one."""
    places, firsts = epoch_places([(0, 100), (100, 1050), (1050, 1400)], 300)
    assert places.tolist() == [[0, 100, 0], [100, 400, 100], [400, 700, 100], [700, 1050, 100], [1050, 1400, 1050]]
    assert firsts.tolist() == [0, 1, 4]


def test_a_record_of_many_short_segments_is_searched():
    """Five hundred triggered windows of 50 us share their background, and hold no storm."""
    rng = np.random.default_rng(5)
    starts = np.arange(500) * 5000
    segments = np.stack([starts, starts * 10], axis=1)
    held, runs = whole(as_capture(rng.normal(0, 20, 2_500_000), segments=segments))
    assert len(held.filters) == -(-500 // EPOCHS_PER_STRETCH)
    assert len(runs) <= 8


def test_a_record_that_stands_still_for_a_while_has_the_limit_of_the_rest():
    """Where the last two fifths stand still the limit stays within a tenth of that of noise alone."""
    signal = np.random.default_rng(6).normal(0, 20, T.size)
    limits = []
    for still in (T.size, 1_200_000):
        signal[still:] = 0
        limits.append(detection_limit_counts(measure_background(as_capture(signal), SETTINGS), RATE_HZ))
    assert limits[1] == pytest.approx(limits[0], rel=0.1)


def test_the_limit_of_a_changing_background_is_the_median_over_time():
    """With a third of the record twice as noisy the limit is that of the rest; with five sixths it is twice that."""
    rng = np.random.default_rng(6)
    noise = rng.normal(0, 20, 3 * T.size)

    def limit(loud):
        signal = noise.copy()
        signal[:loud] *= 2
        return detection_limit_counts(measure_background(as_capture(signal), SETTINGS), RATE_HZ)

    assert limit(T.size) == pytest.approx(limit(0), rel=0.1)
    assert limit(5_000_000) == pytest.approx(2 * limit(0), rel=0.1)
