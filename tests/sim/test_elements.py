"""Elements of a near end are positive real, and tend to what is known of them at their limits."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.constants import epsilon_0, mu_0

from pdclass.sim.elements import (
    Grading,
    Lead,
    LossyCapacitance,
    Sheath,
    SoilWay,
    capacitance_admittance,
    grading_admittance,
    lead_impedance,
    sheath_line,
    soil_admittance,
)

S = 2j * np.pi * np.geomspace(20e3, 60e6, 50)
SHEATH = Sheath(0.018, 0.0205, 2.4, 100.0, 10.0)


@pytest.mark.parametrize(
    "admittance",
    [
        lambda s: soil_admittance(SoilWay(100.0, 0.0, 300.0, 10.0), sheath_line(SHEATH, s), s),
        lambda s: soil_admittance(
            SoilWay(200.0, 7.0, 2.0, 1.0),
            sheath_line(replace(SHEATH, soil_ohm_m=5e3, soil_permittivity=30.0), s),
            s,
        ),
        lambda s: grading_admittance(Grading(30e-12, 1e4, 1e-12), s),
        lambda s: grading_admittance(Grading(30e-12, 1e7), s),
        lambda s: 1 / lead_impedance(Lead(0.1, 1e-6, 1e-4, 2e3), s),
        lambda s: capacitance_admittance(LossyCapacitance(1e-10, 5.0), s),
    ],
)
def test_elements_are_positive_real(admittance):
    """Every element has a real part above zero where s has none or a positive one, and a real value at real s."""
    for damping in (0.0, 6e4, 1e7):
        assert (admittance(damping + S).real > 0).all()
    real = admittance(np.array([1e5, 1e7]) + 0j)
    assert np.abs(real.imag).max() < 1e-15 * np.abs(real).max()


def test_a_grading_layer_is_a_ladder_of_small_elements():
    """The closed form is the limit of many small sections of resistance, layer capacitance and core capacitance."""
    grading, sections = Grading(40e-12, 3e4, 2e-12), 3000
    seen = np.zeros(S.size, complex)
    along = sections * (1 / grading.ohm + S * grading.layer_farad)
    for _ in range(sections):
        # the core's share stands at either end of each section
        seen = seen + S * grading.farad / sections / 2
        seen = seen * along / (seen + along) + S * grading.farad / sections / 2
    assert grading_admittance(grading, S) == pytest.approx(seen, rel=1e-4)


def test_a_well_conducting_grading_layer_is_its_capacitance():
    """A layer without resistance adds its whole capacitance, one that insulates adds none."""
    full = grading_admittance(Grading(40e-12, 1e-3), S)
    assert full == pytest.approx(S * 40e-12, rel=1e-5)
    assert np.abs(grading_admittance(Grading(40e-12, 1e12), S)).max() < 1e-3 * np.abs(full).max()


def test_a_sheath_in_soil_is_slow_and_lossy():
    """Soil makes it slower than light in the outer sheath, and its loss rises faster than the root of frequency."""
    hz = np.array([1e5, 1e6, 1e7])
    gamma, impedance = sheath_line(SHEATH, 2j * np.pi * hz)
    velocity = 2 * np.pi * hz / gamma.imag
    assert (velocity < 299792458.0 / np.sqrt(SHEATH.permittivity)).all()
    assert (np.diff(velocity) > 0).all()
    assert (gamma.real[1:] / gamma.real[:-1] > np.sqrt(10)).all()
    assert (np.abs(impedance) > 10).all()
    assert (np.abs(impedance) < 60).all()


def test_a_sheath_in_perfect_soil_is_a_coaxial_line():
    """With soil of no resistance the surge impedance and the velocity are those of the outer sheath alone."""
    line = sheath_line(replace(SHEATH, soil_ohm_m=1e-12), S)
    wall = np.log(SHEATH.outer_m / SHEATH.inner_m)
    surge = np.sqrt(mu_0 / epsilon_0 / SHEATH.permittivity) * wall / (2 * np.pi)
    assert line.impedance[-1] == pytest.approx(surge, rel=1e-3)
    assert line.gamma[-1].imag == pytest.approx(S[-1].imag * np.sqrt(mu_0 * epsilon_0 * SHEATH.permittivity), rel=1e-3)


def test_a_long_way_through_soil_hides_its_end():
    """What stands at the end of three kilometres of sheath no longer matters at 1 MHz, of one metre it is all."""
    line = sheath_line(SHEATH, S)
    far = [soil_admittance(SoilWay(100.0, 0.0, 3000.0, ohm), line, S)[S.imag > 6e6] for ohm in (1.0, 50.0)]
    assert far[0] == pytest.approx(far[1], rel=1e-6)
    near = soil_admittance(SoilWay(100.0, 0.0, 1.0, 5.0), line, S)[0]
    assert near == pytest.approx(0.2, rel=0.05)


def test_a_matched_way_reflects_nothing():
    """A line that ends in its own surge impedance shows it, whatever its length."""
    s = np.array([2j * np.pi * 1e6])
    line = sheath_line(SHEATH, s)
    real = line._replace(impedance=line.impedance.real + 0j)
    for length_m in (1.0, 30.0, 1000.0):
        way = SoilWay(100.0, 0.0, length_m, float(real.impedance.real[0]))
        assert soil_admittance(way, real, s) == pytest.approx(1 / real.impedance, rel=1e-12)


def test_a_building_is_a_line_at_the_speed_of_light():
    """A quarter of a wave through the building turns a resistance into the square of the surge impedance over it."""
    way = SoilWay(150.0, 5.0, 100.0, 30.0)
    quarter = 2j * np.pi * np.array([299792458.0 / (4 * way.building_m)])
    assert 1 / soil_admittance(way, None, quarter) == pytest.approx(np.array([150.0**2 / 30.0]), rel=1e-9)
    assert 1 / soil_admittance(way, None, quarter / 1e6) == pytest.approx(np.array([30.0]), rel=1e-5)


def test_a_lead_is_a_resistance_then_an_inductance_then_its_bridge():
    """Contacts alone at no frequency, the inductance between, and at the top what stands beside it."""
    lead = Lead(0.02, 1e-6, bridge_ohm=500.0)
    low, middle, top = lead_impedance(lead, 2j * np.pi * np.array([1.0, 1e6, 1e12]))
    assert low == pytest.approx(0.02, rel=1e-3)
    assert middle.imag == pytest.approx(2 * np.pi, rel=1e-3)
    assert top == pytest.approx(500.02, rel=1e-3)
