"""Drawn backgrounds have the noise, carriers and communication that their ranges say."""

from collections import Counter

import numpy as np
import pytest
from pydantic import ValidationError

from pdclass.sim.drawn_background import OFDM_HZ, SHORT_WAVE_HZ, BackgroundRanges, draw_background

RANGES = BackgroundRanges()
BACKGROUNDS = [draw_background(RANGES, rng=np.random.default_rng(seed)) for seed in range(400)]
CARRIERS = [carrier for one in BACKGROUNDS for carrier in one.carriers]


def test_noise_lies_in_its_ranges():
    """Every share lies in its range, and every kind of place occurs."""
    noises = [one.noise for one in BACKGROUNDS]
    for field, bounds in (("converter", RANGES.converter_noise), ("low_share", RANGES.low_noise)):
        assert all(bounds[0] <= getattr(noise, field) <= bounds[1] for noise in noises)
    assert all(RANGES.field_noise[0] <= noise.field_share <= RANGES.field_noise[1] for noise in noises)
    assert {noise.environment for noise in noises} == set(RANGES.environments)


def test_carriers_lie_on_channels():
    """Every carrier is one of the medium-wave channels, of the long-wave ones, or lies in a short-wave band."""
    for carrier in CARRIERS:
        medium = 530e3 <= carrier.hz <= 1701e3 and (carrier.hz % 9e3 == 0 or carrier.hz % 10e3 == 0)
        long = 148.5e3 <= carrier.hz <= 283.5e3 and carrier.hz % 9e3 == 0
        short = any(low <= carrier.hz <= high for low, high in SHORT_WAVE_HZ) and carrier.hz % 5e3 == 0
        assert medium or long or short, carrier.hz


def test_bands_come_in_their_proportions():
    """More than half the carriers are medium wave, a third short wave."""
    share = Counter("long" if one.hz < 300e3 else "medium" if one.hz < 2e6 else "short" for one in CARRIERS)
    assert share["medium"] / len(CARRIERS) == pytest.approx(0.575, abs=0.06)
    assert share["short"] / len(CARRIERS) == pytest.approx(0.35, abs=0.06)


def test_a_region_has_one_raster():
    """No long wave where the medium wave lies on 10 kHz."""
    ranges = BackgroundRanges(medium_wave_raster={"10 kHz": 1.0}, carriers=(6, 6))
    carriers = [one for seed in range(40) for one in draw_background(ranges, rng=np.random.default_rng(seed)).carriers]
    assert all(one.hz >= 530e3 for one in carriers)
    assert all(one.hz % 10e3 == 0 for one in carriers if one.hz < 2e6)


def test_named_carriers_are_always_there():
    """What the scenario names comes first, whatever is drawn besides."""
    ranges = BackgroundRanges(carriers=(0, 2), carriers_hz=(909e3, 6.1e6))
    for seed in range(10):
        carriers = draw_background(ranges, rng=np.random.default_rng(seed)).carriers
        assert [one.hz for one in carriers[:2]] == [909e3, 6.1e6]
        assert 2 <= len(carriers) <= 4


def test_communication_comes_in_its_proportions():
    """Six in ten sites have none; the others have frames and pauses in their ranges, OFDM more often than FSK."""
    links = [one.communication[0] for one in BACKGROUNDS if one.communication]
    assert len(links) / len(BACKGROUNDS) == pytest.approx(0.4, abs=0.09)
    kinds = Counter(one.kind for one in links)
    assert kinds["ofdm"] > kinds["fsk"] > 0
    assert all(RANGES.frame_s[0] <= one.on_s <= RANGES.frame_s[1] for one in links)
    assert all(RANGES.pause_s[0] <= one.period_s - one.on_s + 1e-12 for one in links)
    assert all(len(one.tones_hz) == len(one.gains) for one in links)


@pytest.mark.parametrize("kind", sorted(OFDM_HZ))
def test_tones_of_a_symbol_fit_its_length(kind):
    """A symbol holds whole turns of the spacing, and a guard besides: it is longer than the spacing's inverse."""
    first, last, step_hz, symbol_s = OFDM_HZ[kind]
    assert (last - first) / step_hz == pytest.approx(round((last - first) / step_hz), abs=1e-9)
    assert 1.0 < symbol_s * step_hz < 1.15


@pytest.mark.parametrize(
    ("wrong", "complaint"),
    [
        ({"environments": {"moon": 1.0}}, "a name is one of city.*not moon"),
        ({"carrier_bands": {"ultra": 1.0}}, "a name is one of medium, long, short"),
        ({"communication": {"smoke": 1.0}}, "a name is one of none"),
        ({"carriers_hz": (80e6,)}, "less than or equal to 50000000"),
    ],
)
def test_unknown_names_are_refused(wrong, complaint):
    """A place, band or kind of communication that does not exist is an error that lists those that do."""
    with pytest.raises(ValidationError, match=complaint):
        BackgroundRanges(**wrong)


def test_same_seed_same_background():
    """The generator alone decides."""
    assert draw_background(RANGES, rng=np.random.default_rng(3)) == BACKGROUNDS[3]
