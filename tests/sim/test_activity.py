"""Gaps discharge when, as often and as strongly as the limits of their model say."""

import numpy as np
import pytest

from pdclass.errors import InputError
from pdclass.sim.activity import (
    Corona,
    Gap,
    corona_discharges,
    discharges,
    gap_discharges,
)

CYCLES = 200
VOID = Gap(overvoltage=1.8, residual=0.3, lag_deg=4.0, memory=0.8)


def rng(seed=1):
    return np.random.default_rng(seed)


def per_half_cycle(found, sign):
    return (np.sign(found.charge) == sign).sum() / CYCLES


def from_own_peak(found):
    """Phase from the peak of each discharge's own sign, -180 to 180 [deg]."""
    return np.mod(found.phase_deg - np.where(found.charge > 0, 90.0, 270.0) + 180.0, 360.0) - 180.0


@pytest.mark.parametrize("model", [Gap(0.99, 0.0, 0.0), Gap(0.0, 0.0, 1.0), Corona(1.0, True, 100.0, 0.1, 0.1)])
def test_nothing_below_inception(model):
    """Below the inception or onset field there is no discharge."""
    assert discharges(model, CYCLES, rng=rng()).phase_deg.size == 0


@pytest.mark.parametrize(("overvoltage", "residual"), [(1.05, 0.0), (1.5, 0.0), (2.3, 0.0), (1.7, 0.6), (3.05, 0.5)])
def test_three_capacitances(overvoltage, residual):
    """Without lag and decay a half cycle has 2 (1 + floor((a - 1)/(1 - r))) discharges, each of size 1 - r.

    Follows from the three-capacitance model: the first one at the inception field, the next after every further step;
    from peak to peak the field of the voltage runs twice as far, and what the last quarter left over is made up.
    """
    found = gap_discharges(Gap(overvoltage, residual, 0.0), CYCLES, rng=rng())
    wanted = 2 * (1 + np.floor((overvoltage - 1) / (1 - residual)))
    assert per_half_cycle(found, 1) == wanted
    assert per_half_cycle(found, -1) == wanted
    assert np.abs(found.charge) == pytest.approx(1 - residual)


def test_discharges_without_lag_come_at_equal_steps_of_the_voltage():
    """Within a half cycle the applied field rises by 1 - r from each discharge to the next."""
    found = gap_discharges(Gap(1.9, 0.6, 0.0), 10, rng=rng())
    applied = 1.9 * np.sin(np.deg2rad(found.phase_deg))
    same = np.sign(found.charge[1:]) == np.sign(found.charge[:-1])
    assert np.abs(np.diff(applied))[same] == pytest.approx(0.4)


def test_lag_over_a_ramp_is_rayleigh():
    """A short wait for the first electron follows Rayleigh's law, as the rate grows evenly from the inception on.

    With no memory of charge the first discharge of a positive half cycle waits from asin(1/a), with the rate
    (a cos x)(x - x0)/lag: mean sqrt(pi/2 lag/(a cos x0)).
    """
    gap = Gap(overvoltage=1.5, residual=0.0, lag_deg=0.05, memory=0.0)
    found = gap_discharges(gap, 2000, rng=rng())
    first = found.phase_deg[(found.charge > 0) & (np.mod(found.phase_deg, 360) < 90)]
    begin = np.arcsin(1 / 1.5)
    waits = np.deg2rad(np.mod(first, 360.0)) - begin
    scale = np.sqrt(np.deg2rad(0.05) / (1.5 * np.cos(begin)))
    assert (waits >= 0).all()
    assert waits.mean() == pytest.approx(np.sqrt(np.pi / 2) * scale, rel=0.04)
    assert np.median(waits) == pytest.approx(np.sqrt(2 * np.log(2)) * scale, rel=0.04)


def test_no_discharge_before_the_field_is_reached():
    """Every discharge finds at least the inception field, so that its size is at least 1 - r."""
    found = gap_discharges(VOID, CYCLES, rng=rng())
    assert np.abs(found.charge).min() >= 0.7 - 1e-9


def test_higher_voltage_more_discharges():
    """The number of discharges grows with the overvoltage."""
    counts = [gap_discharges(Gap(a, 0.5, 2.0, 0.8), CYCLES, rng=rng()).phase_deg.size for a in (1.1, 1.5, 2.0, 3.0)]
    assert counts == sorted(counts)
    assert counts[-1] > 2 * counts[0]


def test_longer_lag_fewer_and_larger_discharges():
    """With scarce electrons there are fewer discharges, later in the cycle and larger."""
    soon, late = (gap_discharges(Gap(1.8, 0.3, lag, 0.8), CYCLES, rng=rng()) for lag in (0.2, 20.0))
    assert late.phase_deg.size < soon.phase_deg.size
    assert np.abs(late.charge).mean() > 1.2 * np.abs(soon.charge).mean()


def test_symmetric_void_has_equal_half_cycles():
    """A symmetric void discharges as often in both half cycles, within three deviations of a count."""
    found = gap_discharges(VOID, CYCLES, rng=rng())
    positive, negative = (found.charge > 0).sum(), (found.charge < 0).sum()
    assert abs(positive - negative) < 3 * np.sqrt(positive + negative)


def test_asymmetry_makes_one_half_cycle_rarer_and_larger():
    """With the higher inception field in the negative half cycles these have fewer and larger discharges."""
    found = gap_discharges(Gap(2.5, 0.4, 1.0, 0.4, asymmetry=2.0), CYCLES, rng=rng())
    positive, negative = found.charge[found.charge > 0], -found.charge[found.charge < 0]
    assert 0 < negative.size < 0.7 * positive.size
    assert negative.mean() > 1.5 * positive.mean()


def test_discharges_lead_the_peaks():
    """Nearly all discharges come while the voltage runs towards the peak of their sign."""
    found = gap_discharges(VOID, CYCLES, rng=rng())
    assert (from_own_peak(found) < 5).mean() > 0.9


def test_left_charge_makes_discharges_before_the_zero_crossing():
    """Far over inception the charge that is left discharges before the voltage turns; without memory none does."""
    before = [
        (from_own_peak(gap_discharges(Gap(2.5, 0.3, 0.5, memory), CYCLES, rng=rng())) < -90).mean()
        for memory in (0.0, 1.0)
    ]
    assert before[0] == 0
    assert before[1] > 0.1


def test_order_and_span():
    """Discharges come in the order of time, none later than the cycles asked for."""
    found = gap_discharges(VOID, 7, rng=rng())
    assert (np.diff(found.phase_deg) > 0).all()
    assert found.phase_deg[0] > -90
    assert found.phase_deg[-1] < 7 * 360


def test_same_generator_same_discharges():
    """The model is a function of its generator alone."""
    for model in (VOID, Corona(1.5, True, 100.0, 0.1, 0.1)):
        first, second = (discharges(model, 20, rng=rng(3)) for _ in range(2))
        assert first.phase_deg.tobytes() == second.phase_deg.tobytes()
        assert first.charge.tobytes() == second.charge.tobytes()


def test_corona_stands_at_its_peak():
    """Negative corona stands around the negative peak, positive around the positive one, within the onset's phases."""
    for negative, peak in ((True, 270.0), (False, 90.0)):
        found = corona_discharges(Corona(1.3, negative, 60.0, 0.5, 0.2), CYCLES, rng=rng())
        phase = np.mod(found.phase_deg, 360)
        assert phase.mean() == pytest.approx(peak, abs=2)
        assert np.abs(phase - peak).max() <= 90 - np.rad2deg(np.arcsin(1 / 1.3)) + 0.1
        assert (np.sign(found.charge) == (-1 if negative else 1)).all()


def test_corona_has_its_number():
    """At twice the onset voltage a corona has the number of pulses given, at 1.2 times that of the excess' integral."""
    twice = corona_discharges(Corona(2.0, True, 50.0, 0.1, 0.1), CYCLES, rng=rng())
    assert twice.phase_deg.size / CYCLES == pytest.approx(50.0, rel=0.01)
    x = np.linspace(0, np.pi, 100_001)
    shares = [np.maximum(a * np.sin(x) - 1, 0).sum() for a in (1.2, 2.0)]
    little = corona_discharges(Corona(1.2, True, 50.0, 0.1, 0.1), CYCLES, rng=rng())
    assert little.phase_deg.size / CYCLES == pytest.approx(50.0 * shares[0] / shares[1], rel=0.02)


def test_trichel_pulses_are_regular():
    """With little jitter the steps of a negative corona are nearly equal around the peak."""
    found = corona_discharges(Corona(1.5, True, 50.0, 0.05, 0.1), CYCLES, rng=rng())
    near = np.abs(np.mod(found.phase_deg, 360) - 270) < 10
    steps = np.diff(found.phase_deg)[near[1:] & near[:-1]]
    assert steps.std() < 0.1 * steps.mean()


@pytest.mark.parametrize(
    ("build", "field"),
    [
        (lambda: Gap(-1.0, 0.0, 0.0), "overvoltage"),
        (lambda: Gap(1.0, 1.0, 0.0), "residual"),
        (lambda: Gap(1.0, 0.0, -1.0), "lag_deg"),
        (lambda: Gap(1.0, 0.0, 0.0, memory=1.1), "memory"),
        (lambda: Gap(1.0, 0.0, 0.0, asymmetry=0.0), "asymmetry"),
        (lambda: Corona(-1.0, True, 1.0, 0.1, 0.1), "overvoltage"),
        (lambda: Corona(1.5, True, 0.0, 0.1, 0.1), "per_cycle"),
        (lambda: Corona(1.5, True, 1.0, 2.0, 0.1), "jitter"),
        (lambda: Corona(1.5, True, 1.0, 0.1, -0.1), "spread"),
    ],
)
def test_impossible_models_are_refused(build, field):
    """A value out of its bounds is an error that names it."""
    with pytest.raises(InputError, match=field):
        build()
