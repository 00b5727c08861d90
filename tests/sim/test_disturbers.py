"""Disturbers send when their kind of device does."""

import numpy as np
import pytest

from pdclass.errors import InputError
from pdclass.sim.disturbers import (
    Repetition,
    burst_times,
    commutation_times,
    disturber_signs,
    disturber_times,
    switching_times,
)

MAINS = {"start_deg": 77.0, "deg_per_s": 360 * 50.0}
KINDS = [
    Repetition("random"),
    Repetition("switching", 8e3, 0.01),
    Repetition("mains-locked", commutations=6, firing_deg=40.0, overlap_deg=8.0, jitter_deg=0.1),
    Repetition("bursts", burst_pulses=7, burst_s=0.5e-3),
    Repetition("bursts", 100e3, 0.01, burst_pulses=12),
]


@pytest.mark.parametrize("repetition", KINDS, ids=lambda one: f"{one.kind}-{one.hz:g}")
@pytest.mark.parametrize("count", [0, 1, 5, 40])
def test_times_are_sorted_and_inside(repetition, count):
    """Never more than wanted, in their order, inside the stretch, and the same for the same generator."""
    times = disturber_times(repetition, 0.04, count, **MAINS, rng=np.random.default_rng(3))
    again = disturber_times(repetition, 0.04, count, **MAINS, rng=np.random.default_rng(3))
    assert times.size <= count
    assert (np.diff(times) >= 0).all()
    assert ((times >= 0) & (times < 0.04)).all()
    assert np.array_equal(times, again)


@pytest.mark.parametrize("repetition", [KINDS[0], *KINDS[3:]])
def test_what_has_no_edges_has_as_many_as_wanted(repetition):
    """Random ones and bursts give every pulse that is asked for, in short stretches too."""
    assert disturber_times(repetition, 0.3e-3, 23, **MAINS, rng=np.random.default_rng(5)).size == 23


def test_converter_switches_twice_a_period():
    """Two edges a period, sorted, inside the stretch."""
    times = switching_times(0.05, 4e3, 0.01, rng=np.random.default_rng(4))
    assert abs(times.size - 400) <= 3
    assert (np.diff(times) >= 0).all()
    assert times[0] >= 0
    assert times[-1] < 0.05


def test_fewer_edges_than_there_are_follow_each_other():
    """Of many edges a run of neighbours is taken: every second interval adds up to the switching period."""
    times = disturber_times(Repetition("switching", 8e3, 0.002), 0.05, 12, **MAINS, rng=np.random.default_rng(6))
    assert times.size == 12
    assert times[2:] - times[:-2] == pytest.approx(125e-6, rel=0.1)


@pytest.mark.parametrize("commutations", [2, 6, 12])
def test_commutations_keep_their_phases(commutations):
    """A bridge fires at its angle and every 360/n degrees from there, and each commutation ends after its overlap."""
    repetition = Repetition("mains-locked", commutations=commutations, firing_deg=40.0, overlap_deg=8.0)
    times = commutation_times(repetition, 0.1, 77.0, 360 * 50.0, rng=np.random.default_rng(7))
    phases = np.mod(77.0 + times * 360 * 50.0 - 40.0, 360.0 / commutations)
    ends = np.abs(phases - 8.0) < 1e-6
    starts = np.minimum(phases, 360.0 / commutations - phases) < 1e-6
    assert (ends ^ starts).all()
    assert times.size == 2 * commutations * 5


def test_firing_strays_by_its_jitter():
    """The deviation of the phases is the jitter that was asked for."""
    repetition = Repetition("mains-locked", commutations=6, firing_deg=40.0, jitter_deg=0.2)
    times = commutation_times(repetition, 10.0, 0.0, 360 * 50.0, rng=np.random.default_rng(8))
    strays = np.mod(times * 360 * 50.0 - 40.0 + 30.0, 60.0) - 30.0
    assert strays.std() == pytest.approx(0.2, rel=0.05)


def test_pulses_of_a_burst_lie_together():
    """Thirty pulses in three bursts of ten lie within three stretches of a burst's duration."""
    repetition = Repetition("bursts", burst_pulses=10, burst_s=1e-3)
    times = burst_times(repetition, 1.0, 30, rng=np.random.default_rng(9))
    gaps = np.diff(times)
    assert (gaps > 1e-3).sum() == 2
    groups = np.split(times, np.flatnonzero(gaps > 1e-3) + 1)
    assert [group.size for group in groups] == [10, 10, 10]
    assert all(group[-1] - group[0] <= 1e-3 for group in groups)


def test_a_regular_burst_has_its_frequency():
    """Pulses of a switch-mode burst follow each other with the switching period."""
    repetition = Repetition("bursts", 100e3, 0.01, burst_pulses=20)
    times = burst_times(repetition, 0.01, 20, rng=np.random.default_rng(10))
    assert np.diff(times).mean() == pytest.approx(10e-6, rel=0.02)
    assert np.diff(times) == pytest.approx(10e-6, rel=0.08)


def test_polarities_follow_what_sends():
    """Edges alternate, a burst has one sign, random pulses have either."""

    def signs(repetition, times):
        return disturber_signs(repetition, np.array(times), rng=np.random.default_rng(2))

    assert signs(Repetition("switching", hz=5e3), [1e-4, 2e-4, 3e-4]).tolist() == [1, -1, 1]
    bridge = Repetition("mains-locked", commutations=6)
    assert signs(bridge, [5e-3, 15e-3, 25e-3]).tolist() == [1, -1, 1]
    burst = signs(Repetition("bursts", burst_pulses=3, burst_s=1e-4), [0, 2e-5, 4e-5, 5e-3, 5.01e-3])
    assert len(set(burst[:3])) == len(set(burst[3:])) == 1
    assert set(signs(Repetition("random"), np.linspace(0, 1e-2, 60))) == {-1.0, 1.0}


def test_a_phase_pattern_is_no_repetition():
    """Times of a corona are those of its activity; asking for them here is refused, not answered at random."""
    with pytest.raises(InputError, match="activity of its pattern"):
        disturber_times(Repetition("pattern", pattern="corona"), 0.04, 3, **MAINS, rng=np.random.default_rng(1))
