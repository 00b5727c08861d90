"""What is known of how clear a feature is in noise."""

import math

import pandas as pd

from pdclass.features import CATALOGUE, clearness
from pdclass.features.clearness import CLEAR_SNR_DB, HIGHEST_DB, how_blurred
from pdclass.settings import shipped


def test_every_feature_has_a_measured_figure():
    """The metrology was run on this catalogue: a figure for every feature and for nothing else."""
    assert list(CLEAR_SNR_DB) == [feature.name for feature in CATALOGUE], "run benchmarks/feature_metrology.py"


def test_figures_lie_on_the_grid_or_nowhere():
    """A feature is clear from some ratio up to the highest of the grid, or not at all."""
    known = [value for value in CLEAR_SNR_DB.values() if not math.isnan(value)]
    assert all(5.0 < value <= HIGHEST_DB or value == math.inf for value in known)


def test_only_what_the_base_bundle_lacks_is_unknown():
    """Figures are held against classes of its reference; they are measured anew when a bundle is taught anew."""
    held = pd.read_parquet(shipped("models") / "base" / "reference.parquet").columns
    unknown = [name for name, value in CLEAR_SNR_DB.items() if math.isnan(value)]
    assert [name for name in CLEAR_SNR_DB if name not in held] == unknown, "run benchmarks/feature_metrology.py"


def test_nothing_is_said_of_what_is_unknown(monkeypatch):
    """Of a feature without a figure no sentence says that noise blurs it."""
    monkeypatch.setattr(clearness, "CLEAR_SNR_DB", {"rise_ns": math.nan})
    assert how_blurred("rise_ns", 3.0) is None


def test_a_ratio_just_below_the_limit_reads_as_below_it(monkeypatch):
    """13.9 dB is told as 13 dB where 14 dB is the limit."""
    monkeypatch.setattr(clearness, "CLEAR_SNR_DB", {"rise_ns": 14.0})
    assert how_blurred("rise_ns", 13.9) == "noise blurs it at 13 dB; clear from 14 dB"


def test_an_unknown_ratio_and_an_unknown_feature_say_nothing():
    """Nothing is said where nothing is known."""
    assert how_blurred(CATALOGUE[0].name, math.nan) is None
    assert how_blurred("no_such_feature", 3.0) is None
