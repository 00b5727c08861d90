"""Pulses come at the phases of their kind."""

import numpy as np
import pytest

from pdclass.sim.phase import draw_phases, half_cycle_sign, phase_density


@pytest.mark.parametrize("pattern", ["void", "surface", "floating", "uniform", "switching"])
def test_density_is_positive_and_periodic(pattern):
    """No phase is impossible, and a cycle later is the same phase."""
    phase = np.linspace(0, 360, 721)
    density = phase_density(pattern, phase)
    assert (density > 0).all()
    assert density == pytest.approx(phase_density(pattern, phase + 720.0), rel=1e-9)


def test_draws_follow_the_density():
    """Over three cycles a void's pulses fall into its two bunches as often as the density says."""
    drawn = draw_phases("void", 20_000, 100.0, 1080.0, rng=np.random.default_rng(1))
    assert drawn.min() >= 100.0
    assert drawn.max() <= 1180.0
    grid = np.linspace(0, 360, 3601)[:-1]
    wanted = phase_density("void", grid)
    inside = np.mod(drawn, 180.0) < 90.0
    assert inside.mean() == pytest.approx(wanted[np.mod(grid, 180) < 90].sum() / wanted.sum(), abs=0.01)


def test_short_stretches_keep_to_their_phases():
    """A capture of a few milliseconds draws only from the phases that it covers."""
    drawn = draw_phases("floating", 500, 200.0, 20.0, rng=np.random.default_rng(2))
    assert (drawn >= 200).all()
    assert (drawn <= 220).all()


def test_sign_turns_with_the_half_cycle():
    """Positive in the first half cycle, negative in the second."""
    assert half_cycle_sign(np.array([0.0, 179.0, 181.0, 359.0, 361.0])).tolist() == [1, 1, -1, -1, 1]
