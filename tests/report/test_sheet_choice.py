"""Which pulses a sheet shows."""

import numpy as np
import pytest

from pdclass.pulses import Chain, PulseSet, typed_table
from pdclass.report.sheet_choice import _shared_evenly, chosen_pulses


@pytest.fixture(scope="module")
def pulses():
    """Sixty pulses of two shapes, most of them low and slow, a few high and quick, one an echo."""
    rng = np.random.default_rng(4)
    time_us = (np.arange(2000) - 500) / 100.0
    late = np.maximum(time_us, 0)
    quick = np.arange(60) >= 54
    width = np.where(quick, 0.1, 1.0)[:, None] * rng.uniform(0.9, 1.1, (60, 1))
    shape = np.where(time_us >= 0, np.exp(-late / width) - np.exp(-late / 0.02), 0.0)
    height = np.where(quick, 1.0, 0.1)[:, None]
    waves = (height * shape + rng.normal(0, 2e-3, shape.shape)).astype(np.float32)
    rows = {
        "circuit": ["A"] * 60,
        "session": ["one"] * 60,
        "snr_db": np.where(quick, 50.0, 32.0),
        "duration_us": np.full(60, 5.0),
        "echo_of": [*[None] * 59, "p03"],
    }
    return PulseSet(waves, (Chain(100e6, band_hz=(0.1e6, 25e6)),), typed_table(rows, [f"p{n:02d}" for n in range(60)]))


def test_few_pulses_are_all_shown(pulses):
    """Up to the limit every pulse is shown, echoes left out, each standing for itself."""
    chosen = chosen_pulses(pulses, 59)
    assert [one.place for one in chosen] == list(range(59))
    assert {one.stands_for for one in chosen} == {1}


def test_many_are_spread_over_height_and_stand_for_all(pulses):
    """A rare high band gets its share, the places are in order, and together they stand for every pulse."""
    chosen = chosen_pulses(pulses, 8)
    places = [one.place for one in chosen]
    assert places == sorted(places)
    assert len(places) == 8
    assert sum(place >= 54 for place in places) == 4
    assert sum(one.stands_for for one in chosen) == 59
    assert 59 not in places


def test_like_pulses_share_one_picture(pulses):
    """Two shapes in one band and two places for them: one picture of each."""
    level = PulseSet(pulses.waves, pulses.chains, pulses.table.assign(snr_db=32.0))
    places = [one.place for one in chosen_pulses(level, 2)]
    assert sum(place >= 54 for place in places) == 1


def test_the_same_pulses_are_chosen_again(pulses):
    """The choice has no chance in it."""
    assert chosen_pulses(pulses, 7) == chosen_pulses(pulses, 7)


@pytest.mark.parametrize(
    ("sizes", "most", "quotas"),
    [([0, 3, 100], 10, [0, 3, 7]), ([5, 5], 20, [5, 5]), ([9, 9, 9], 2, [1, 1, 0]), ([0, 0], 3, [0, 0])],
)
def test_places_are_shared_evenly(sizes, most, quotas):
    """No band gets more than it holds, and what it leaves goes to the others."""
    assert _shared_evenly(sizes, most) == quotas
