"""The drawings of features."""

import pytest
from closed_form import double_exponential
from one_pulse import single

from pdclass.features import FAMILIES
from pdclass.pulses import PulseSet
from pdclass.report import feature_plots
from pdclass.report.feature_examples import feature_example
from pdclass.report.feature_plots import family_figure


@pytest.fixture(scope="module")
def examples():
    """A pulse of each of two labels, without any copy."""
    found = []
    for label, fall in (("cable", 200e-9), ("switchgear", 40e-9)):
        pulses = single(double_exponential(20e-9, fall), noise_v=0.02)
        found.append(feature_example(PulseSet(pulses.waves, pulses.chains, pulses.table.assign(label=label)), 0, label))
    return found


@pytest.mark.parametrize("family", FAMILIES)
def test_a_figure_is_the_same_every_time(examples, family):
    """Every family is drawn, also where features are missing, and twice with the same bytes."""
    first = family_figure(family, examples)
    assert first.startswith("<svg")
    assert family_figure(family, examples) == first


def test_a_family_without_a_drawing_shows_waves_and_values(examples, monkeypatch):
    """What no drawing was written for still has its values beside the pulses."""
    monkeypatch.setattr(feature_plots, "_DRAWINGS", {})
    picture = family_figure("edges", examples)
    assert "rise_ns" in picture
    assert "time from onset" in picture
