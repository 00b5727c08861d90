"""Reflections on a line against the lattice of travelling waves.

L. V. Bewley, Traveling Waves on Transmission Systems, Wiley, 1951 (formulas from memory; the coefficients 0.435 and
0.961 computed from them).
"""

import numpy as np
import pytest

from pdclass.sim.cable import Line
from pdclass.sim.grid import LEAD_S, laplace_grid, to_samples
from pdclass.sim.network import Route, Section, reflection, shown_admittance, voltage_along

OHM, VELOCITY, LENGTH_M, PLACE_M = 19.7, 178e6, 1000.0, 400.0
RATE_HZ, SIGMA_S = 250e6, 20e-9


def lossless(s):
    return Line(s / VELOCITY, np.full(s.shape, OHM + 0j))


def received(near_ohm, far_ohm):
    """Current through a resistance at the near end of a current injected on the way, (samples,)."""
    s = laplace_grid()
    route = Route((Section(lossless(s), LENGTH_M),), (), np.full(s.shape, 1 / far_ohm + 0j))
    # the route as a source of its short-circuit current beside its admittance
    shared = voltage_along(route, PLACE_M) / (1 + shown_admittance(route) * near_ohm)
    return to_samples(np.exp((s * SIGMA_S) ** 2 / 2 - s * LEAD_S) * shared, RATE_HZ)


def lattice(near_ohm, far_ohm, time_s):
    """The same by the lattice: half of the source goes each way, and every passing of an end has its coefficient."""
    near, far = ((ohm - OHM) / (ohm + OHM) for ohm in (near_ohm, far_ohm))
    wave = np.zeros(time_s.size)
    for turn in range(12):
        for height, way_m in ((1.0, PLACE_M), (far, 2 * LENGTH_M - PLACE_M)):
            arrival_s = LEAD_S + (way_m + 2 * turn * LENGTH_M) / VELOCITY
            shape = np.exp(-0.5 * ((time_s - arrival_s) / SIGMA_S) ** 2) / (SIGMA_S * np.sqrt(2 * np.pi))
            # what arrives and what it reflects make the current through the end
            wave += 0.5 * (1 - near) * (near * far) ** turn * height * shape
    return wave


@pytest.mark.parametrize(("load_ohm", "coefficient"), [(50.0, 0.435), (1000.0, 0.961), (1e9, 1.0), (19.7, 0.0)])
def test_worked_coefficients(load_ohm, coefficient):
    """(R - Z)/(R + Z) on a line of 19.7 ohm: +0.435 for 50 ohm, +0.961 for 1 kilohm, 1 open, 0 matched."""
    assert reflection(np.array([1 / load_ohm + 0j]), np.array([OHM + 0j])).real == pytest.approx(coefficient, abs=5e-4)


@pytest.mark.parametrize(("far_ohm", "coefficient"), [(50.0, 0.435), (1000.0, 0.961)])
def test_the_echo_has_the_worked_coefficient(far_ohm, coefficient):
    """Near end matched: the reflected arrival comes 2 (l - x)/v after the direct one and is that much of it."""
    wave = received(OHM, far_ohm)
    direct = int(np.argmax(wave))
    echo = direct + round(2 * (LENGTH_M - PLACE_M) / VELOCITY * RATE_HZ)
    assert direct / RATE_HZ == pytest.approx(LEAD_S + PLACE_M / VELOCITY, abs=1 / RATE_HZ)
    assert np.argmax(wave[direct + 50 :]) + direct + 50 == pytest.approx(echo, abs=1)
    assert wave[echo] / wave[direct] == pytest.approx(coefficient, abs=0.005)


@pytest.mark.parametrize("near_ohm", [OHM, 50.0, 5.0])
@pytest.mark.parametrize("far_ohm", [50.0, 1000.0, 5.0])
def test_every_arrival_of_the_lattice(near_ohm, far_ohm):
    """Both ends mismatched: direct and reflected arrival again every 2 l/v, each turn with both coefficients."""
    time_s = np.arange(round(70e-6 * RATE_HZ)) / RATE_HZ
    want = lattice(near_ohm, far_ohm, time_s)
    assert received(near_ohm, far_ohm)[: time_s.size] == pytest.approx(want, abs=2e-3 * want.max())
