"""Source currents have the area, the shape and the frequency that they are given."""

import numpy as np
import pytest

from pdclass.sim.grid import LEAD_S, band_end, laplace_grid, to_samples
from pdclass.sim.source import SourceCurrent, source_spectrum

SHAPES = [
    SourceCurrent("gaussian", 20e-9, 20e-9),
    SourceCurrent("asymmetric", 20e-9, 60e-9),
    SourceCurrent("exponential", 20e-9, 200e-9),
]


def _wave(current, rate_hz=250e6):
    s = laplace_grid()
    wave = to_samples(source_spectrum(current, s) * band_end() * np.exp(-s * LEAD_S), rate_hz)
    return np.arange(wave.size) / rate_hz - LEAD_S, wave


@pytest.mark.parametrize("current", SHAPES, ids=lambda current: current.shape)
def test_area_is_one(current):
    """The area under every pulse current is one: its charge is its factor."""
    _, wave = _wave(current)
    assert wave.sum() / 250e6 == pytest.approx(1.0, abs=1e-4)


def test_asymmetric_is_two_half_gaussians():
    """The asymmetric pulse rises with one deviation, falls with the other, and peaks at its instant."""
    time_s, wave = _wave(SourceCurrent("asymmetric", 20e-9, 60e-9))
    sigma = np.where(time_s < 0, 20e-9, 60e-9)
    wanted = np.exp(-((time_s / sigma) ** 2) / 2) / (np.sqrt(np.pi / 2) * 80e-9)
    assert np.abs(wave - wanted).max() < 5e-3 * wanted.max()


def test_exponential_is_a_difference_of_two():
    """The double exponential follows its closed form, but for its corner, which the band's end rounds."""
    time_s, wave = _wave(SourceCurrent("exponential", 20e-9, 200e-9))
    after = np.where(time_s > 0, time_s, 0)
    wanted = (np.exp(-after / 200e-9) - np.exp(-after / 20e-9)) / 180e-9
    away = np.abs(time_s) > 50e-9
    assert np.abs(wave - wanted)[away].max() < 5e-3 * wanted.max()


def test_ringing_has_its_frequency_and_decay():
    """A burst rings at its frequency and loses 1/e of its height in its decay time."""
    time_s, wave = _wave(SourceCurrent("ringing", 10e-9, 1e-6, 5e6))
    after = time_s > 0.1e-6
    crossings = time_s[1:][(np.diff(np.sign(wave)) != 0) & (time_s[1:] > 0.1e-6) & (time_s[1:] < 3e-6)]
    assert 0.5 / np.diff(crossings).mean() == pytest.approx(5e6, rel=0.01)
    height = [np.abs(wave[after & (time_s > t) & (time_s < t + 0.2e-6)]).max() for t in (0.2e-6, 1.2e-6)]
    assert height[1] / height[0] == pytest.approx(np.exp(-1), rel=0.03)


def test_stretching_slows_without_changing_charge():
    """A stretched pulse is wider by the factor and has the same area."""
    factor = 1.3
    time_s, wave = _wave(SHAPES[0])
    _, wider = _wave(SHAPES[0].stretched(factor))
    spread = [np.sqrt((time_s**2 * w).sum() / w.sum()) for w in (wave, wider)]
    assert spread[1] / spread[0] == pytest.approx(factor, rel=1e-3)
    assert wider.sum() == pytest.approx(wave.sum(), rel=1e-4)
