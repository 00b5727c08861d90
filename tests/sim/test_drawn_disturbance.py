"""Drawn disturbers have the families, paths and currents that their ranges say."""

from collections import Counter
from typing import get_args

import numpy as np
import pytest
from pydantic import ValidationError

from pdclass.sim.disturbers import Family, Path
from pdclass.sim.drawn_disturbance import DisturberRanges, draw_disturber
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.source import source_spectrum

RANGES = DisturberRanges()
FAMILIES = get_args(Family)


def drawn(family, count=40, **wishes):
    return [draw_disturber(RANGES, family=family, **wishes, rng=np.random.default_rng(seed)) for seed in range(count)]


def of(family):
    return getattr(RANGES, family.replace("-", "_"))


def test_families_come_in_their_proportions():
    """Two thousand disturbers have the families in the stated shares, within 3.5 standard deviations."""
    count, rng = 2000, np.random.default_rng(1)
    found = Counter(draw_disturber(RANGES, rng=rng).family for _ in range(count))
    assert set(RANGES.families) == set(FAMILIES)
    for family, share in RANGES.families.items():
        assert abs(found[family] - count * share) < 3.5 * np.sqrt(count * share * (1 - share))


@pytest.mark.parametrize("family", FAMILIES)
def test_a_family_comes_by_its_own_paths(family):
    """Every path that a family has occurs, and no other."""
    assert {one.path for one in drawn(family, 120)} == set(of(family).paths)


@pytest.mark.parametrize("family", FAMILIES)
def test_family_and_path_can_be_given(family):
    """What is given is not drawn."""
    assert {(one.family, one.path) for one in drawn(family, 5, path="screen")} == {(family, "screen")}


@pytest.mark.parametrize("family", FAMILIES)
def test_currents_fit_into_a_record(family):
    """No current begins before its record, and what comes late is a small share of its peak."""
    s, rate_hz = laplace_grid(), 100e6
    # a sensor with a low corner of 100 kHz, since no sensor lets pass what is slower
    heard = s / (s + 2 * np.pi * 100e3) / (1 + s / (2 * np.pi * 30e6)) ** 2 * np.exp(-s * LEAD_S)
    for one in drawn(family):
        spectrum = source_spectrum(one.current, s)
        assert np.isfinite(spectrum).all()
        wave = np.abs(to_samples(spectrum * heard, rate_hz))
        wave /= wave.max()
        assert wave[:20].max() < 0.02
        assert wave[7000:7400].max() < 0.15


@pytest.mark.parametrize(
    ("family", "kinds"),
    [
        ("converter", {"switching"}),
        ("thyristor", {"mains-locked"}),
        ("switch-mode", {"bursts"}),
        ("arc", {"switching", "bursts"}),
        ("radio-packet", {"random", "bursts"}),
        ("line-corona", {"pattern"}),
        ("sferic", {"random", "bursts"}),
        ("switching-operation", {"bursts"}),
    ],
)
def test_repetition_is_that_of_the_device(family, kinds):
    """Each family repeats as its device does."""
    assert {one.repetition.kind for one in drawn(family)} == kinds


def test_rings_lie_in_their_ranges():
    """Converters, bridges and supplies ring with the frequencies of their ranges, thyristors the slowest."""
    middle = {}
    for family in ("converter", "thyristor", "switch-mode"):
        rings = np.array([one.current.ring_hz for one in drawn(family, 100)])
        low, high = of(family).ring_hz
        assert ((rings >= low) & (rings <= high)).all()
        middle[family] = np.median(rings)
    assert middle["thyristor"] < middle["converter"] < middle["switch-mode"]


def test_bridges_fire_as_often_as_said():
    """Two, six and twelve commutations a cycle occur, six the most often."""
    found = Counter(one.repetition.commutations for one in drawn("thyristor", 200))
    assert set(found) == {2, 6, 12}
    assert found[6] == max(found.values())


def test_a_packet_holds_periods_of_its_radio_frequency():
    """Four deviations of the envelope are at least three periods, and 1 to 20 us unless the frequency is low."""
    for one in drawn("radio-packet"):
        length_s = 2 * (one.current.rise_s + one.current.fall_s)
        assert length_s * one.current.ring_hz >= 3 - 1e-9
        assert 1e-6 <= length_s <= 20e-6


def test_corona_is_slower_after_more_line():
    """What arrives over a long line is slower than what arrives over a short one."""
    rises = {}
    for km in (0.03, 5.0):
        ranges = DisturberRanges.model_validate({"line_corona": {"line_km": (km, km), "rise_s_per_km": (5e-8, 5e-8)}})
        drawn_ones = [draw_disturber(ranges, family="line-corona", rng=np.random.default_rng(s)) for s in range(30)]
        rises[km] = np.median([one.current.rise_s for one in drawn_ones])
    assert rises[5.0] > 250e-9 - 1e-12
    assert rises[5.0] > 3 * rises[0.03]


@pytest.mark.parametrize(
    ("wrong", "complaint"),
    [
        ({"families": {"ghost": 1.0}}, "a name is one of converter.*not ghost"),
        ({"arc": {"burst_pulses": (0, 4)}}, "both lie between 1 and 1000"),
        ({"families": {"arc": 0.0}}, "at least one weight is above zero"),
        ({"arc": {"paths": {"ether": 1.0}}}, "a name is one of radiated.*not ether"),
        ({"thyristor": {"bridges": {"five": 1.0}}}, "a name is one of two, six, twelve"),
    ],
)
def test_unknown_names_are_refused(wrong, complaint):
    """A family, path or bridge that does not exist is an error that lists those that do."""
    with pytest.raises(ValidationError, match=complaint):
        DisturberRanges.model_validate(wrong)


def test_paths_are_those_of_the_station():
    """Four paths exist, and every one is used by some family."""
    used = {path for family in FAMILIES for path in of(family).paths}
    assert used == set(get_args(Path)) == {"radiated", "screen", "feeder", "far-end"}
