"""One cable with both ends obeys the limits of physics."""

import numpy as np
import pytest

from pdclass.sim.cable import (
    ALUMINIUM_OHM_M,
    COPPER_OHM_M,
    Cable,
    LineConstants,
    characteristic_impedance,
    line_constants,
    propagation,
)
from pdclass.sim.draw import draw_far_end
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.network import far_admittance, input_admittance, reflection, short_circuit_transfer
from pdclass.sim.source import SourceCurrent, source_spectrum

CABLE = Cable(9.1e-3, 9.7e-3, 15.2e-3, 15.8e-3, 0.5e-3, ALUMINIUM_OHM_M, COPPER_OHM_M, 2.3, 5e-4)
S = 2j * np.pi * np.linspace(0.1e6, 40e6, 500)
LINE = line_constants(CABLE, S)
GAMMA, Z0 = propagation(LINE), characteristic_impedance(LINE)


def test_a_matched_end_reflects_nothing():
    """With its own impedance at the far end a cable of any length looks like that impedance, and nothing comes back."""
    none = reflection(1 / Z0, Z0)
    assert np.abs(none).max() < 1e-12
    assert input_admittance(GAMMA, Z0, 700.0, none) == pytest.approx(1 / Z0, rel=1e-12)


def test_twice_the_length_squares_the_transfer():
    """Between matched ends the way through 2 km is the way through 1 km, squared."""
    none = np.zeros_like(GAMMA)
    once, twice = (short_circuit_transfer(GAMMA, 5000.0, none, x) for x in (1000.0, 2000.0))
    assert twice == pytest.approx(once**2, rel=1e-12)


def test_a_lossless_line_keeps_energy():
    """The power that enters a lossless line is the power in its load."""
    lossless = LineConstants(S * 110e-9, S * 285e-12)
    gamma, z0 = propagation(lossless), characteristic_impedance(lossless)
    load = np.full(S.size, 1 / 50 + 0j)
    shown = input_admittance(gamma, z0, 333.0, reflection(load, z0))
    # voltage at the load per voltage at the input, from the line equations
    across = 1 / (np.cosh(gamma * 333.0) + z0 * load * np.sinh(gamma * 333.0))
    assert shown.real == pytest.approx(load.real * np.abs(across) ** 2, rel=1e-9)


def test_norton_equivalent_against_abcd():
    """The closed form with all reflections equals the chain matrices of the two pieces of cable."""
    length, x = 300.0, 120.0
    load = far_admittance(draw_far_end("transformer", rng=np.random.default_rng(1)), S)
    onward = (load + np.tanh(GAMMA * (length - x)) / Z0) / (1 + load * Z0 * np.tanh(GAMMA * (length - x)))
    wanted = 1 / (np.cosh(GAMMA * x) + Z0 * onward * np.sinh(GAMMA * x))
    found = short_circuit_transfer(GAMMA, length, reflection(load, Z0), x)
    assert found == pytest.approx(wanted, rel=1e-9)


@pytest.mark.parametrize("kind", ["open", "transformer", "cable"])
@pytest.mark.parametrize("length_m", [20.0, 400.0, 4000.0])
def test_input_admittance_is_passive(kind, length_m):
    """Whatever the far end, a cable never gives back more power than it was given."""
    for seed in range(5):
        far = draw_far_end(kind, rng=np.random.default_rng(seed))
        shown = input_admittance(GAMMA, Z0, length_m, reflection(far_admittance(far, S), Z0))
        assert (shown.real > 0).all()


def test_nothing_overflows():
    """A hundred kilometres are a matched end, not a NaN."""
    shown = input_admittance(GAMMA, Z0, 1e5, np.ones_like(GAMMA))
    assert shown == pytest.approx(1 / Z0, rel=1e-3)


def test_echoes_arrive_when_they_must():
    """Pulse at x/v, its far-end echo 2(l-x)/v later with the sign of an open end."""
    s = laplace_grid()
    line = line_constants(CABLE, s)
    gamma = propagation(line)
    matched_near = short_circuit_transfer(gamma, 1000.0, np.zeros(s.size), 400.0)
    echo = short_circuit_transfer(gamma, 1000.0, np.zeros(s.size), 1000.0) * np.exp(-gamma * 600.0)
    source = source_spectrum(SourceCurrent("gaussian", 20e-9, 20e-9), s) * np.exp(-s * LEAD_S)
    wave = to_samples(source * (matched_near + echo), 250e6)
    first = int(np.argmax(wave))
    second = first + 500 + int(np.argmax(wave[first + 500 :]))
    delay_us = (second - first) / 250
    assert delay_us == pytest.approx(1200.0 / 178.0, rel=0.01)
    assert 0 < wave[second] < wave[first]


def test_nothing_arrives_before_light_could():
    """A source 1 km away shows nothing before the wave has travelled at c over the root of the permittivity."""
    s = laplace_grid()
    gamma = propagation(line_constants(CABLE, s))
    source = source_spectrum(SourceCurrent("gaussian", 10e-9, 10e-9), s) * np.exp(-s * LEAD_S)
    wave = np.abs(to_samples(source * short_circuit_transfer(gamma, 1000.0, np.zeros(s.size), 1000.0), 250e6))
    earliest_s = LEAD_S + 1000.0 * np.sqrt(2.3) / 299.792458e6 - 6 * 10e-9
    assert wave[: int(earliest_s * 250e6)].max() < 1e-4 * wave.max()
