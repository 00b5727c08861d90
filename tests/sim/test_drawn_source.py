"""Drawn currents are as wide, as steep and as frequent as their kind's ranges say."""

from typing import get_args

import numpy as np
import pytest
from pydantic import ValidationError

from pdclass.sim.drawn_source import (
    CORONA_PATTERNS,
    KIND_PATTERNS,
    CoronaCurrentRanges,
    Kind,
    Polarity,
    PulseRanges,
    SourceRanges,
    draw_corona,
    draw_current,
    draw_discharge,
)
from pdclass.sim.phase import Pattern
from pdclass.sim.source import SourceCurrent, half_width_s, source_wave

RANGES = SourceRanges()
KINDS = get_args(Kind)


def drawn(kind, count=300):
    rng = np.random.default_rng(11)
    return [draw_discharge(RANGES, rng=rng, kind=kind)[1] for _ in range(count)]


def rise_ns(current):
    """From 10 to 90 % of the peak of one sub-pulse [ns]."""
    single = SourceCurrent(current.shape, current.rise_s, current.fall_s)
    time_s = np.linspace(-5 * single.rise_s, 5 * (single.rise_s + single.fall_s), 8001)
    wave = source_wave(single, time_s)
    peak = int(np.argmax(wave))
    low, high = (np.interp(share * wave[peak], wave[: peak + 1], time_s[: peak + 1]) for share in (0.1, 0.9))
    return (high - low) * 1e9


@pytest.mark.parametrize(
    ("kind", "bounds"),
    [
        ("void", RANGES.void),
        ("aged-void", RANGES.aged_void),
        ("interface", RANGES.interface),
        ("surface", RANGES.surface),
        ("floating", RANGES.floating),
    ],
)
def test_widths_lie_in_their_ranges(kind, bounds):
    """The width between half heights is the drawn one, whatever the shape."""
    widths = np.array([half_width_s(current) for current in drawn(kind)]) * 1e9
    assert widths.min() >= 0.99 * bounds.width_ns[0]
    assert widths.max() <= 1.01 * bounds.width_ns[1]
    assert np.median(widths) == pytest.approx(np.sqrt(bounds.width_ns[0] * bounds.width_ns[1]), rel=0.15)


def test_kinds_come_by_their_weights():
    """About a tenth of the sources are aged voids, and the others come by their weights too."""
    rng = np.random.default_rng(2)
    kinds = [draw_discharge(RANGES, rng=rng)[0] for _ in range(3000)]
    for kind, weight in RANGES.kinds.items():
        assert kinds.count(kind) / 3000 == pytest.approx(weight, abs=0.03)


def test_every_shape_is_drawn():
    """Every shape of a kind is drawn, and only interfaces have trains, whose first sub-pulse is the reference."""
    assert {current.shape for current in drawn("void")} == {"gaussian", "asymmetric", "exponential", "heidler"}
    assert all(current.offsets_s == (0.0,) for kind in KINDS if kind != "interface" for current in drawn(kind, 50))
    trains = [current for current in drawn("interface") if len(current.weights) > 1]
    assert len(trains) / 300 == pytest.approx(0.3, abs=0.08)
    for current in trains:
        assert current.offsets_s[0] == 0
        assert 10e-9 <= np.diff(current.offsets_s).min() <= np.diff(current.offsets_s).max() <= 100e-9


def test_every_kind_has_a_pattern():
    """Every kind of discharge and both polarities of corona have a pattern in the mains cycle."""
    assert set(KIND_PATTERNS) == set(KINDS)
    assert set(CORONA_PATTERNS) == set(get_args(Polarity))
    assert {*KIND_PATTERNS.values(), *CORONA_PATTERNS.values()} <= set(get_args(Pattern))


def test_positive_corona_is_slower_and_longer():
    """Positive corona rises more slowly and lasts longer than a Trichel pulse, and both are drawn."""
    rng = np.random.default_rng(3)
    found = [draw_corona(CoronaCurrentRanges(), rng=rng) for _ in range(300)]
    groups = {polarity: [current for name, current in found if name == polarity] for polarity in get_args(Polarity)}
    assert len(groups["negative"]) / 300 == pytest.approx(0.6, abs=0.1)
    rises = {polarity: np.median([rise_ns(current) for current in group]) for polarity, group in groups.items()}
    widths = {polarity: [half_width_s(current) * 1e9 for current in group] for polarity, group in groups.items()}
    assert rises["positive"] > 5 * rises["negative"]
    assert min(widths["positive"]) > 2 * min(widths["negative"])


def test_same_generator_same_currents():
    """A draw is a function of its generator alone."""
    assert draw_discharge(RANGES, rng=np.random.default_rng(9)) == draw_discharge(RANGES, rng=np.random.default_rng(9))


def test_narrow_ranges_are_kept():
    """A scenario may fix width, skew and shape."""
    narrow = PulseRanges(width_ns=(8.0, 8.0), skew=(2.0, 2.0), charge_pc=(1.0, 1.0), shapes={"asymmetric": 1.0})
    current = draw_current(narrow, rng=np.random.default_rng(1))
    assert current.fall_s == pytest.approx(2 * current.rise_s)
    assert half_width_s(current) == pytest.approx(8e-9, rel=1e-3)


@pytest.mark.parametrize(
    ("field", "value", "word"),
    [
        ("kinds", {"pitting": 1.0}, "pitting"),
        ("kinds", {"void": 0.0}, "above zero"),
        ("void", {"width_ns": (5.0, 1.0), "skew": (1, 2), "charge_pc": (1, 2)}, "lower bound"),
        ("void", {"width_ns": (1, 2), "skew": (1, 2), "charge_pc": (1, 2), "shapes": {"ringing": 1}}, "ringing"),
        ("wide", 1, "wide"),
    ],
)
def test_unknown_names_are_refused(field, value, word):
    """A name that the world does not know, or bounds the wrong way round, are an error that says so."""
    with pytest.raises(ValidationError, match=word):
        SourceRanges.model_validate({field: value})
