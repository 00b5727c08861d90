"""Carriers of known frequency, height and phase are found and taken out."""

import numpy as np
import pytest

from pdclass.features.carriers import MOST_TONES, fitted_tones, without_tones

PLACE = np.arange(2000)


def carried(*tones, noise=0.01, rows=1):
    """Waves of noise under carriers of (cycles a sample, height, phase)."""
    wave = np.random.default_rng(0).normal(0, noise, (rows, 2000))
    return (wave + sum(h * np.cos(2 * np.pi * f * PLACE + p) for f, h, p in tones) + 0.3).astype(np.float32)


def found(waves, start=20, stop=480):
    tones = fitted_tones(waves, np.full(len(waves), start), np.full(len(waves), stop))
    return tones, without_tones(waves, tones)


def test_lines_are_found_in_order_of_height_and_taken_out_of_the_whole_window():
    """Frequencies to a thousandth of a cycle in the stretch; what is left far behind it is level and noise."""
    tones, clean = found(carried((0.0135, 0.5, 0.3), (0.0921, 1.0, -1.0), noise=1e-4))
    assert tones.lines[0] >= 2
    assert tones.turn[0, :2] / (2 * np.pi) == pytest.approx([0.0921, 0.0135], abs=1e-3 / 460)
    assert np.abs(clean - 0.3).max() < 5e-3
    assert tones.even[0, 0] == pytest.approx(0.3, abs=1e-4)


def test_least_squares_agree_with_a_plain_solution():
    """Lines one cycle of the stretch apart: weights as by singular values from the full basis."""
    waves = carried((0.05, 1.0, 0.1), (0.0525, 0.7, 2.0), (0.11, 0.2, 1.0))
    tones, _ = found(waves)
    count, place = tones.lines[0], np.arange(20, 480)
    angle = np.outer(place - tones.centre[0], tones.turn[0, :count])
    basis = np.column_stack([np.ones(460), np.cos(angle), np.sin(angle)])
    weights = np.linalg.lstsq(basis, waves[0, 20:480].astype(np.float64), rcond=None)[0]
    mine = np.concatenate([tones.even[0, : count + 1], tones.odd[0, 1 : count + 1]])
    np.testing.assert_allclose(mine, weights, atol=1e-6)


def test_noise_alone_has_no_carrier_and_no_more_than_four_are_taken():
    """White noise is left as it is, to the bit; of six lines four are taken."""
    waves = carried(rows=40)
    tones, clean = found(waves)
    silent = tones.lines == 0
    assert silent.mean() > 0.9
    assert np.array_equal(clean[silent], waves[silent])
    many = carried(*((0.02 + 0.03 * k, 1.0, k) for k in range(6)))
    assert found(many)[0].lines[0] == MOST_TONES


def test_too_short_a_stretch_has_no_carrier():
    """Fewer than 200 samples tell nothing."""
    assert found(carried((0.05, 1.0, 0.0)), stop=219)[0].lines[0] == 0
    assert found(carried((0.05, 1.0, 0.0)), stop=220)[0].lines[0] == 1


def test_a_line_that_never_turns_does_no_harm():
    """Two lines at one place leave finite weights."""
    tones, clean = found(carried((0.05, 1.0, 0.0), (0.05 + 1e-9, 1.0, 1.0), noise=1e-6))
    assert np.isfinite(clean).all()
    assert np.isfinite(tones.even).all()
