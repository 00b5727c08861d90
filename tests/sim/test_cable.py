"""The cable obeys the limits of physics."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.constants import mu_0
from scipy.special import ive, kve

from pdclass.errors import InputError
from pdclass.sim import cable as cable_module
from pdclass.sim.cable import (
    ALUMINIUM_OHM_M,
    COPPER_OHM_M,
    DB_PER_NEPER,
    Cable,
    Relaxation,
    Semicon,
    conductor_impedance,
    excess_impedance,
    external_inductance,
    inductance_share,
    insulation_admittance,
    line_constants,
    line_of,
    nominal_impedance,
    screen_impedance,
    semicon_admittance,
    wire_screen,
)
from pdclass.sim.grid import laplace_grid

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


@pytest.mark.parametrize("radius_m", [3e-3, 9e-3, 16e-3])
@pytest.mark.parametrize("resistivity", [COPPER_OHM_M, ALUMINIUM_OHM_M, 21.4e-8])
def test_series_against_exact_bessel_functions(radius_m, resistivity):
    """On the whole frequency grid conductor and tube agree with Bessel functions to 1e-10, series or not."""
    s = laplace_grid()[::7]
    m = np.sqrt(s * mu_0 / resistivity)
    x = m * radius_m
    size = resistivity * m / (2 * np.pi * radius_m)
    assert conductor_impedance(radius_m, resistivity, s) == pytest.approx(size * ive(0, x) / ive(1, x), rel=1e-10)
    for wall_m in (0.1e-3, 0.5e-3, 2e-3):
        y = m * (radius_m + wall_m)
        through = np.exp(-(y - x) - (y - x).real)
        above = ive(1, y) * kve(0, x) + ive(0, x) * kve(1, y) * through
        wanted = size * above / (ive(1, y) * kve(1, x) - ive(1, x) * kve(1, y) * through)
        assert screen_impedance(radius_m, wall_m, resistivity, s) == pytest.approx(wanted, rel=1e-10)


def test_most_of_the_grid_takes_the_series():
    """For a usual conductor fewer than one in a hundred frequencies need Bessel functions."""
    x = 9e-3 * np.sqrt(laplace_grid() * mu_0 / ALUMINIUM_OHM_M)
    assert np.mean(np.abs(x) <= cable_module._LARGE) < 0.01


def test_semicon_loss_peaks_between_good_and_poor_conductors():
    """Both a very good and a very poor semiconducting screen cost little; one between costs most."""
    s = np.array([2j * np.pi * 30e6])
    loss = [
        line_of(replace(PLAIN, semicon=(Semicon(sigma, 100), Semicon(sigma, 100))), s).gamma.real[0]
        for sigma in (1e3, 0.1, 1e-6)
    ]
    plain = line_of(PLAIN, s).gamma.real[0]
    assert loss[1] > 1.5 * plain
    assert loss[0] == pytest.approx(plain, rel=0.01)
    assert loss[2] == pytest.approx(plain, rel=0.06)


@pytest.mark.parametrize("power", [0.5, 0.7, 0.9, 0.95])
def test_excess_loss_is_what_it_says(power):
    """The stated decibels per km are added at 10 MHz, and rise with the stated power of frequency.

    Where the loss rises faster than with skin effect, its inductance and with it the impedance fall slightly with
    frequency, hence the tolerance.
    """
    s = 2j * np.pi * np.array([1e6, 10e6])
    more = line_of(replace(PLAIN, excess_db_per_km=30.0, excess_power=power), s).gamma.real
    added = (more - line_of(PLAIN, s).gamma.real) * 1000 * DB_PER_NEPER
    assert added[1] == pytest.approx(30.0, rel=0.03)
    assert np.log10(added[1] / added[0]) == pytest.approx(power, abs=0.03)


def test_excess_loss_of_skin_effect_has_its_phase():
    """With the power one half resistance and internal reactance of the excess are equal at every frequency."""
    skin = excess_impedance(replace(PLAIN, excess_db_per_km=10.0), SWEEP)
    assert skin.imag == pytest.approx(skin.real, rel=1e-9)
    assert skin.real[-1] / skin.real[0] == pytest.approx(np.sqrt(60e3), rel=1e-9)


@pytest.mark.parametrize("power", [0.5, 0.7, 0.95])
def test_excess_loss_does_not_change_the_velocity_much(power):
    """At 10 MHz the excess adds as much reactance as resistance: the velocity falls by its loss angle only."""
    s = np.array([2j * np.pi * 10e6])
    excess = excess_impedance(replace(PLAIN, excess_db_per_km=60.0, excess_power=power), s)
    assert excess.imag == pytest.approx(excess.real, rel=1e-9)


@pytest.mark.parametrize("power", [0.5, 0.8, 0.95])
def test_series_impedance_is_positive_real(power):
    """In the whole right half plane the resistance is positive, the reserve in inductance notwithstanding."""
    lossy = replace(PLAIN, excess_db_per_km=90.0, excess_power=power)
    angle = np.linspace(-np.pi / 2, np.pi / 2, 31)
    s = (2 * np.pi * np.geomspace(1e3, 1e10, 29)[:, np.newaxis] * np.exp(1j * angle)).ravel()
    assert (line_constants(lossy, s).impedance.real > 0).all()


def test_impossible_excess_loss_is_refused():
    """More excess loss than a passive line of these dimensions can have is an error that says what to lower."""
    share = inductance_share(300.0, 0.95, nominal_impedance(PLAIN) / external_inductance(PLAIN))
    assert share > 1
    with pytest.raises(InputError, match=r"expected a passive line, found 300 dB/km with power 0\.95"):
        line_of(replace(PLAIN, excess_db_per_km=300.0, excess_power=0.95), SWEEP)


def test_insulation_has_a_constant_loss_angle():
    """Conductance over susceptance is tan delta at every frequency."""
    admittance = insulation_admittance(PLAIN, SWEEP)
    assert admittance.real / admittance.imag == pytest.approx(np.full(SWEEP.size, 5e-4), rel=1e-6)


def test_paper_loses_most_at_its_relaxation():
    """A Cole-Cole step adds its height to the static permittivity, and a loss peak at 1/(2 pi tau)."""
    paper = replace(PLAIN, relaxation=Relaxation(0.5, 10e-9, 0.3), loss_tangent=1e-9)
    admittance = insulation_admittance(paper, SWEEP)
    loss = admittance.real / SWEEP.imag
    assert abs(SWEEP[np.argmax(loss)].imag) * 10e-9 == pytest.approx(1.0, rel=0.15)
    still = np.array([2j * np.pi])
    ratio = insulation_admittance(paper, still) / insulation_admittance(replace(PLAIN, loss_tangent=1e-9), still)
    assert ratio.real == pytest.approx(2.8 / 2.3, rel=1e-3)


def test_cole_cole_step_is_the_static_permittivity():
    """Far below its relaxation a dispersive layer has permittivity and step, far above the permittivity alone."""
    layer = Semicon(1e-30, 20.0, Relaxation(80.0, 1e-7, 0.2))
    s = 2j * np.pi * np.array([1.0, 1e16])
    admittance = semicon_admittance(layer, 1.0, np.e, s) / s
    static = semicon_admittance(Semicon(1e-30, 1.0), 1.0, np.e, s) / s
    assert (admittance / static).real == pytest.approx([100.0, 20.0], rel=0.01)


def test_screen_of_wires_keeps_their_resistance():
    """The tube has the resistance of all wires in parallel, each longer than the cable by its lay."""
    inside, wire, lay = 16e-3, 0.9e-3, 0.4
    tube = wire_screen(40, wire, inside, lay, COPPER_OHM_M)
    turn = np.hypot(lay, 2 * np.pi * (inside + wire / 2)) / lay
    wires = COPPER_OHM_M * turn / (40 * np.pi * wire**2 / 4)
    slow = screen_impedance(inside, tube.thickness_m, tube.ohm_m, np.array([2j * np.pi * 1.0]))
    assert slow.real == pytest.approx(wires, rel=1e-4)
    assert turn > 1.03


def test_real_signals_stay_real():
    """Conjugate frequencies give conjugate line constants, the mark of a real impulse response."""
    s = np.array([6e4 + 2j * np.pi * 3e6])
    layers = (Semicon(0.1, 20, Relaxation(80, 1e-7, 0.3)), Semicon(0.1, 20))
    dispersive = replace(
        PLAIN, semicon=layers, relaxation=Relaxation(0.5, 1e-8, 0.4), excess_db_per_km=20.0, excess_power=0.8
    )
    for one, other in zip(line_constants(dispersive, s), line_constants(dispersive, s.conj()), strict=True):
        assert one == pytest.approx(other.conj(), rel=1e-12)
