"""Drawn receivers are what their ranges say."""

import numpy as np
import pytest
from pydantic import ValidationError

from pdclass.sim.drawn_chain import ChainRanges, draw_receiver
from pdclass.sim.receiver import chain_band_hz

RANGES = ChainRanges()
RECEIVERS = [draw_receiver(RANGES, rng=np.random.default_rng(seed)) for seed in range(300)]


def within(values, bounds):
    return (np.array(values) >= bounds[0] * (1 - 1e-9)).all() and (np.array(values) <= bounds[1] * (1 + 1e-9)).all()


def test_what_the_user_knows_is_in_its_range():
    """Transfer impedance, both corners of the transformer, jitter and saturation lie in their ranges."""
    assert within([one.transfer_ohm for one in RECEIVERS], RANGES.transfer_ohm)
    assert within([one.low_hz for one in RECEIVERS], RANGES.low_corner_hz)
    assert within([one.high_hz for one in RECEIVERS], RANGES.high_corner_hz)
    assert within([one.jitter_s for one in RECEIVERS], RANGES.jitter_s)
    assert within([one.saturation for one in RECEIVERS], RANGES.saturation)


def test_ranges_are_filled():
    """Both ends of the corners' ranges are reached, and every rate, order and kind of filter occurs."""
    lows = np.log([one.low_hz for one in RECEIVERS])
    assert np.percentile(np.exp(lows), [5, 95]) == pytest.approx([33.7e3, 267e3], rel=0.15)
    assert {one.rate_hz for one in RECEIVERS} == set(RANGES.rates_hz)
    assert {one.anti_alias.order for one in RECEIVERS} == {2, 3, 4, 5}
    assert {one.anti_alias.kind for one in RECEIVERS} == {"butterworth", "bessel"}


def test_filters_stay_below_half_the_rate():
    """The anti-alias corner is the drawn share of the rate, and never above 48 MHz."""
    for one in RECEIVERS:
        share = one.anti_alias.corner_hz / one.rate_hz
        assert share <= 0.45
        assert share >= 0.35 or one.anti_alias.corner_hz == 48e6


def test_elements_are_of_this_world():
    """Turns can carry the transfer impedance; inductances and capacitances are those of a few turns on a core."""
    transformers = [one.transformer for one in RECEIVERS]
    assert all(one.turns >= 1 for one in transformers)
    assert all(one.burden_ohm > 0 for one in transformers)
    assert within([one.magnetising_henry for one in transformers], (1e-6, 500e-6))
    assert within([one.leakage_henry for one in transformers], (0.1e-9, 3e-6))
    assert within([one.winding_farad for one in transformers], (5e-12, 30e-9))


def test_the_band_of_a_chain_is_near_its_corners():
    """Nearly every stated band begins near the transformer's lower corner and ends below filter and transformer."""
    bands = np.array([chain_band_hz(one) for one in RECEIVERS])
    low = bands[:, 0] / np.array([one.low_hz for one in RECEIVERS])
    assert np.percentile(low, [2, 98]) == pytest.approx([1.0, 1.0], abs=0.2)
    assert (bands[:, 1] > 4e6).all()


def test_same_seed_same_receiver():
    """The generator alone decides."""
    assert draw_receiver(RANGES, rng=np.random.default_rng(7)) == RECEIVERS[7]


@pytest.mark.parametrize(
    ("wrong", "complaint"),
    [
        ({"rates_hz": (99e6,)}, "a rate is one of"),
        ({"filters": {"notch": 1.0}}, "one of butterworth, bessel, not notch"),
        ({"saturation": (0.0, 1.0)}, "both lie between 0 and 0.99"),
        ({"turns": (5, 2)}, "the lower bound stands first"),
        ({"saturation": (0.6, 0.2)}, "the lower bound stands first"),
        ({"rates_hz": ()}, "at least 1 item"),
    ],
)
def test_ranges_out_of_bounds_are_refused(wrong, complaint):
    """A range that no receiver can have is an error."""
    with pytest.raises(ValidationError, match=complaint):
        ChainRanges(**wrong)
