"""What is drawn lies in its ranges, and the same generator draws the same."""

import numpy as np

from pdclass.sim.draw import (
    draw_arc,
    draw_background,
    draw_cable,
    draw_converter,
    draw_discharge,
    draw_near_end,
    draw_receiver,
    log_even,
    whole,
)
from pdclass.sim.ranges import CableRanges, CaptureRanges, InterferenceRanges, NearEndRanges


def test_same_generator_same_parts():
    """Every draw is a function of its generator alone."""
    draws = [
        lambda rng: draw_cable(CableRanges(), rng=rng),
        lambda rng: draw_near_end(NearEndRanges(), rng=rng),
        lambda rng: draw_receiver(CaptureRanges(), rng=rng),
        lambda rng: draw_background(InterferenceRanges(), rng=rng),
        lambda rng: draw_converter(InterferenceRanges(), rng=rng),
        lambda rng: draw_discharge(rng=rng),
        lambda rng: draw_arc(rng=rng),
    ]
    for draw in draws:
        one, same, other = (draw(np.random.default_rng(seed)) for seed in (7, 7, 8))
        assert one == same
        assert one != other


def test_numbers_keep_to_their_bounds():
    """Even logarithms reach both decades alike; whole numbers include both bounds."""
    rng = np.random.default_rng(1)
    drawn = np.array([log_even((1.0, 100.0), rng=rng) for _ in range(4000)])
    assert drawn.min() >= 1
    assert drawn.max() <= 100
    assert abs((drawn < 10).mean() - 0.5) < 0.03
    assert {whole((2, 4), rng=rng) for _ in range(100)} == {2, 3, 4}


def test_named_carriers_are_always_there():
    """A transmitter that the scenario names is among the carriers, with its own random height."""
    ranges = InterferenceRanges(carriers=(0, 2), carriers_hz=(909e3,))
    for seed in range(5):
        background = draw_background(ranges, rng=np.random.default_rng(seed))
        assert background.carriers[0].hz == 909e3
        assert 1 <= len(background.carriers) <= 3


def test_panels_and_feeders_are_as_asked():
    """Two or three panels with at most four further feeders, none of them in the first panel."""
    for seed in range(30):
        near = draw_near_end(NearEndRanges(), rng=np.random.default_rng(seed))
        assert len(near.panels) in (2, 3)
        assert sum(len(panel.feeders) for panel in near.panels) <= 4
        assert near.panels[0].feeders == ()
