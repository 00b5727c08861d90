"""The near end is a passive, reciprocal network, and rings in a broad range."""

import numpy as np
import pytest

from pdclass.sim.circuit import from_cable, solve_network
from pdclass.sim.draw import draw_cable, draw_far_end, draw_near_end
from pdclass.sim.grid import LEAD_S, band_end, laplace_grid, to_samples
from pdclass.sim.nearend import (
    CORE,
    SCREEN,
    bus_node,
    equipment_node,
    lead_admittance,
    nodal_matrix,
    strap_transfer,
)
from pdclass.sim.ranges import CableRanges, NearEndRanges

S = 2j * np.pi * np.geomspace(20e3, 50e6, 60)
CABLE_S = np.full(S.size, 1 / 20 + 0j)


def _near(seed):
    return draw_near_end(NearEndRanges(), rng=np.random.default_rng(seed))


@pytest.mark.parametrize("seed", range(8))
def test_symmetric_and_passive(seed):
    """The nodal matrix is symmetric and its conductance part has no negative eigenvalue."""
    matrix = nodal_matrix(_near(seed), CABLE_S, S)
    assert np.array_equal(matrix, np.swapaxes(matrix, 1, 2))
    lowest = np.linalg.eigvalsh(matrix.real).min(axis=1)
    assert (lowest > -1e-12 * np.abs(matrix).max(axis=(1, 2))).all()


@pytest.mark.parametrize("seed", range(4))
def test_one_solution_serves_every_source(seed):
    """The strap current by reciprocity is the strap current of a network solved for each source."""
    near = _near(seed)
    matrix = nodal_matrix(near, CABLE_S, S)
    transfer = strap_transfer(near, CABLE_S, S)
    strap = lead_admittance(near.strap, S)
    for node in range(near.nodes):
        current = np.zeros((S.size, near.nodes, 1), complex)
        current[:, node, 0] = 1
        screen = np.linalg.solve(matrix, current)[:, SCREEN, 0]
        assert transfer.from_node[:, node] == pytest.approx(strap * screen, rel=1e-8)


def test_voltage_in_the_strap():
    """A voltage in the strap drives it through the rest of the network, as an independent reduction says."""
    near = _near(3)
    transfer = strap_transfer(near, CABLE_S, S)
    without = nodal_matrix(near, CABLE_S, S)
    strap = lead_admittance(near.strap, S)
    without[:, SCREEN, SCREEN] -= strap
    behind_ohm = np.linalg.inv(without)[:, SCREEN, SCREEN]
    assert -transfer.from_emf == pytest.approx(1 / (1 / strap + behind_ohm), rel=1e-8)


def test_slow_current_into_the_screen_leaves_through_the_strap():
    """At low frequency the strap carries nearly all that is driven into the screen: soil and cable are worse ways."""
    near = _near(1)
    transfer = strap_transfer(near, CABLE_S, np.array([2j * np.pi * 100.0]).repeat(S.size))
    assert np.abs(transfer.from_node[:, SCREEN]) == pytest.approx(1, abs=0.25)
    assert np.abs(transfer.from_node[:, SCREEN]).max() <= 1.0


def test_no_charge_is_lost_in_the_matrix():
    """The currents that leave all nodes to earth add up to the current that was driven in."""
    near = _near(2)
    matrix = nodal_matrix(near, CABLE_S, S)
    current = np.zeros((S.size, near.nodes, 1), complex)
    current[:, bus_node(1), 0] = 1
    voltage = np.linalg.solve(matrix, current)[:, :, 0]
    to_earth = matrix.sum(axis=2)  # rows of a nodal matrix add up to what the node has to earth
    assert (to_earth * voltage).sum(axis=1) == pytest.approx(np.ones(S.size), rel=1e-9)
    assert np.abs(to_earth[:, CORE]).max() > 0


def test_rings_are_broad_random_variables():
    """Over many drawn panels the ring lies at a few MHz to some tens of MHz, with Q from a few to some tens."""
    ring_hz, ring_q = np.array([_dominant_ring(seed) for seed in range(60)]).T
    low, middle, high = np.percentile(ring_hz, [10, 50, 90])
    assert 0.5e6 < low < 5e6 < middle < 12e6 < high < 40e6
    assert high > 4 * low
    low, middle, high = np.percentile(ring_q, [10, 50, 90])
    assert low < 4 < middle < 30
    assert high > 10


def _dominant_ring(seed):
    rng = np.random.default_rng(seed)
    cable, far = draw_cable(CableRanges(), rng=rng), draw_far_end("cable", rng=rng)
    network = solve_network(cable, 1000.0, far, draw_near_end(NearEndRanges(), rng=rng))
    response = network.transfer.from_node[:, equipment_node(0)] * band_end()
    wave = to_samples(response * np.exp(-laplace_grid() * LEAD_S), 250e6)[550:2050]
    size = 16384
    spectrum, hz = np.abs(np.fft.rfft(wave * np.hanning(wave.size), size)), np.fft.rfftfreq(size, 4e-9)
    spectrum[hz < 0.5e6] = 0
    top = int(np.argmax(spectrum))
    above = spectrum > spectrum[top] / np.sqrt(2)
    right = top + int(np.argmin(above[top:]))
    left = top - int(np.argmin(above[top::-1]))
    return hz[top], hz[top] / (hz[right] - hz[left])


def test_a_local_source_is_a_cable_source_at_no_distance():
    """Approaching the termination along the cable, the response tends to that of the termination itself."""
    rng = np.random.default_rng(5)
    cable, far = draw_cable(CableRanges(), rng=rng), draw_far_end("open", rng=rng)
    network = solve_network(cable, 500.0, far, draw_near_end(NearEndRanges(), rng=rng))
    at_end = network.transfer.from_node[:, CORE] - network.transfer.from_node[:, SCREEN]
    # so long a root of s leaves some 0.1 % at 60 MHz and 1 mm
    assert np.abs(from_cable(network, 0.0) - at_end).max() < 1e-9 * np.abs(at_end).max()
    assert np.abs(from_cable(network, 1e-3) - at_end).max() < 1e-2 * np.abs(at_end).max()
