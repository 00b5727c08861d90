"""Events are parted where a new pulse begins, and nowhere else."""

import numpy as np
import pytest
from closed_form import as_capture, damped_sine, double_exponential

from pdclass.extract import extract
from pdclass.extract.events import event_end, found_in, in_order, strongest_box, threshold_sigmas

FIRST, APART, COUNT = 5000, 25_000, 6


def onsets_after(parts, seed=3):
    """Onsets found after each of six plantings of (delay, height, wave), counted from the planting."""
    rng = np.random.default_rng(seed)
    signal = rng.normal(0, 10, (COUNT + 1) * APART)
    for k in range(COUNT):
        for delay, height, wave in parts:
            begin = FIRST + APART * k + delay
            signal[begin : begin + wave.size] += height * wave
    found = extract(as_capture(signal)).pulses.table["onset_sample"].to_numpy()
    starts = FIRST + APART * np.arange(COUNT)
    return [(found[(found > start - 300) & (found < start + 4000)] - start).tolist() for start in starts]


@pytest.mark.parametrize("height", [500, 1000, 8000])
@pytest.mark.parametrize(
    ("delay", "share", "rise_s", "fall_s"),
    [
        (20, 1.0, 5e-9, 20e-9),
        (20, 1.0, 12e-9, 60e-9),
        (45, 1.0, 30e-9, 150e-9),
        (60, 1.0, 80e-9, 250e-9),
        (100, 0.4, 30e-9, 150e-9),
        (100, -1.0, 30e-9, 150e-9),
        (100, -0.4, 30e-9, 150e-9),
    ],
)
def test_a_second_pulse_parts_from_the_first(delay, share, rise_s, fall_s, height):
    """Equal pulses from 0.2 us, 1 to 0.4 and of the other polarity from 1 us are two, and only two."""
    wave = double_exponential(rise_s, fall_s)
    for found in onsets_after([(0, height, wave), (delay, share * height, wave)]):
        assert found == pytest.approx([0, delay], abs=5)


@pytest.mark.parametrize("height", [300, 1500, 8000])
@pytest.mark.parametrize("frequency_hz", [6e6, 15e6])
def test_a_mode_with_a_quality_of_twenty_is_one_event(frequency_hz, height):
    """What rings stays one event however high it stands."""
    wave = damped_sine(frequency_hz, 20 / (np.pi * frequency_hz), span_s=10e-6)
    assert all(len(found) == 1 for found in onsets_after([(0, height, wave)]))


@pytest.mark.parametrize("height", [300, 1500, 8000])
def test_an_overlapping_second_hump_is_no_event(height):
    """A second hump of 0.7 a quarter of a microsecond later, on the shoulder of the first, belongs to the pulse."""
    wave = double_exponential(30e-9, 150e-9)
    wave[25:] += 0.7 * wave[:-25]
    assert all(len(found) == 1 for found in onsets_after([(0, height, wave)]))


def test_what_a_filter_leaves_behind_a_pulse_is_no_event():
    """In a tone of 1.5 MHz, three noise levels high, a hundred fast pulses are a hundred events, or three more."""
    rng = np.random.default_rng(9)
    signal = rng.normal(0, 20, 2_000_000) + 60 * np.cos(2 * np.pi * 1.5e6 * np.arange(2_000_000) / 100e6)
    wave = double_exponential(12e-9, 60e-9)
    for onset in np.arange(100) * 20_000 + rng.integers(2000, 14_000, 100):
        signal[onset : onset + wave.size] += rng.choice([-1, 1]) * 400 * wave
    assert 100 <= extract(as_capture(signal)).found <= 103


def test_a_piece_that_continues_has_no_event_at_its_first_place():
    """A steady burst gives an event where it begins, none where it is merely cut."""
    rng = np.random.default_rng(4)
    white = rng.normal(0, 1, 6000).astype(np.float32)
    white[1000:5000] += (8 * np.sin(0.9 * np.arange(4000))).astype(np.float32)
    pieces = np.array([[600, 1000, 3000, 6000, 0], [2600, 3000, 5000, 6000, 1]])
    begun, _ = found_in(white, pieces[0], 100e6)
    cut, _ = found_in(white, pieces[1], 100e6)
    assert abs(begun[0, 0] - 1000) <= 5
    assert not len(cut)


def test_the_end_is_where_the_energy_has_sunk():
    """A level of ten noise levels for 200 samples ends within a smoothing length after it stops."""
    white = np.random.default_rng(5).normal(0, 1, 2000).astype(np.float32)
    white[500:700] += 10
    assert 700 <= event_end(white, 500, 2000, 30) <= 730
    assert event_end(white, 500, 640, 30) == 640


def test_the_strongest_box_has_the_pulse_under_it():
    """A step of half a noise level over 128 samples is found as a box of that width there."""
    white = np.random.default_rng(6).normal(0, 0.2, 1000).astype(np.float32)
    white[400:528] += 0.5
    place, width = strongest_box(white, 0, 1000)
    assert (abs(place - 400) <= 10, width) == (True, 128)


def test_events_found_twice_stay_once_and_ends_stop_at_onsets():
    """Of two onsets within the attack one stays; an earlier event ends where the next one begins."""
    ends = np.array([50, 60, 120])
    kept = in_order(np.array([10, 12, 40]), ends, 6)
    assert kept.tolist() == [0, 2]
    assert ends[kept].tolist() == [40, 120]


def test_the_threshold_is_that_of_the_stated_rate():
    """For boxes of one sample a false event in a thousand samples needs the 0.05 % point of the normal law."""
    assert threshold_sigmas(1, 1000.0, 1.0)[0] == pytest.approx(3.2905, abs=1e-3)
    assert np.all(np.diff(threshold_sigmas(8, 2e6, 1.0)) <= 0)
