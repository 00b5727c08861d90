"""The catalogue measured in batches against the same features measured plainly, pulse by pulse."""

import numpy as np
import pytest
from closed_form import as_capture, background, damped_sine, double_exponential
from plain_features import plain_table

from pdclass.extract import extract
from pdclass.features import CATALOGUE, feature_table

SHAPES = (
    double_exponential(10e-9, 50e-9, span_s=12e-6),
    double_exponential(100e-9, 600e-9, span_s=12e-6),
    damped_sine(7e6, 0.4e-6, span_s=12e-6),
    damped_sine(3e6, 1.5e-6, span_s=12e-6),
)
#: Measured another way by intent: the mean wavelet energies over all places of the grid of scales, plainly over one.
OTHERWISE = ("scale_",)
#: Which copy is the strongest, and whether it stands out, turns on little: a larger share of those may differ.
BY_CHOICE = ("copy_",)


@pytest.fixture(scope="module")
def tables():
    """Values of pulses extracted from noise with carriers, in batches and plainly."""
    signal = background(np.random.default_rng(8), 600_000)
    for number, onset in enumerate(range(10_000, 590_000, 5_000)):
        wave = SHAPES[number % len(SHAPES)]
        signal[onset : onset + wave.size] += 150.0 * (1 + number % 20) * wave
    pulses = extract(as_capture(signal)).pulses
    return feature_table(pulses), plain_table(pulses)


@pytest.mark.parametrize("place", range(len(CATALOGUE)), ids=[feature.name for feature in CATALOGUE])
def test_nearly_all_values_are_those_of_the_plain_way(tables, place):
    """Beyond the tolerance, or measurable in one way only, is at most one in thirty (of copies one in seven).

    Those are pulses whose weakest carrier is taken for one by one of the two alone. Of the others nine in ten agree
    to a hundredth of the tolerance.
    """
    feature, (own, plain) = CATALOGUE[place], (table[:, place] for table in tables)
    if feature.name.startswith(OTHERWISE):
        pytest.skip("measured another way by intent")
    chosen = feature.name.startswith(BY_CHOICE)
    rare = 1 / 7 if chosen else 1 / 30
    both = np.isfinite(own) & np.isfinite(plain)
    apart = np.abs(own - plain)[both] / feature.tolerance
    assert np.sum(np.isfinite(own) != np.isfinite(plain)) < rare * own.size
    assert np.sum(apart > 1) <= rare * apart.size
    assert chosen or np.sum(apart > 0.01) < 0.1 * apart.size
