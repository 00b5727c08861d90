"""What the gallery computes of the world's parts."""

import numpy as np
import pytest

from pdclass.report.gallery_physics import (
    bridge_patterns,
    converter_intervals,
    journey,
    kinds_of,
    phase_patterns,
    spread,
    strongest_ring,
)
from pdclass.sim.drawn_cable import CableRanges
from pdclass.sim.ranges import Scenario


@pytest.fixture(scope="module")
def travelled():
    return journey(CableRanges(), "XLPE", rng=np.random.default_rng(2))


def test_a_travelled_pulse_loses_its_peak_before_its_charge(travelled):
    """With distance the peak falls, the rise and the width grow, and most of the charge is still there."""
    peaks = [step.peak_share for step in travelled.steps]
    assert peaks == sorted(peaks, reverse=True)
    for name in ("rise_ns", "width_ns"):
        grown = [getattr(step, name) for step in travelled.steps]
        assert grown == sorted(grown)
    kilometre = next(step for step in travelled.steps if step.km == 1.0)
    assert kilometre.peak_share < 0.2
    assert 0.9 < kilometre.charge_share <= 1.001


def test_what_is_sent_has_the_width_that_is_said(travelled):
    """A Gaussian 5 ns wide rises from 10 to 90 % in 5 ns times 1.6869 / 2.3548 (closed form)."""
    assert travelled.steps[0].width_ns == pytest.approx(5.0, rel=0.03)
    assert travelled.steps[0].rise_ns == pytest.approx(5.0 * 1.686922 / 2.354820, rel=0.06)


def test_waves_are_moved_to_their_arrival(travelled):
    """Every drawn wave passes a tenth of its peak at time zero and nowhere exceeds one."""
    at_zero = travelled.waves[:, np.searchsorted(travelled.time_ns, 0.0)]
    assert at_zero == pytest.approx(0.1, abs=0.01)
    assert travelled.waves.max() <= 1.0


def test_the_bands_of_a_spread_lie_in_order():
    """10, 50 and 90 % rise in this order at every frequency, and attenuation rises with frequency."""
    found = spread(CableRanges(), "paper", seed=1)
    for band in (found.db_per_km, found.m_per_us):
        assert np.all(np.diff(band, axis=0) > 0)
    assert np.all(np.diff(found.db_per_km[1]) > 0)


def test_the_ring_of_a_known_resonance_is_recovered():
    """A resonant circuit of 8 MHz and Q 12 is found with both figures (closed form)."""
    hz = np.geomspace(0.1e6, 60e6, 4000)
    gain = 1 / np.abs(1 - (hz / 8e6) ** 2 + 1j * hz / 8e6 / 12)
    at_hz, quality = strongest_ring(hz, gain)
    assert at_hz == pytest.approx(8e6, rel=0.01)
    assert quality == pytest.approx(12, rel=0.05)


def test_a_response_without_a_peak_has_no_ring():
    """A falling response gives no number rather than a wrong one."""
    hz = np.geomspace(0.1e6, 60e6, 100)
    assert np.isnan(strongest_ring(hz, 1 / hz)).all()


def test_two_neighbouring_intervals_of_a_converter_make_its_period():
    """Up to jitter the mean of the intervals is half a period: two edges in each."""
    found = converter_intervals(Scenario(name="w"), rng=np.random.default_rng(4))
    assert found.interval_us.mean() == pytest.approx(0.5e6 / found.switching_hz, rel=0.02)


def test_bridges_commutate_at_their_phases():
    """At both ends of six and of twelve commutations in each of fifty cycles, the ends of turning sign."""
    patterns = bridge_patterns(Scenario(name="w"), rng=np.random.default_rng(4))
    for pattern, per_cycle in zip(patterns, (6, 12), strict=True):
        assert pattern.phase_deg.size == pytest.approx(2 * per_cycle * 50, abs=2)
        assert set(pattern.size[::2]) | set(pattern.size[1::2]) == {1.0, -1.0}
        # two sharp places in each sixth or twelfth of the cycle: the firing, and the end of the overlap
        turns = np.exp(2j * np.pi * per_cycle * pattern.phase_deg / 360)
        for sign in (1, -1):
            assert np.abs(turns[pattern.size == sign].mean()) > 0.9


def test_a_world_without_bridges_shows_none():
    """Without thyristors there is no pattern of one, and of bridges only those that the world has."""
    quiet = Scenario.model_validate({"name": "w", "interference": {"families": {"arc": 1.0}}})
    assert bridge_patterns(quiet, rng=np.random.default_rng(4)) == []
    twelve = Scenario.model_validate({"name": "w", "interference": {"thyristor": {"bridges": {"twelve": 1.0}}}})
    found = bridge_patterns(twelve, rng=np.random.default_rng(4))
    assert [one.pattern for one in found] == ["twelve commutations"]


def test_a_world_without_converters_or_with_a_measured_line_says_so():
    """No converter, no intervals; a measured curve, no kinds of cable."""
    quiet = Scenario.model_validate({"name": "w", "interference": {"families": {"arc": 1.0}}})
    assert converter_intervals(quiet, rng=np.random.default_rng(4)) is None
    assert kinds_of(CableRanges(curve="line.csv")) == ()
    assert kinds_of(CableRanges(kinds={"paper": 1.0, "EPR": 0.0})) == ("paper",)


def test_patterns_are_those_that_a_world_can_have():
    """A named world has the patterns of its sources, a drawn one those of its kinds and corona."""
    wide = {one.pattern for one in phase_patterns(Scenario(name="w"), rng=np.random.default_rng(4))}
    assert wide == {"void", "surface", "floating", "corona", "positive-corona"}
    source = {"label": "switchgear", "kind": "floating", "pulses_per_cycle": 1.0, "snr_db": [20.0, 30.0]}
    circuit = {"name": "A", "sensor": "s", "length_m": 300.0, "sources": [source]}
    narrow = Scenario.model_validate({"name": "w", "circuit": [circuit]})
    assert {one.pattern for one in phase_patterns(narrow, rng=np.random.default_rng(4))} == {"floating"}
