"""Equalisation undoes what a chain of known corners did, as far as the noise lets it."""

from dataclasses import replace

import numpy as np
import pytest
from equalise import MOST_GAIN_DB, chain_shape, clear_share, corners, equalised, equaliser
from one_pulse import single
from plain_features.window import prepared
from scipy.signal import bilinear, lfilter

from pdclass.pulses import Chain

HZ = np.linspace(0, 50e6, 1025)


def behind(low_hz, high_hz, noise_v, seed=0):
    """A Gaussian of 15 ns behind first-order corners, ready for measuring, and its chain."""
    t = np.arange(24_000) / 2e9
    wave = np.exp(-0.5 * ((t - 0.15e-6) / 15e-9) ** 2)
    wave = lfilter(*bilinear([1, 0], [1, 2 * np.pi * low_hz], 2e9), wave)
    wave = lfilter(*bilinear([1], [1 / (2 * np.pi * high_hz), 1], 2e9), wave)[::20]
    pulses = single(wave / wave.max(), noise_v=noise_v, band_hz=(low_hz, high_hz), duration_us=3.0, seed=seed)
    return prepared(pulses.waves[0], pulses.chains[0], 3.0), pulses.chains[0]


def after(window, chain):
    """The equalised wave over its largest excursion, and its noise over the same, told from before the onset."""
    wave = equalised(window, chain).astype(np.float64)
    wave /= np.abs(wave[480:]).max()
    return wave, float(np.median(np.abs(wave[100:460])) / 0.6744898)


def test_first_order_corners_have_their_level_and_phase():
    """-3 dB at both corners, 1 in the middle, 45 degrees late at the upper one."""
    shape = corners(np.array([0.1e6, 2e6, 40e6]), (0.1e6, 40e6))
    np.testing.assert_allclose(np.abs(shape), [np.sqrt(0.5), 1, np.sqrt(0.5)], atol=3e-3)
    assert np.angle(shape[2], deg=True) == pytest.approx(-45, abs=0.3)


def test_a_stated_response_is_taken_before_corners():
    """Level over the largest, and the phase, at the stated frequencies; held beyond them."""
    chain = Chain(100e6, band_hz=(1e5, 2e7), response=((1e6, 2.0, 10.0), (1e7, 4.0, -30.0)))
    shape = chain_shape(chain, np.array([1e5, 1e6, 1e7, 3e7]))
    np.testing.assert_allclose(np.abs(shape), [0.5, 0.5, 1, 1])
    np.testing.assert_allclose(np.angle(shape, deg=True), [10, 10, -30, -30])
    assert (chain_shape(Chain(100e6), HZ) == 1).all()


@pytest.mark.parametrize("low_hz", [0.05e6, 1e6])
def test_without_noise_every_chain_shows_the_same_wave(low_hz):
    """Behind 8 and behind 40 MHz the equalised waves agree within 3 % of the peak; as they are, within 30 %."""
    narrow, narrow_chain = behind(low_hz, 8e6, 1e-5)
    wide, wide_chain = behind(low_hz, 40e6, 1e-5)
    assert np.abs(narrow.wave - wide.wave)[400:800].max() > 0.25
    one, other = after(narrow, narrow_chain)[0], after(wide, wide_chain)[0]
    assert np.abs(one - other)[400:800].max() < 0.03


def test_the_wave_comes_in_volts():
    """A pulse ten times as high comes out ten times as high, in single precision."""
    window, chain = behind(0.1e6, 8e6, 1e-4)
    higher = replace(window, height_v=10 * window.height_v)
    assert equalised(window, chain).dtype == np.float32
    np.testing.assert_allclose(equalised(higher, chain), 10 * equalised(window, chain), rtol=1e-6, atol=1e-6)


def test_the_noise_limits_what_is_given_back():
    """At 26 dB the wave comes nearer to what a wide chain shows, and the noise grows less than the corner asks for."""
    goal = after(*behind(0.1e6, 40e6, 1e-5))[0][480:560]
    found = [behind(0.1e6, 8e6, 0.05, seed) for seed in range(8)]
    given = [after(one, chain) for one, chain in found]
    missed = [np.mean([np.std(wave[480:560] - goal) for wave in many])
              for many in ((one.wave for one, _ in found), (wave for wave, _ in given))]  # fmt: skip
    assert missed[1] < 0.7 * missed[0]
    assert all(noise < 2 * one.noise for (one, _), (_, noise) in zip(found, given, strict=True))


def test_nothing_is_amplified_beyond_the_limit():
    """A chain that ends at 0.5 MHz would ask for 34 dB; where only noise is, the gain is 0."""
    gain = equaliser(Chain(100e6, band_hz=(1e4, 0.5e6)), HZ, np.ones(HZ.size))
    assert 20 * np.log10(np.abs(gain).max()) <= MOST_GAIN_DB + 1e-9
    assert (equaliser(Chain(100e6, band_hz=(1e4, 1e7)), HZ, np.zeros(HZ.size)) == 0).all()
    assert np.isfinite(gain).all()


def test_the_clear_share_runs_from_nothing_to_all():
    """A hundred times the noise leaves 0.99, the noise alone 0."""
    assert clear_share(np.full(40, 100.0), np.ones(40)) == pytest.approx(0.99)
    assert clear_share(np.ones(40), np.ones(40)) == pytest.approx(0.0)


def test_an_unknown_noise_leaves_the_window_alone():
    """Where the noise is unknown nothing is given back."""
    window, chain = behind(0.1e6, 8e6, 1e-3)
    blind = replace(window, noise=np.nan)
    np.testing.assert_array_equal(equalised(blind, chain), (blind.wave * blind.height_v).astype(np.float32))
