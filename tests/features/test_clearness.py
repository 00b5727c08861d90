"""What is known of how clear a feature is in noise."""

import math

from pdclass.features import CATALOGUE, clearness
from pdclass.features.clearness import CLEAR_SNR_DB, HIGHEST_DB, how_blurred


def test_every_feature_has_a_measured_figure():
    """The metrology was run on this catalogue: a figure for every feature and for nothing else."""
    assert list(CLEAR_SNR_DB) == [feature.name for feature in CATALOGUE], "run benchmarks/feature_metrology.py"


def test_figures_lie_on_the_grid_or_nowhere():
    """A feature is clear from some ratio up to the highest of the grid, or not at all."""
    assert all(5.0 < value <= HIGHEST_DB or value == math.inf for value in CLEAR_SNR_DB.values())


def test_a_ratio_just_below_the_limit_reads_as_below_it(monkeypatch):
    """13.9 dB is told as 13 dB where 14 dB is the limit."""
    monkeypatch.setattr(clearness, "CLEAR_SNR_DB", {"rise_ns": 14.0})
    assert how_blurred("rise_ns", 13.9) == "noise blurs it at 13 dB; clear from 14 dB"


def test_an_unknown_ratio_and_an_unknown_feature_say_nothing():
    """Nothing is said where nothing is known."""
    assert how_blurred(CATALOGUE[0].name, math.nan) is None
    assert how_blurred("no_such_feature", 3.0) is None
