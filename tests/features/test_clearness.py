"""What is known of how clear a feature is in noise."""

import math

from pdclass.features import CATALOGUE
from pdclass.features.clearness import CLEAR_SNR_DB, HIGHEST_DB, how_blurred


def test_every_feature_has_a_measured_figure():
    """The metrology was run on this catalogue: a figure for every feature and for nothing else."""
    assert list(CLEAR_SNR_DB) == [feature.name for feature in CATALOGUE], "run benchmarks/feature_metrology.py"


def test_figures_lie_on_the_grid_or_nowhere():
    """A feature is clear from some ratio up to the highest of the grid, or not at all."""
    assert all(5.0 < value <= HIGHEST_DB or value == math.inf for value in CLEAR_SNR_DB.values())


def test_an_unknown_ratio_and_an_unknown_feature_say_nothing():
    """Nothing is said where nothing is known."""
    assert how_blurred(CATALOGUE[0].name, math.nan) is None
    assert how_blurred("no_such_feature", 3.0) is None
