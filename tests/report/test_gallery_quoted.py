"""Where drawn cables lie beside the ranges quoted in the trade."""

import numpy as np
import pytest

from pdclass.report.gallery_physics import Spread, spread
from pdclass.report.gallery_quoted import beside_quoted
from pdclass.sim.drawn_cable import CableRanges

MHZ = np.array([1.0, 10.0, 30.0])


def xlpe(low, high, slow, fast):
    """Bands of XLPE, each with the same values at 1, 10 and 30 MHz but for attenuation, which is given at each."""
    losses = np.array([low, np.sqrt(np.multiply(low, high)), high], float)
    return Spread("XLPE", MHZ, losses, np.array([[slow] * 3, [170.0] * 3, [fast] * 3]))


def test_a_band_within_is_said_to_be_within():
    """Nothing lies outside, and the sentence says so."""
    assert beside_quoted(xlpe([2, 12, 20], [9, 50, 90], 165.0, 175.0)) == "The band lies within what the trade quotes."


@pytest.mark.parametrize(
    ("band", "words"),
    [
        (
            xlpe([2, 12, 20], [9, 74, 90], 165.0, 175.0),
            "at 10 MHz the 90 % line lies a little above the bar (74.0 against 60",
        ),
        (
            xlpe([0.5, 12, 20], [9, 50, 90], 165.0, 175.0),
            "at 1 MHz the 10 % line lies well below the bar (0.500 against 1",
        ),
        (
            xlpe([2, 12, 20], [9, 50, 90], 155.0, 175.0),
            "at 1 MHz the 10 % velocity lies a little below the lower line (155",
        ),
        (
            xlpe([2, 12, 20], [9, 50, 90], 165.0, 195.0),
            "the 90 % velocity lies well above the upper line (195 against 180",
        ),
    ],
)
def test_what_lies_outside_is_said(band, words):
    """Side, frequency, both figures, and whether by a little."""
    assert words in beside_quoted(band)


def test_xlpe_of_the_base_world_lies_a_little_outside():
    """The 90 % line lies a little above the bar at 10 MHz and the 10 % velocity a little below the lower line."""
    words = beside_quoted(spread(CableRanges(), "XLPE", seed=1))
    assert "at 10 MHz the 90 % line lies a little above the bar" in words
    assert "the 10 % velocity lies a little below the lower line" in words
