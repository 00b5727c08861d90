"""A cable route obeys the limits of physics."""

from dataclasses import replace

import numpy as np
import pytest

from pdclass.errors import InputError
from pdclass.sim.cable import ALUMINIUM_OHM_M, COPPER_OHM_M, Cable, Line, Relaxation, Semicon, line_of
from pdclass.sim.grid import LEAD_S, RECORD_S, laplace_grid, to_samples
from pdclass.sim.network import (
    FarEnd,
    Joint,
    Route,
    Section,
    far_admittance,
    reflection,
    route_length_m,
    shown_admittance,
    voltage_along,
)

CABLE = Cable(9.1e-3, 9.7e-3, 15.2e-3, 15.8e-3, 0.5e-3, ALUMINIUM_OHM_M, COPPER_OHM_M, 2.3, 5e-4)
LOSSY = replace(
    CABLE,
    inner_m=9.9e-3,
    outer_m=13.3e-3,
    screen_m=14.3e-3,
    semicon=(Semicon(0.05, 20, Relaxation(100, 1e-7, 0.3)), Semicon(0.1, 30)),
    relaxation=Relaxation(0.4, 5e-9, 0.4),
    excess_db_per_km=40.0,
    excess_power=0.85,
)
S = 2j * np.pi * np.linspace(0.1e6, 60e6, 500)
LINE, OTHER = line_of(CABLE, S), line_of(LOSSY, S)
JOINT = Joint(100e-9, 80e-12, 0.02)
TRANSFORMER = FarEnd(100e-12, 10.0, 2e-6, 1e-9, 1000.0)
RATE_HZ = 250e6


def spliced(far_s, s=S, joint=JOINT, lines=(LINE, OTHER, LINE), lengths=(310.0, 120.0, 275.0)):
    """Three sections with two joints."""
    parts = tuple(Section(line, length) for line, length in zip(lines, lengths, strict=True))
    return Route(parts, (joint, joint), far_s, s)


def backwards(route, far_s):
    """The same route from its other end."""
    return Route(route.sections[::-1], route.joints[::-1], far_s, route.s)


def lossless(ohm, velocity, s):
    """A line without loss."""
    return Line(s / velocity, np.full(s.shape, ohm + 0j))


def section_chain(line, length):
    """Chain matrix of a section, (frequencies, 2, 2), by hyperbolic functions."""
    wave = line.gamma * length
    rows = [[np.cosh(wave), line.impedance * np.sinh(wave)], [np.sinh(wave) / line.impedance, np.cosh(wave)]]
    return np.moveaxis(np.array(rows), -1, 0)


def joint_chain(joint, s):
    """Chain matrix of a joint, (frequencies, 2, 2)."""
    half, one, none = joint.ohm / 2 + s * joint.henry / 2, np.ones_like(s), np.zeros_like(s)
    series = np.moveaxis(np.array([[one, half], [none, one]]), -1, 0)
    shunt = np.moveaxis(np.array([[one, none], [s * joint.farad, one]]), -1, 0)
    return series @ shunt @ series


def scattering(route, ohm):
    """Scattering matrix of a route between real reference impedances, (frequencies, 2, 2)."""
    load = np.full(route.s.shape, 1 / ohm + 0j)
    there, back = replace_load(route, load), backwards(route, load)
    first, last = (reflection(shown_admittance(way), ohm) for way in (there, back))
    onward = voltage_along(there, route_length_m(there)) * (1 + first)
    return np.moveaxis(
        np.array([[first, voltage_along(back, route_length_m(back)) * (1 + last)], [onward, last]]), -1, 0
    )


def replace_load(route, far_s):
    """The same route with another load."""
    return Route(route.sections, route.joints, far_s, route.s)


def test_a_matched_end_reflects_nothing():
    """With its own impedance at the far end a cable of any length looks like that impedance, and nothing comes back."""
    assert np.abs(reflection(1 / LINE.impedance, LINE.impedance)).max() < 1e-12
    route = Route((Section(LINE, 700.0),), (), 1 / LINE.impedance, S)
    assert shown_admittance(route) == pytest.approx(1 / LINE.impedance, rel=1e-12)
    assert voltage_along(route, 420.0) == pytest.approx(np.exp(-LINE.gamma * 420.0), rel=1e-12)


def test_twice_the_length_squares_the_transfer():
    """Between matched ends the way through 2 km is the way through 1 km, squared."""
    route = Route((Section(OTHER, 5000.0),), (), 1 / OTHER.impedance, S)
    once, twice = (voltage_along(route, x) for x in (1000.0, 2000.0))
    assert twice == pytest.approx(once**2, rel=1e-11)


def test_a_cut_without_a_joint_changes_nothing():
    """A cable cut into three with joints of nothing is the whole cable."""
    load = far_admittance(TRANSFORMER, S)
    whole = Route((Section(LINE, 705.0),), (), load, S)
    cut = spliced(load, joint=Joint(0.0, 0.0, 0.0), lines=(LINE, LINE, LINE))
    assert shown_admittance(cut) == pytest.approx(shown_admittance(whole), rel=1e-9)
    for x in (0.0, 50.0, 310.0, 333.3, 650.0, 705.0):
        assert voltage_along(cut, x) == pytest.approx(voltage_along(whole, x), rel=1e-9)


@pytest.mark.parametrize("x", [0.0, 100.0, 309.9, 400.0, 500.0, 704.9])
def test_route_against_chain_matrices(x):
    """Admittance and voltage along a spliced route equal those of its chain matrices."""
    load = far_admittance(TRANSFORMER, S)
    route, before, after, reached = spliced(load), None, None, 0.0
    for number, section in enumerate(route.sections):
        lengths = [section.length_m]
        if reached <= x < reached + section.length_m:
            lengths = [x - reached, reached + section.length_m - x]
        for place, length in enumerate(lengths):
            chain = section_chain(section.line, length)
            if before is None or (after is None and place == 0):
                before = chain if before is None else before @ chain
            else:
                after = chain if after is None else after @ chain
        reached += section.length_m
        if number < 2 and after is None:
            before = before @ joint_chain(JOINT, S)
        elif number < 2:
            after = after @ joint_chain(JOINT, S)
    onward = (after[:, 1, 0] + after[:, 1, 1] * load) / (after[:, 0, 0] + after[:, 0, 1] * load)
    wanted = 1 / (before[:, 0, 0] + before[:, 0, 1] * onward)
    assert voltage_along(route, x) == pytest.approx(wanted, rel=1e-8)
    whole = before @ after
    shown = (whole[:, 1, 0] + whole[:, 1, 1] * load) / (whole[:, 0, 0] + whole[:, 0, 1] * load)
    assert shown_admittance(route) == pytest.approx(shown, rel=1e-8)


def test_voltage_along_is_also_the_short_circuit_current():
    """Reciprocity: a current injected at a place drives through a short circuit at the near end what is shown there."""
    load, x = far_admittance(TRANSFORMER, S), 400.0
    route = spliced(load)
    # from the place both ways: the rest of the route, and back to a short circuit (a very large admittance)
    short = np.full(S.shape, 1e7 + 0j)
    towards = Route((Section(OTHER, 90.0), Section(LINE, 310.0)), (JOINT,), short, S)
    away = Route((Section(OTHER, 30.0), Section(LINE, 275.0)), (JOINT,), load, S)
    voltage = 1 / (shown_admittance(towards) + shown_admittance(away))
    current = voltage * voltage_along(towards, 400.0) * short
    assert voltage_along(route, x) == pytest.approx(current, rel=1e-5)


@pytest.mark.parametrize("ohm", [12.0, 20.0, 50.0])
def test_a_route_is_reciprocal_and_passive(ohm):
    """Against a real impedance the scattering matrix is symmetric and its singular values are at most one."""
    matrix = scattering(spliced(np.zeros_like(S)), ohm)
    assert matrix[:, 0, 1] == pytest.approx(matrix[:, 1, 0], rel=1e-9)
    assert np.linalg.svd(matrix, compute_uv=False).max() <= 1 + 1e-9


def test_without_loss_energy_is_kept():
    """The power that enters lossless sections and joints is the power in their load, and scattering is unitary."""
    lines = (lossless(20.0, 178e6, S), lossless(13.0, 155e6, S), lossless(31.0, 170e6, S))
    route = spliced(np.full(S.shape, 1 / 50 + 0j), joint=Joint(100e-9, 80e-12, 0.0), lines=lines)
    arrived = (1 / 50) * np.abs(voltage_along(route, route_length_m(route))) ** 2
    assert shown_admittance(route).real == pytest.approx(arrived, rel=1e-9)
    assert np.linalg.svd(scattering(route, 25.0), compute_uv=False) == pytest.approx(1.0, abs=1e-9)


def ring():
    """A cable that goes on behind a short lead, to a transformer."""
    onward = Route((Section(LINE, 420.0),), (), far_admittance(TRANSFORMER, S), S)
    return FarEnd(80e-12, 0.1, 0.5e-6, 100e-12, onward=(onward,))


def feeders():
    """A far busbar with three further cables."""
    ways = tuple(Route((Section(line, 900.0),), (), np.zeros_like(S), S) for line in (LINE, OTHER, LINE))
    return FarEnd(80e-12, 0.1, 0.5e-6, 300e-12, onward=ways)


@pytest.mark.parametrize("far", [FarEnd(60e-12), TRANSFORMER, ring(), feeders()], ids=["open", "tr", "ring", "feeders"])
@pytest.mark.parametrize("length_m", [20.0, 400.0, 4000.0])
def test_far_ends_are_passive(far, length_m):
    """Whatever the far end, a cable never gives back more power than it was given."""
    route = Route((Section(LINE, length_m),), (), far_admittance(far, S), S)
    assert (far_admittance(far, S).real >= 0).all()
    assert (shown_admittance(route).real > 0).all()


def test_a_ring_goes_on():
    """A through-connected cable of the same kind without lead or stray is no far end at all."""
    load = far_admittance(TRANSFORMER, S)
    beyond = FarEnd(0.0, onward=(Route((Section(LINE, 400.0),), (), load, S),))
    joined = Route((Section(LINE, 300.0),), (), far_admittance(beyond, S), S)
    whole = Route((Section(LINE, 700.0),), (), load, S)
    assert shown_admittance(joined) == pytest.approx(shown_admittance(whole), rel=1e-9)


def test_feeders_stand_in_parallel():
    """Endless feeders on a far busbar are a resistance of their impedance over their number."""
    matched = Route((Section(LINE, 100.0),), (), 1 / LINE.impedance, S)
    busbar = FarEnd(0.0, onward=(matched, matched, matched))
    assert reflection(far_admittance(busbar, S), LINE.impedance) == pytest.approx(-0.5, abs=1e-9)


def test_nothing_overflows():
    """A hundred kilometres are a matched end, not a NaN."""
    route = Route((Section(LINE, 1e5), Section(OTHER, 1e5)), (JOINT,), np.full(S.shape, 1e12 + 0j), S)
    assert shown_admittance(route) == pytest.approx(1 / LINE.impedance, rel=1e-3)
    assert np.isfinite(voltage_along(route, 1.5e5)).all()


def gaussian(sigma_s, s):
    """A current of unit charge at LEAD_S."""
    return np.exp((s * sigma_s) ** 2 / 2 - s * LEAD_S)


@pytest.mark.parametrize("ohm", [50.0, 1000.0, 5.0])
def test_echoes_arrive_when_they_must(ohm):
    """Near end matched: pulse at x/v, its echo 2(l-x)/v later with the far end's coefficient, then nothing.

    The lattice of travelling waves (L. V. Bewley, Traveling Waves on Transmission Systems, Wiley, 1951, from memory).
    """
    s = laplace_grid()
    line = lossless(19.7, 178e6, s)
    route = Route((Section(line, 1000.0),), (), np.full(s.shape, 1 / ohm + 0j), s)
    # Norton equivalent of route and source, into the line's own impedance
    current = voltage_along(route, 400.0) / (1 + shown_admittance(route) * 19.7)
    wave = to_samples(gaussian(20e-9, s) * current, RATE_HZ)
    at = [round((LEAD_S + way / 178e6) * RATE_HZ) for way in (400.0, 1600.0)]
    assert np.argmax(wave) == pytest.approx(at[0], abs=1)
    assert np.argmax(np.abs(wave[at[0] + 50 :])) + at[0] + 50 == pytest.approx(at[1], abs=1)
    assert wave[at[1]] / wave[at[0]] == pytest.approx((ohm - 19.7) / (ohm + 19.7), abs=0.01)
    later = np.abs(wave[at[1] + 50 : int(70e-6 * RATE_HZ)]).max()
    assert later < 1e-3 * wave.max()


def test_echoes_recur_every_round_trip():
    """Near end shorted and far end open: the pulse recurs every 2l/v, each round trip turning its sign."""
    s = laplace_grid()
    route = Route((Section(lossless(20.0, 160e6, s), 800.0),), (), np.zeros_like(s), s)
    wave = to_samples(gaussian(20e-9, s) * voltage_along(route, 800.0), RATE_HZ)
    # current of both ways through a short circuit: twice the wave of half the source
    first = wave[round((LEAD_S + 5e-6) * RATE_HZ)]
    for trip in range(1, 5):
        assert wave[round((LEAD_S + 5e-6 + trip * 10e-6) * RATE_HZ)] / first == pytest.approx((-1) ** trip, abs=0.01)


@pytest.mark.parametrize("cable", [CABLE, LOSSY], ids=["plain", "lossy"])
@pytest.mark.parametrize("x", [200.0, 1000.0, 2000.0])
def test_nothing_arrives_before_it_can(cable, x):
    """Less than 1e-8 of the energy lies over 100 ns before the arrival of the fastest frequency.

    At a near end of 20 ohm: into a short circuit the pulse would go to and fro beyond the record's end.
    """
    s = laplace_grid()
    line = line_of(cable, s)
    route = Route((Section(line, x), Section(line, 500.0)), (JOINT,), far_admittance(TRANSFORMER, s))
    current = voltage_along(route, x) / (1 + shown_admittance(route) * 20.0)
    wave = to_samples(gaussian(20e-9, s) * current, RATE_HZ)
    fastest = (s.imag[1:] / line.gamma.imag[1:]).max()
    too_early = int((LEAD_S + x / fastest - 100e-9) * RATE_HZ)
    assert (wave[:too_early] ** 2).sum() < 1e-8 * (wave**2).sum()
    assert too_early > 700


@pytest.mark.parametrize("cable", [CABLE, LOSSY], ids=["plain", "lossy"])
def test_charge_is_kept_while_the_peak_falls(cable):
    """Along a matched line the transform at 0 Hz stays one within its direct-current resistance, and the peak falls."""
    slow, s = np.array([0.01 + 0j]), laplace_grid()
    peaks = []
    for x in (100.0, 500.0, 2000.0):
        still = line_of(cable, slow)
        route = Route((Section(still, 4000.0),), (), 1 / still.impedance, slow)
        assert voltage_along(route, x).real == pytest.approx(1.0, abs=0.002)
        line = line_of(cable, s)
        moving = Route((Section(line, 4000.0),), (), 1 / line.impedance)
        peaks.append(to_samples(gaussian(10e-9, s) * voltage_along(moving, x), RATE_HZ).max())
    assert peaks[0] > 1.2 * peaks[1] > 2.4 * peaks[2]


def test_the_grid_is_the_default():
    """A route that names no frequencies has those of the grid, 80 us long."""
    s = laplace_grid()
    assert s.imag[1] == pytest.approx(2 * np.pi / RECORD_S)
    assert Route((Section(line_of(CABLE, s), 10.0),), (), np.zeros_like(s)).s is s


def test_a_route_that_does_not_fit_is_refused():
    """Missing joints, other frequencies and places off the route are errors that name what is wrong."""
    section, load = Section(LINE, 100.0), np.zeros_like(S)
    with pytest.raises(InputError, match="expected 1 joints between 2 sections, found 0"):
        Route((section, section), (), load, S)
    with pytest.raises(InputError, match="route: frequencies"):
        Route((section,), (), load)
    with pytest.raises(InputError, match="expected 0 to 100, found 101"):
        voltage_along(Route((section,), (), load, S), 101.0)
    with pytest.raises(InputError, match="found -1"):
        voltage_along(Route((section,), (), load, S), -1.0)
