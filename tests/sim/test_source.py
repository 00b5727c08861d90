"""Source currents have the area, the shape and the frequency that they are given."""

import numpy as np
import pytest
import scipy.integrate

from pdclass.errors import InputError
from pdclass.sim.grid import LEAD_S, band_end, laplace_grid, to_samples
from pdclass.sim.source import SourceCurrent, half_width_s, source_spectrum, source_wave, train

UNIT = [
    SourceCurrent("gaussian", 20e-9, 20e-9),
    SourceCurrent("asymmetric", 20e-9, 60e-9),
    SourceCurrent("asymmetric", 60e-9, 20e-9),
    SourceCurrent("exponential", 20e-9, 200e-9),
    SourceCurrent("exponential", 40e-9, 40e-9),
    SourceCurrent("heidler", 20e-9, 100e-9),
    SourceCurrent("heidler", 50e-9, 20e-9),
    train(SourceCurrent("heidler", 10e-9, 30e-9), (0.0, 40e-9, 300e-9), (1.0, 0.3, 0.6)),
]
RINGING = SourceCurrent("ringing", 10e-9, 1e-6, 5e6)
PACKET = SourceCurrent("packet", 150e-9, 300e-9, 8e6)


def name(current):
    return f"{current.shape}-{current.rise_s * 1e9:.0f}-{len(current.weights)}"


def wave_of(current, rate_hz=250e6):
    s = laplace_grid()
    wave = to_samples(source_spectrum(current, s) * band_end() * np.exp(-s * LEAD_S), rate_hz)
    return np.arange(wave.size) / rate_hz - LEAD_S, wave


def transformed(current, s):
    """The Laplace transform of the current in time, summed numerically."""
    time_s = np.linspace(-1.5e-6, 6e-6, 300_001)
    wave = source_wave(current, time_s)
    return np.array([scipy.integrate.simpson(wave * np.exp(-each * time_s), x=time_s) for each in s])


@pytest.mark.parametrize("current", UNIT, ids=name)
def test_area_is_one(current):
    """The area under every pulse current is one, in time and at s = 0: its charge is its factor."""
    _, wave = wave_of(current)
    assert wave.sum() / 250e6 == pytest.approx(1.0, abs=1e-4)
    assert source_spectrum(current, np.zeros(1, complex))[0] == pytest.approx(1.0, abs=1e-9)


@pytest.mark.parametrize("current", [*UNIT, PACKET], ids=name)
def test_spectrum_is_the_transform_of_the_wave(current):
    """At any complex frequency the spectrum is the integral of the current times exp(-st)."""
    s = np.array([1e4, 1e6 + 1e7j, 6e4 + 5e7j, 6e4 - 2e7j, 6e4 + 3e8j])
    assert np.abs(source_spectrum(current, s) - transformed(current, s)).max() < 1e-6


@pytest.mark.parametrize("current", [*UNIT, RINGING, PACKET, *[c.stretched(4.0) for c in UNIT[1:]]], ids=name)
def test_grid_is_interpolated_closely(current):
    """On the grid every spectrum is within 1e-5 of the one computed frequency by frequency."""
    exact = source_spectrum(current, laplace_grid().copy())
    assert np.abs(source_spectrum(current, laplace_grid()) - exact).max() < 1e-5


def test_asymmetric_is_two_half_gaussians():
    """The asymmetric pulse rises with one deviation, falls with the other, and peaks at its instant."""
    time_s, wave = wave_of(UNIT[1])
    sigma = np.where(time_s < 0, 20e-9, 60e-9)
    wanted = np.exp(-((time_s / sigma) ** 2) / 2) / (np.sqrt(np.pi / 2) * 80e-9)
    assert np.abs(wave - wanted).max() < 5e-3 * wanted.max()


def test_exponential_is_a_difference_of_two():
    """The double exponential follows its closed form, but for its corner, which the band's end rounds."""
    time_s, wave = wave_of(UNIT[3])
    after = np.where(time_s > 0, time_s, 0)
    wanted = (np.exp(-after / 200e-9) - np.exp(-after / 20e-9)) / 180e-9
    away = np.abs(time_s) > 50e-9
    assert np.abs(wave - wanted)[away].max() < 5e-3 * wanted.max()


def test_heidler_wave_comes_back_from_the_grid():
    """Sampled from its spectrum, a Heidler current is its closed form in time, its smooth front included."""
    current = SourceCurrent("heidler", 60e-9, 300e-9)
    time_s, wave = wave_of(current)
    wanted = source_wave(current, time_s)
    assert np.abs(wave - wanted).max() < 0.02 * wanted.max()


def test_ringing_has_its_frequency_and_decay():
    """A burst rings at its frequency and loses 1/e of its height in its decay time."""
    time_s, wave = wave_of(RINGING)
    after = time_s > 0.1e-6
    crossings = time_s[1:][(np.diff(np.sign(wave)) != 0) & (time_s[1:] > 0.1e-6) & (time_s[1:] < 3e-6)]
    assert 0.5 / np.diff(crossings).mean() == pytest.approx(5e6, rel=0.01)
    height = [np.abs(wave[after & (time_s > t) & (time_s < t + 0.2e-6)]).max() for t in (0.2e-6, 1.2e-6)]
    assert height[1] / height[0] == pytest.approx(np.exp(-1), rel=0.03)


def test_packet_is_a_carrier_under_its_envelope():
    """A packet's samples are a cosine of its frequency under two half Gaussians of area one."""
    time_s, wave = wave_of(PACKET)
    sigma = np.where(time_s < 0, 150e-9, 300e-9)
    envelope = np.exp(-((time_s / sigma) ** 2) / 2) / (np.sqrt(np.pi / 2) * 450e-9)
    wanted = envelope * np.cos(2 * np.pi * 8e6 * time_s)
    assert np.abs(wave - wanted).max() < 5e-3 * wanted.max()


@pytest.mark.parametrize("current", UNIT, ids=name)
def test_stretching_slows_without_changing_charge(current):
    """A stretched current is the same one on a slower clock: its spectrum is that at a frequency so much higher."""
    s = np.array([0.0, 1e6 + 3e7j, 6e4 + 1e8j])
    stretched = source_spectrum(current.stretched(1.3), s)
    assert np.abs(stretched - source_spectrum(current, 1.3 * s)).max() < 1e-7


def test_stretching_leaves_the_frequency_of_a_ringing():
    """What rings is the circuit, so that a slower source rings as fast."""
    assert RINGING.stretched(1.3).ring_hz == RINGING.ring_hz
    assert PACKET.stretched(1.3).rise_s == pytest.approx(1.3 * PACKET.rise_s)


def test_train_is_the_sum_of_its_pulses():
    """A train in time is its pulse at every offset with its share of the charge; shares are made to sum to one."""
    pulse = SourceCurrent("gaussian", 5e-9, 5e-9)
    row = train(pulse, (0.0, 60e-9), (3.0, 1.0))
    assert row.weights == pytest.approx((0.75, 0.25))
    time_s = np.linspace(-50e-9, 150e-9, 401)
    wanted = 0.75 * source_wave(pulse, time_s) + 0.25 * source_wave(pulse, time_s - 60e-9)
    assert source_wave(row, time_s) == pytest.approx(wanted, abs=1.0)
    assert train(pulse, (0.0, 1e-6)).weights == (0.5, 0.5)


@pytest.mark.parametrize("spacing_s", [0.2e-6, 37.6e-6])
def test_double_pulse_on_the_grid(spacing_s):
    """On the grid a double pulse is half its pulse, and half of it again after the spacing."""
    pulse = SourceCurrent("asymmetric", 8e-9, 25e-9)
    _, single = wave_of(pulse)
    _, pair = wave_of(train(pulse, (0.0, spacing_s)))
    shift = round(spacing_s * 250e6)
    wanted = single / 2
    wanted[shift:] += single[:-shift] / 2
    assert np.abs(pair - wanted)[:18_000].max() < 1e-4 * single.max()


@pytest.mark.parametrize(
    ("current", "width_s"),
    [
        (UNIT[0], 2 * np.sqrt(2 * np.log(2)) * 20e-9),
        (UNIT[1], np.sqrt(2 * np.log(2)) * 80e-9),
        (SourceCurrent("exponential", 10e-9, 100e-9), 100.354e-9),
    ],
    ids=["gaussian", "asymmetric", "exponential"],
)
def test_half_width(current, width_s):
    """The width between half heights is that of the closed forms."""
    assert half_width_s(current) == pytest.approx(width_s, rel=1e-3)


@pytest.mark.parametrize(
    ("wrong", "field"),
    [
        ({"shape": "square"}, "shape"),
        ({"rise_s": 0.0}, "rise_s"),
        ({"fall_s": -1e-9}, "fall_s"),
        ({"shape": "ringing"}, "ring_hz"),
        ({"ring_hz": 1e6}, "ring_hz"),
        ({"weights": (0.5,)}, "weights"),
        ({"offsets_s": (-1e-9,)}, "offsets_s"),
        ({"offsets_s": (0.0, 1e-6)}, "offsets_s"),
        ({"offsets_s": (), "weights": (1.0,)}, "offsets_s"),
    ],
)
def test_impossible_currents_are_refused(wrong, field):
    """A current out of bounds is an error that names the field."""
    with pytest.raises(InputError, match=field):
        SourceCurrent(**{"shape": "gaussian", "rise_s": 5e-9, "fall_s": 5e-9, **wrong})
