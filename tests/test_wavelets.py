"""Wavelet energies: all of the energy, at the scale of its frequency."""

import numpy as np
import pytest

from pdclass.wavelets import scale_energies


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
