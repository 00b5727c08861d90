"""The cable obeys the limits of physics."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.constants import mu_0

from pdclass.sim.cable import (
    ALUMINIUM_OHM_M,
    COPPER_OHM_M,
    Cable,
    Semicon,
    characteristic_impedance,
    conductor_impedance,
    insulation_admittance,
    line_constants,
    propagation,
    screen_impedance,
    semicon_admittance,
)
from pdclass.sim.draw import draw_cable
from pdclass.sim.ranges import CableRanges

PLAIN = Cable(9.1e-3, 9.7e-3, 15.2e-3, 15.8e-3, 0.5e-3, ALUMINIUM_OHM_M, COPPER_OHM_M, 2.3, 5e-4)
SWEEP = 2j * np.pi * np.geomspace(1e3, 60e6, 200)


def test_conductor_at_direct_current():
    """At 0 Hz a conductor has the resistance of its area and the inductance mu0/8pi."""
    s = np.array([2j * np.pi * 0.01])
    impedance = conductor_impedance(5e-3, COPPER_OHM_M, s)
    assert impedance.real == pytest.approx(COPPER_OHM_M / (np.pi * 5e-3**2), rel=1e-6)
    assert (impedance / s).real == pytest.approx(mu_0 / (8 * np.pi), rel=1e-3)


def test_conductor_at_high_frequency():
    """Far above the skin frequency resistance and internal reactance are equal, and grow with the root of f."""
    s = np.array([1j, 4j]) * 2 * np.pi * 100e6
    impedance = conductor_impedance(5e-3, COPPER_OHM_M, s)
    wanted = np.sqrt(np.pi * 100e6 * mu_0 * COPPER_OHM_M) / (2 * np.pi * 5e-3)
    assert impedance[0].real == pytest.approx(wanted, rel=1e-3)
    assert impedance[0].imag == pytest.approx(wanted, rel=1e-3)
    assert impedance[1].real / impedance[0].real == pytest.approx(2, rel=1e-3)


def test_screen_at_both_ends():
    """A tube has the resistance of its wall at 0 Hz, and that of its skin at high frequency."""
    inside, wall = 16e-3, 0.3e-3
    slow = screen_impedance(inside, wall, COPPER_OHM_M, np.array([2j * np.pi * 1.0]))
    assert slow.real == pytest.approx(COPPER_OHM_M / (np.pi * ((inside + wall) ** 2 - inside**2)), rel=1e-4)
    fast = screen_impedance(inside, wall, COPPER_OHM_M, np.array([2j * np.pi * 100e6]))
    wanted = np.sqrt(np.pi * 100e6 * mu_0 * COPPER_OHM_M) / (2 * np.pi * inside)
    assert fast.real == pytest.approx(wanted, rel=1e-3)


def test_half_a_wall_shields_the_rest():
    """Where the wall is many skin depths thick, more of it changes nothing."""
    s = np.array([2j * np.pi * 30e6])
    thin, thick = (screen_impedance(16e-3, wall, COPPER_OHM_M, s) for wall in (0.3e-3, 3e-3))
    assert thin == pytest.approx(thick, rel=1e-9)


@pytest.mark.parametrize("seed", range(12))
def test_any_drawn_cable_is_passive(seed):
    """Resistance, conductance, attenuation and the real part of the characteristic impedance are never negative."""
    cable = draw_cable(CableRanges(), rng=np.random.default_rng(seed))
    line = line_constants(cable, SWEEP)
    assert (line.impedance.real > 0).all()
    assert (line.admittance.real > 0).all()
    assert (propagation(line).real > 0).all()
    assert (characteristic_impedance(line).real > 0).all()
    assert cable.conductor_m < cable.inner_m < cable.outer_m < cable.screen_m


def test_drawn_cables_lie_in_the_trades_ranges():
    """Velocity 100-200 m/us and impedance 8-50 ohm at 3 MHz (orders of magnitude, from memory)."""
    s = np.array([2j * np.pi * 3e6])
    for seed in range(100):
        line = line_constants(draw_cable(CableRanges(), rng=np.random.default_rng(seed)), s)
        assert 100e6 < s.imag[0] / propagation(line).imag[0] < 200e6
        assert 8 < characteristic_impedance(line).real[0] < 50


def test_semicon_loss_peaks_between_good_and_poor_conductors():
    """Both a very good and a very poor semiconducting screen cost little; one between costs most."""
    s = np.array([2j * np.pi * 30e6])
    loss = [
        propagation(line_constants(replace(PLAIN, semicon=(Semicon(sigma, 100), Semicon(sigma, 100))), s)).real[0]
        for sigma in (1e3, 0.1, 1e-6)
    ]
    plain = propagation(line_constants(PLAIN, s)).real[0]
    assert loss[1] > 1.5 * plain
    assert loss[0] == pytest.approx(plain, rel=0.01)
    assert loss[2] == pytest.approx(plain, rel=0.06)


def test_excess_loss_has_the_phase_of_skin_effect():
    """Excess of 1 doubles the high-frequency resistance and internal reactance alike."""
    s = np.array([2j * np.pi * 30e6])
    more = line_constants(replace(PLAIN, excess=1.0), s).impedance - line_constants(PLAIN, s).impedance
    assert more.real == pytest.approx(line_constants(PLAIN, s).impedance.real, rel=0.01)
    assert more.imag == pytest.approx(more.real, rel=1e-9)


def test_insulation_has_a_constant_loss_angle():
    """Conductance over susceptance is tan delta at every frequency."""
    admittance = insulation_admittance(PLAIN, SWEEP)
    assert admittance.real / admittance.imag == pytest.approx(np.full(SWEEP.size, 5e-4), rel=1e-6)


def test_cole_cole_step_is_the_static_permittivity():
    """Far below its relaxation a dispersive layer has permittivity and step, far above the permittivity alone."""
    layer = Semicon(1e-30, 20.0, step=80.0, relaxation_s=1e-7, spread=0.2)
    s = 2j * np.pi * np.array([1.0, 1e16])
    admittance = semicon_admittance(layer, 1.0, np.e, s) / s
    static = semicon_admittance(Semicon(1e-30, 1.0), 1.0, np.e, s) / s
    assert (admittance / static).real == pytest.approx([100.0, 20.0], rel=0.01)


def test_real_signals_stay_real():
    """Conjugate frequencies give conjugate line constants, the mark of a real impulse response."""
    s = np.array([6e4 + 2j * np.pi * 3e6])
    dispersive = replace(PLAIN, semicon=(Semicon(0.1, 20, 80, 1e-7, 0.3), Semicon(0.1, 20)), excess=0.5)
    for one, other in zip(line_constants(dispersive, s), line_constants(dispersive, s.conj()), strict=True):
        assert one == pytest.approx(other.conj(), rel=1e-12)
