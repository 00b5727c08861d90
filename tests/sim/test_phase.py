"""Pulses come at the phases of their kind."""

from dataclasses import astuple
from typing import get_args

import numpy as np
import pytest

from pdclass.sim.activity import Corona, Gap
from pdclass.sim.phase import (
    Activity,
    ActivityRanges,
    Pattern,
    activity_phases,
    draw_activity,
    half_cycle_sign,
)

PATTERNS = get_args(Pattern)


def rng(seed=1):
    return np.random.default_rng(seed)


@pytest.mark.parametrize("pattern", PATTERNS)
@pytest.mark.parametrize(("start_deg", "span_deg"), [(200.0, 54.0), (-40.0, 18.0), (1e6 + 0.25, 1080.0)])
def test_as_many_as_wanted_within_the_stretch(pattern, start_deg, span_deg):
    """Whatever the pattern, the stretch holds the number of pulses asked for, in order, and none outside."""
    for count in (0, 1, 300):
        found = activity_phases(draw_activity(pattern, rng=rng(4)), count, start_deg, span_deg, rng=rng(5))
        assert found.phase_deg.size == found.charge.size == count
        assert (found.phase_deg >= start_deg).all()
        assert (found.phase_deg <= start_deg + span_deg).all()
        assert (np.diff(found.phase_deg) >= 0).all()


@pytest.mark.parametrize("pattern", PATTERNS)
def test_same_generator_same_pulses(pattern):
    """Activity and pulses are functions of their generators alone."""
    runs = [
        activity_phases(draw_activity(pattern, rng=rng(7)), 40, 30.0, 300.0, rng=rng(8)).phase_deg.tobytes()
        for _ in range(2)
    ]
    assert runs[0] == runs[1]


def phases_of(pattern, count, span_deg, seed):
    """Phases of one drawn source [deg]."""
    one = rng(seed)
    return activity_phases(draw_activity(pattern, rng=one), count, 0.0, span_deg, rng=one).phase_deg


def test_void_lies_in_the_rising_quarters():
    """Over fifty drawn voids most pulses come while the voltage runs towards a peak, hardly any just after one."""
    phases = [phases_of("void", 200, 3600.0, seed) for seed in range(50)]
    half = np.mod(np.concatenate(phases), 180.0)
    assert (half < 90).mean() > 0.7
    assert ((half > 100) & (half < 130)).mean() < 0.05


def test_surface_is_unlike_in_the_half_cycles():
    """A surface's two half cycles differ in number by more than a void's do."""

    def difference(pattern):
        signs = [half_cycle_sign(phases_of(pattern, 200, 7200.0, seed)).mean() for seed in range(60)]
        return np.mean(np.abs(signs))

    assert difference("surface") > 2 * difference("void")


def test_floating_part_is_regular():
    """A floating part's pulses are nearly equal, and less spread in size than a void's."""

    def spread(pattern):
        found = [
            np.abs(activity_phases(draw_activity(pattern, rng=rng(k)), 200, 0.0, 7200.0, rng=rng(k)).charge).std()
            for k in range(30)
        ]
        return np.median(found)

    assert 0.005 < spread("floating") < 0.06
    assert spread("void") > 0.05


@pytest.mark.parametrize(("pattern", "peak_deg", "sign"), [("corona", 270.0, -1), ("positive-corona", 90.0, 1)])
def test_corona_stands_at_its_peak(pattern, peak_deg, sign):
    """Corona stands around the peak of its polarity, but for stray pulses."""
    found = activity_phases(draw_activity(pattern, rng=rng()), 1000, 0.0, 36_000.0, rng=rng())
    phase = np.mod(found.phase_deg, 360)
    near = np.abs(phase - peak_deg) < 65
    assert near.mean() > 0.97
    assert (np.sign(found.charge[near]) == sign).all()


@pytest.mark.parametrize("pattern", ["uniform", "switching"])
def test_patterns_without_phase_are_even(pattern):
    """Where the mains mean nothing every twelfth of the cycle holds as many pulses, and both signs come."""
    found = activity_phases(draw_activity(pattern, rng=rng()), 12_000, 0.0, 3600.0, rng=rng())
    counts, _ = np.histogram(np.mod(found.phase_deg, 360), 12, (0, 360))
    assert np.abs(counts - 1000).max() < 5 * np.sqrt(1000)
    assert abs(found.charge.mean()) < 0.05


def test_quiet_stretch_holds_stray_pulses():
    """Where the source is quiet the pulses that must come fall at any phase, with the sign of the half cycle."""
    void = Activity(Gap(1.2, 0.0, 0.0))
    found = activity_phases(void, 500, 100.0, 40.0, rng=rng())
    counts, _ = np.histogram(found.phase_deg, 4, (100, 140))
    assert counts.min() > 80
    assert (found.charge == 1).all()


def test_stray_share():
    """As many pulses as the share says come at any phase, a corona's own only while it is above its onset."""
    found = activity_phases(Activity(Corona(1.3, True, 60.0, 0.5, 0.1), 0.2), 2000, 0.0, 360.0 * 400, rng=rng())
    above_onset_deg = 90 - np.rad2deg(np.arcsin(1 / 1.3))
    away = np.abs(np.mod(found.phase_deg, 360) - 270) > above_onset_deg + 0.01
    assert away.mean() == pytest.approx(0.2 * (1 - above_onset_deg / 180), abs=0.025)


def test_thinning_keeps_the_model():
    """With fewer pulses asked for than the model has, each is one of the model's; sizes are relative to the median."""
    activity = Activity(Gap(1.9, 0.6, 0.0))
    found = activity_phases(activity, 50, 0.0, 3600.0, rng=rng())
    of_model = np.mod(activity_phases(activity, 100, 0.0, 3600.0, rng=rng()).phase_deg, 360)
    apart = np.abs(np.mod(found.phase_deg, 360)[:, None] - of_model[None, :]).min(axis=1)
    assert apart.max() < 1e-6
    assert np.abs(found.charge) == pytest.approx(1.0)


def test_many_pulses_are_laid_over_each_other():
    """Where more pulses are wanted than one run has, runs are laid over each other rather than pulses copied."""
    activity = Activity(Corona(1.3, False, 5.0, 1.0, 0.5))
    found = activity_phases(activity, 600, 0.0, 36_000.0, rng=rng())
    assert np.unique(found.charge).size > 500


def test_activity_lasts_over_stretches():
    """With an activity given, two stretches of the same source keep to the same phases."""
    activity = Activity(Gap(1.9, 0.6, 0.0))
    first, second = (
        np.unique(np.round(np.mod(activity_phases(activity, 50, start, 720.0, rng=rng()).phase_deg, 360), 3))
        for start in (0.0, 7200.0)
    )
    assert set(second) <= set(first) | {360.0}


def test_drawn_activities_lie_in_their_ranges():
    """What is drawn is a model of the pattern's kind within the ranges, and narrow ranges are kept."""
    narrow = ActivityRanges.model_validate(
        {
            "void": {
                "overvoltage": (1.5, 1.5),
                "residual": (0.2, 0.2),
                "lag_deg": (2, 2),
                "memory": (0.5, 0.5),
                "asymmetry": (1, 1),
            }
        }
    )
    assert astuple(draw_activity("void", narrow, rng=rng()).model) == pytest.approx((1.5, 0.2, 2.0, 0.5, 1.0))
    assert isinstance(draw_activity("corona", rng=rng()).model, Corona)
    for seed in range(100):
        gap = draw_activity("surface", rng=rng(seed)).model
        assert 1.3 <= gap.overvoltage <= 3.0
        assert 1.3 <= max(gap.asymmetry, 1 / gap.asymmetry) <= 2.5


def test_sign_turns_with_the_half_cycle():
    """Positive in the first half cycle, negative in the second."""
    assert half_cycle_sign(np.array([0.0, 179.0, 181.0, 359.0, 361.0])).tolist() == [1, 1, -1, -1, 1]
