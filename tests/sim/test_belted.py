"""The equivalent line of a belted cable has the field of three cores in a sheath."""

import numpy as np
import pytest

from pdclass.sim.belted import belted_screen, charge_per_voltage


@pytest.mark.parametrize("off_m", [0.0, 2e-3, 4e-3])
def test_one_core_off_the_axis(off_m):
    """A cylinder within a cylinder has the known capacitance 1/arcosh, to 1e-6 even close to the sheath."""
    radius, sheath = 8e-3, 13.5e-3
    wanted = 1 / np.arccosh((sheath**2 + radius**2 - off_m**2) / (2 * sheath * radius))
    assert charge_per_voltage(np.array([off_m + 0j]), radius, sheath)[0, 0] == pytest.approx(wanted, rel=1e-6)


def test_thin_cores_have_images():
    """Thin conductors have the potentials of line charges and their images (textbook limit)."""
    radius, insulation, belt = 0.5e-3, 9e-3, 4e-3
    from_axis = 2 * (radius + insulation) / np.sqrt(3)
    sheath = from_axis + radius + insulation + belt
    own = np.log((sheath**2 - from_axis**2) / (radius * sheath))
    floating = np.log(belted_screen(radius, insulation, belt, "floating") / radius)
    assert floating == pytest.approx(own, rel=1e-3)


def test_earthed_neighbours_bring_the_screen_nearer():
    """Neighbours without voltage take part in the return: the screen is nearer than with floating ones."""
    earthed, floating = (belted_screen(8e-3, 2.5e-3, 1.3e-3, others) for others in ("earthed", "floating"))
    assert 8e-3 < earthed < floating < 8e-3 + 2.5e-3 + 1.3e-3 + 12e-3


def test_capacitances_are_reciprocal_and_passive():
    """The capacitance matrix of three cores is symmetric, and its own terms outweigh the mutual ones."""
    charge = charge_per_voltage(11e-3 * np.exp(2j * np.pi * np.arange(3) / 3), 8e-3, 22e-3)
    assert charge == pytest.approx(charge.T, rel=1e-6)
    assert (charge.sum(axis=1) > 0).all()
    assert (charge - np.diag(np.diag(charge)) <= 0).all()
