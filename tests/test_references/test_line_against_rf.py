"""The simulated line against scikit-rf, a general library of radio-frequency networks (scattering matrices)."""

from dataclasses import replace

import numpy as np
import pytest
import skrf
from skrf.media import Coaxial, DefinedGammaZ0

from pdclass.sim.cable import ALUMINIUM_OHM_M, COPPER_OHM_M, Cable, Relaxation, Semicon, line_of
from pdclass.sim.network import FarEnd, Joint, Route, Section, far_admittance, shown_admittance, voltage_along

CABLE = Cable(9.1e-3, 9.7e-3, 15.2e-3, 15.8e-3, 0.5e-3, ALUMINIUM_OHM_M, COPPER_OHM_M, 2.3, 5e-4)
LOSSY = replace(
    CABLE,
    semicon=(Semicon(0.05, 20, Relaxation(100, 1e-7, 0.3)), Semicon(0.1, 30)),
    permittivity=3.0,
    loss_tangent=1e-2,
    excess_db_per_km=30.0,
    excess_power=0.8,
)
FREQUENCY = skrf.Frequency.from_f(np.linspace(0.1e6, 50e6, 400), unit="Hz")
S = 2j * np.pi * FREQUENCY.f
JOINT = Joint(150e-9, 100e-12, 0.03)
FAR = FarEnd(120e-12, 8.0, 2.5e-6, 1.2e-9, 900.0)
PORT_OHM = 50.0


def line_network(line, length_m):
    """A section as a two-port of scikit-rf, its ports at 50 ohm."""
    medium = DefinedGammaZ0(FREQUENCY, z0_port=PORT_OHM, z0=line.impedance, gamma=line.gamma)
    return medium.line(length_m, "m")


def lumped():
    """The medium of lumped elements between ports of 50 ohm."""
    return DefinedGammaZ0(FREQUENCY, z0_port=PORT_OHM, z0=PORT_OHM, gamma=S / 3e8)


def joint_network(joint):
    """A joint of lumped elements."""
    medium = lumped()
    half = medium.resistor(joint.ohm / 2) ** medium.inductor(joint.henry / 2)
    return half ** medium.shunt_capacitor(joint.farad) ** half


def chain_of(network):
    """Its chain matrix, which does not depend on the reference of its ports."""
    return network.a


@pytest.fixture(scope="module")
def lines():
    """Two unlike lines at the frequencies of the comparison."""
    return line_of(CABLE, S), line_of(LOSSY, S)


def test_a_cascade_with_mismatches(lines):
    """Two unlike sections, a joint and an odd load: transfer and admittance agree within 1e-6 relative."""
    first, second = lines
    load = far_admittance(FAR, S)
    route = Route((Section(first, 310.0), Section(second, 145.0)), (JOINT,), load, S)
    cascade = line_network(first, 310.0) ** joint_network(JOINT) ** line_network(second, 145.0)
    chain = chain_of(cascade)
    wanted = 1 / (chain[:, 0, 0] + chain[:, 0, 1] * load)
    shown = (chain[:, 1, 0] + chain[:, 1, 1] * load) * wanted
    assert voltage_along(route, 455.0) == pytest.approx(wanted, rel=1e-6)
    assert shown_admittance(route) == pytest.approx(shown, rel=1e-6)


def test_a_source_within_the_cascade(lines):
    """A current injected within the second section drives the same current through a short circuit at the near end."""
    first, second = lines
    load, reached = far_admittance(FAR, S), 360.0
    route = Route((Section(first, 310.0), Section(second, 145.0)), (JOINT,), load, S)
    towards = chain_of(line_network(second, 50.0) ** joint_network(JOINT) ** line_network(first, 310.0))
    away = chain_of(line_network(second, 95.0))
    # seen from the source: towards the short circuit Y = D/B, away from it (C + D Y)/(A + B Y)
    there = towards[:, 1, 1] / towards[:, 0, 1]
    behind = (away[:, 1, 0] + away[:, 1, 1] * load) / (away[:, 0, 0] + away[:, 0, 1] * load)
    current = 1 / (there + behind) / towards[:, 0, 1]
    assert voltage_along(route, reached) == pytest.approx(current, rel=1e-6)


def test_scattering_between_matched_ports(lines):
    """Between ports of 50 ohm the whole cascade has the scattering parameters of the library, within 1e-6."""
    first, second = lines
    route = Route((Section(first, 310.0), Section(second, 145.0)), (JOINT,), np.full(S.shape, 1 / PORT_OHM + 0j), S)
    cascade = line_network(first, 310.0) ** joint_network(JOINT) ** line_network(second, 145.0)
    shown = shown_admittance(route) * PORT_OHM
    coefficient = (1 - shown) / (1 + shown)
    assert coefficient == pytest.approx(cascade.s[:, 0, 0], rel=1e-6, abs=1e-9)
    assert (1 + coefficient) * voltage_along(route, 455.0) == pytest.approx(cascade.s[:, 1, 0], rel=1e-6)


def coaxial(cable, model, tangent):
    """The cable without semiconducting screens as the library's coaxial medium, its dielectric of one tangent."""
    return Coaxial(
        FREQUENCY,
        Dint=2 * cable.conductor_m,
        Dout=2 * cable.screen_m,
        tout=cable.screen_thickness_m,
        epsilon_r=cable.permittivity,
        tan_delta=tangent,
        inner_conductor={"sigma": 1 / cable.conductor_ohm_m},
        outer_conductor={"sigma": 1 / cable.screen_ohm_m},
        model=model,
    )


@pytest.mark.parametrize("wall_m", [0.1e-3, 0.5e-3, 2e-3])
def test_coaxial_medium(wall_m):
    """Without semiconducting screens the cable is the library's coaxial medium of Bessel functions, within 1e-6.

    The insulation fills all between the metals and has no loss: with one, ours is causal and the library's is not.
    """
    cable = replace(CABLE, inner_m=CABLE.conductor_m, outer_m=CABLE.screen_m, screen_thickness_m=wall_m)
    ours, theirs = line_of(replace(cable, loss_tangent=1e-12), S), coaxial(cable, "schelkunoff", 0.0)
    assert ours.gamma.real == pytest.approx(theirs.gamma.real, rel=1e-6)
    assert ours.gamma.imag == pytest.approx(theirs.gamma.imag, rel=1e-6)
    assert ours.impedance == pytest.approx(theirs.z0_characteristic, rel=1e-6)


def test_coaxial_medium_with_dielectric_loss():
    """With a loss tangent of 5e-4 attenuation and phase agree within 0.1 %.

    The causal insulation's permittivity falls by (2/pi) tan(delta) ln(10) = 0.07 % a decade about 1 MHz; the library's
    is constant.
    """
    cable = replace(CABLE, inner_m=CABLE.conductor_m, outer_m=CABLE.screen_m)
    ours, theirs = line_of(cable, S), coaxial(cable, "schelkunoff", 5e-4)
    assert ours.gamma.real == pytest.approx(theirs.gamma.real, rel=1e-3)
    assert ours.gamma.imag == pytest.approx(theirs.gamma.imag, rel=1e-3)


def test_good_semiconducting_screens_are_metal_to_the_field():
    """Screens of 1e6 S/m leave the insulation's capacitance: the library's medium of the same L and C, within 1e-6.

    Its dielectric is given the permittivity that has that capacitance between the metal radii.
    """
    contacts = (Semicon(1e6, 10), Semicon(1e6, 10))
    filled = CABLE.permittivity * np.log(CABLE.screen_m / CABLE.conductor_m) / np.log(CABLE.outer_m / CABLE.inner_m)
    ours = line_of(replace(CABLE, semicon=contacts, loss_tangent=1e-12), S)
    theirs = coaxial(replace(CABLE, permittivity=filled), "schelkunoff", 0.0)
    assert ours.gamma.imag == pytest.approx(theirs.gamma.imag, rel=1e-6)
    assert ours.gamma.real == pytest.approx(theirs.gamma.real, rel=1e-6)


def test_feeders_and_ring_at_the_far_end(lines):
    """A far busbar with two feeders and its capacitance loads the route as the library's networks do, within 1e-6."""
    first, second = lines
    ways = tuple(
        Route((Section(line, length),), (), far_admittance(FAR, S), S)
        for line, length in ((first, 420.0), (second, 250.0))
    )
    busbar = FarEnd(80e-12, 0.2, 0.6e-6, 300e-12, onward=ways)
    route = Route((Section(first, 310.0),), (), far_admittance(busbar, S), S)
    medium = lumped()
    behind = S * 300e-12
    for way, length in zip((first, second), (420.0, 250.0), strict=True):
        chain, load = chain_of(line_network(way, length)), far_admittance(FAR, S)
        behind = behind + (chain[:, 1, 0] + chain[:, 1, 1] * load) / (chain[:, 0, 0] + chain[:, 0, 1] * load)
    lead = medium.shunt_capacitor(80e-12) ** medium.resistor(0.2) ** medium.inductor(0.6e-6)
    chain = chain_of(line_network(first, 310.0) ** lead)
    shown = (chain[:, 1, 0] + chain[:, 1, 1] * behind) / (chain[:, 0, 0] + chain[:, 0, 1] * behind)
    assert shown_admittance(route) == pytest.approx(shown, rel=1e-6)
