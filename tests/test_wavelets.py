"""Wavelets: energy at the scale of its frequency, shrinkage by its definition, and the plain detector's events."""

import numpy as np
import pytest

from pdclass.errors import InputError
from pdclass.wavelets import (
    composed,
    decimated,
    hard,
    noise_level,
    reference_events,
    scale_energies,
    shrunk,
    soft,
    sure_factor,
    undecimated,
    universal_factor,
)


def noise(samples, seed=0):
    return np.random.default_rng(seed).normal(size=samples)


@pytest.mark.parametrize(("frequency", "level"), [(0.35, 1), (0.18, 2), (0.09, 3), (0.045, 4)])
def test_a_tone_lies_in_its_level(frequency, level):
    """A tone of f cycles a sample has most of its energy at the level that spans it."""
    t = np.arange(2048)
    tone = np.sin(2 * np.pi * frequency * t) * np.hanning(2048)
    energies = scale_energies(tone, 6)
    assert int(np.argmax(energies)) + 1 == level
    assert energies.max() > 0.8 * energies.sum()


def test_energy_is_kept():
    """For a wave without slow content the details hold its whole energy (orthogonal transform)."""
    t = np.arange(2048)
    tone = np.sin(2 * np.pi * 0.2 * t) * np.hanning(2048)
    assert scale_energies(tone, 7).sum() == pytest.approx(np.sum(tone**2), rel=1e-3)


@pytest.mark.parametrize("samples", [2048, 2000, 1999])
def test_a_wave_comes_back(samples):
    """Composing undoes the transform at any length."""
    wave = noise(samples)
    assert composed(decimated(wave, 5)) == pytest.approx(wave, abs=1e-10)


@pytest.mark.parametrize("samples", [4096, 4001])
def test_undecimated_noise_has_one_deviation(samples):
    """White noise keeps its deviation at every level, and every level keeps every sample."""
    details = undecimated(noise(samples), 4)
    assert [detail.size for detail in details] == [samples] * 4
    assert [np.std(detail) for detail in details] == pytest.approx([1, 1, 1, 1], abs=0.15)


def test_noise_level_is_hardly_moved_by_pulses():
    """A hundredth of very large values moves the level by about a hundredth; a comb of a long array suffices."""
    wave = 3.0 * noise(400_000)
    assert noise_level(wave) == pytest.approx(3.0, rel=0.03)
    wave[::101] = 1e4
    assert noise_level(wave) == pytest.approx(3.0, rel=0.05)


def test_soft_and_hard_by_their_definition():
    """Soft moves by the threshold, hard leaves what exceeds it."""
    given = np.array([-3.0, -1.0, 0.5, 1.0, 2.5])
    assert soft(given, 1.0).tolist() == [-2.0, 0.0, 0.0, 0.0, 1.5]
    assert hard(given, 1.0).tolist() == [-3.0, 0.0, 0.0, 0.0, 2.5]


def test_sure_is_the_least_of_the_estimates():
    """The chosen threshold has the least estimate of the risk on a fine grid up to the universal factor."""
    given = noise(512) + 3.0 * (np.arange(512) % 4 == 0)
    grid = np.linspace(0, universal_factor(512), 4001)

    def estimate(t):
        return 512 - 2 * np.sum(np.abs(given) <= t) + np.sum(np.minimum(np.abs(given), t) ** 2)

    assert estimate(sure_factor(given)) <= min(estimate(t) for t in grid) + 1e-9


def test_sure_falls_back_where_there_is_nothing_but_noise():
    """Coefficients without visible signal get the universal threshold."""
    assert sure_factor(noise(1024)) == universal_factor(1024)


@pytest.mark.parametrize("rule", ["universal", "minimax", "sure"])
@pytest.mark.parametrize("shrink", ["soft", "hard"])
def test_shrinkage_scales_with_the_wave(rule, shrink):
    """A gain in front of the shrinkage is a gain behind it, and noise alone loses most of its energy."""
    wave = noise(2048)
    once = composed(shrunk(decimated(wave, 6), rule, shrink))
    assert composed(shrunk(decimated(1e-3 * wave, 6), rule, shrink)) == pytest.approx(1e-3 * once, abs=1e-12)
    assert np.sum(once**2) < 0.3 * np.sum(wave**2)


def test_a_level_without_noise_is_left_alone():
    """Where a level is zero nothing is shrunk, and nothing becomes NaN."""
    assert composed(shrunk(decimated(np.full(256, 2.0), 3))) == pytest.approx(np.full(256, 2.0))


@pytest.mark.parametrize("transform", ["decimated", "undecimated"])
def test_the_plain_detector_finds_strong_pulses_where_they_are(transform):
    """Ringing pulses far above the noise give an event each, within ten samples of their begin."""
    counts = 20 * noise(1 << 17, seed=3)
    onsets = np.array([9_000, 40_011, 77_777, 120_001])
    t = np.arange(200)
    for onset in onsets:
        counts[onset : onset + 200] += 1000 * np.exp(-t / 30) * np.sin(2 * np.pi * 0.2 * t)
    found = reference_events(counts.astype(np.int16), 6.0, transform=transform)
    assert found.size == onsets.size
    assert np.abs(found - onsets).max() <= 10


@pytest.mark.parametrize("transform", ["decimated", "undecimated"])
def test_the_plain_detector_parts_and_joins(transform):
    """Two pulses farther apart than asked are two events, nearer ones are one."""
    counts = 20 * noise(1 << 15, seed=4)
    counts[[10_000, 11_000]] += 2000
    assert reference_events(counts, 8.0, transform=transform, apart=300).size == 2
    assert reference_events(counts, 8.0, transform=transform, apart=1500).size == 1


def test_the_plain_detector_may_find_nothing():
    """A threshold above everything gives no event."""
    assert reference_events(noise(1 << 14), 50.0).size == 0


def test_the_plain_detector_needs_noise():
    """A record of equal samples is refused in one line."""
    with pytest.raises(InputError, match="no noise"):
        reference_events(np.zeros(4096, np.int16), 5.0)
