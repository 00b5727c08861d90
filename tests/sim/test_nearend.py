"""The near end is a passive, reciprocal network, and folding its tree is solving its nodal matrix."""

from dataclasses import replace

import numpy as np
import pytest

from pdclass.errors import InputError
from pdclass.sim.drawn_near_end import NearEndRanges, draw_near_end
from pdclass.sim.elements import (
    Lead,
    LossyCapacitance,
    SoilWay,
    Strap,
    StressCone,
    cone_admittance,
    lead_impedance,
    sheath_line,
    soil_admittance,
)
from pdclass.sim.grid import LEAD_S, laplace_grid, record_samples, to_samples
from pdclass.sim.nearend import (
    CORE,
    SCREEN,
    Feeder,
    NearEnd,
    Panel,
    Winding,
    bus_node,
    equipment_node,
    feeder_core_node,
    strap_transfer,
)

S = 2j * np.pi * np.geomspace(20e3, 60e6, 50)
LADDERS = [
    ("own", "feeder"),
    ("feeder", "transformer", "own", "open", "feeder", "measuring", "feeder", "transformer", "feeder"),
    ("measuring", "feeder", "feeder", "own"),
    ("own",),
]
RATE_HZ = 250e6
SIGMA_S = 15e-9


def _near(roles=(), seed=0):
    return draw_near_end(NearEndRanges(roles=roles), rng=np.random.default_rng(seed))


def _routes(near, s=S):
    """Admittances of a cable and of feeders with reflections in them: short open lines."""
    lengths_ns = 300 + 170 * np.arange(near.feeders + 1)
    shown = np.array([np.tanh((s + 2e5) * ns * 1e-9) / (18.0 + ns / 100) for ns in lengths_ns])
    return shown[0], list(shown[1:])


def _series(lead, s):
    bridged = 1 / (1 / (s * lead.henry) + 1 / lead.bridge_ohm) if lead.henry else 0
    return lead.ohm + bridged + lead.skin * s**0.5


def _charging(part, s):
    return 1 / (1 / (s * part.farad) + part.ohm)


class Dense:
    """The nodal matrix of one near end, element by element from its description, in long doubles."""

    def __init__(self, near, cable_s, feeders_s, s):
        self.near, self.s = near, s.astype(np.clongdouble)
        self.matrix = np.zeros((s.size, near.nodes, near.nodes), np.clongdouble)
        line = near.sheath and sheath_line(near.sheath, s)
        self.join(CORE, SCREEN, cable_s)
        self.join(CORE, SCREEN, cone_admittance(near.termination, s))
        self.earth(CORE, _charging(near.box, self.s))
        self.join(CORE, bus_node(near.own), 1 / _series(near.tail, self.s))
        self.screen(SCREEN, near.strap, near.soil, line)
        feeders = iter(range(near.feeders))
        for number, panel in enumerate(near.panels):
            self.panel(number, panel)
            for feeder in panel.feeders:
                place = next(feeders)
                core = feeder_core_node(near, place)
                self.join(bus_node(number), core, 1 / _series(feeder.tail, self.s))
                self.earth(core, _charging(feeder.box, self.s))
                self.join(core, core + 1, feeders_s[place] + _charging(feeder.cone, self.s))
                self.screen(core + 1, feeder.strap, feeder.soil, line)

    def panel(self, number, panel):
        bus, equipment = bus_node(number), equipment_node(number)
        self.earth(bus, _charging(panel.busbar, self.s))
        self.join(bus, equipment, 1 / _series(panel.dropper, self.s))
        self.earth(equipment, _charging(panel.equipment, self.s))
        if panel.transformer is not None:
            winding = panel.transformer
            self.earth(bus, 1 / (_series(winding.lead, self.s) + 1 / _charging(winding.capacitance, self.s)))
        if number + 1 < len(self.near.panels):
            self.join(bus, bus_node(number + 1), 1 / _series(panel.section, self.s))

    def screen(self, node, strap, soil, line):
        self.earth(node, 1 / _series(strap.lead, self.s))
        self.earth(node, self.s * strap.stray_farad)
        self.earth(node, soil_admittance(soil, line, self.s.astype(np.complex128)))

    def join(self, one, other, admittance):
        self.earth(one, admittance)
        self.earth(other, admittance)
        self.matrix[:, one, other] -= admittance
        self.matrix[:, other, one] -= admittance

    def earth(self, node, admittance):
        self.matrix[:, node, node] += admittance

    def inverse(self):
        """Gauss-Jordan elimination without pivots, (frequencies, nodes, nodes)."""
        count = self.near.nodes
        both = np.concatenate([self.matrix, np.broadcast_to(np.eye(count, dtype=np.clongdouble), self.matrix.shape)], 2)
        for pivot in range(count):
            both[:, pivot] /= both[:, pivot, pivot, None].copy()
            factor = both[:, :, pivot].copy()
            factor[:, pivot] = 0
            both -= factor[:, :, None] * both[:, None, pivot]
        return both[:, :, count:]


def _bare(**changes):
    """A small near end without any loss but the soil's resistance and a feeder's."""
    free = LossyCapacitance
    way = SoilWay(150.0, 2.0, 100.0, 25.0)
    feeder = Feeder(Lead(0.0, 1e-6), free(10e-12, 0.0), free(60e-12, 0.0), Strap(Lead(0.0, 0.7e-6), 30e-12), way)
    panels = (
        Panel(free(50e-12, 0.0), Lead(0.0, 0.5e-6), Lead(0.0, 0.8e-6), free(100e-12, 0.0), (feeder,)),
        Panel(free(70e-12, 0.0), Lead(0.0, 0.4e-6), Lead(0.0, 1.1e-6), free(150e-12, 0.0)),
        Panel(
            free(60e-12, 0.0),
            Lead(0.0, 0.6e-6),
            Lead(0.0, 0.9e-6),
            free(80e-12, 0.0),
            transformer=Winding(Lead(0.0, 2e-6), free(1e-9, 0.0)),
        ),
    )
    whole = NearEnd(
        tail=Lead(0.0, 1e-6),
        termination=StressCone(free(80e-12, 0.0)),
        box=free(15e-12, 0.0),
        strap=Strap(Lead(0.0, 0.6e-6), 40e-12),
        soil=SoilWay(120.0, 4.0, 100.0, 30.0),
        panels=panels,
        own=1,
    )
    return replace(whole, **changes)


@pytest.mark.parametrize("roles", LADDERS, ids=len)
@pytest.mark.parametrize("seed", range(3))
def test_folding_the_tree_solves_the_nodal_matrix(roles, seed):
    """The strap current for a current into every node is that of a dense nodal matrix, to 1e-12."""
    near = _near(roles, seed)
    cable_s, feeders_s = _routes(near)
    impedance = Dense(near, cable_s, feeders_s, S).inverse()
    wanted = (impedance[:, SCREEN] / _series(near.strap.lead, S.astype(np.clongdouble))[:, None]).T
    found = strap_transfer(near, cable_s, feeders_s, S).from_node
    assert found.shape == (near.nodes, S.size)
    assert np.abs(found / wanted - 1).max() < 1e-12


@pytest.mark.parametrize("roles", LADDERS, ids=len)
def test_the_network_is_reciprocal(roles):
    """The inverse of the nodal matrix is symmetric, which is what lets one solution serve every node."""
    near = _near(roles, 4)
    impedance = Dense(near, *_routes(near), S).inverse()
    assert np.abs(impedance - np.swapaxes(impedance, 1, 2)).max() < 1e-12 * np.abs(impedance).max()


@pytest.mark.parametrize("roles", LADDERS, ids=len)
def test_voltages_in_the_loops(roles):
    """A voltage in a loop acts as its Norton current in the nodal matrix, and a field is the sum of its loops."""
    near = _near(roles, 5)
    cable_s, feeders_s = _routes(near)
    impedance = Dense(near, cable_s, feeders_s, S).inverse()
    transfer = strap_transfer(near, cable_s, feeders_s, S)
    strap, tail = 1 / lead_impedance(near.strap.lead, S), 1 / lead_impedance(near.tail, S)
    own = strap * (strap * impedance[:, SCREEN, SCREEN] - 1)
    along = strap * tail * (impedance[:, SCREEN, CORE] - impedance[:, SCREEN, bus_node(near.own)])
    field = own + near.tail_share * along
    assert transfer.from_emf == pytest.approx(own.astype(complex), rel=1e-10)
    assert transfer.from_tail_emf == pytest.approx(along.astype(complex), rel=1e-9)
    for number, feeder in enumerate(near.feeder_list):
        core = feeder_core_node(near, number)
        other = strap / lead_impedance(feeder.strap.lead, S) * impedance[:, SCREEN, core + 1]
        field = field + feeder.loop_share * other
        across = strap * (impedance[:, SCREEN, core] - impedance[:, SCREEN, core + 1])
        assert transfer.from_feeder_emf[number] == pytest.approx(other.astype(complex), rel=1e-10)
        assert transfer.from_feeder[number] == pytest.approx(across.astype(complex), rel=1e-9)
    assert transfer.from_field == pytest.approx(field.astype(complex), rel=1e-9)
    assert transfer.from_feeder.shape == transfer.from_feeder_emf.shape == (near.feeders, S.size)


@pytest.mark.parametrize("seed", range(30))
def test_no_port_gives_more_than_it_takes(seed):
    """Drawn near ends are passive: every driving-point quantity has a real part of zero or more at real frequency."""
    near = _near(seed=seed)
    cable_s, feeders_s = _routes(near)
    transfer = strap_transfer(near, cable_s, feeders_s, S)
    into_screen = transfer.from_node[SCREEN] * lead_impedance(near.strap.lead, S)
    assert (into_screen.real > 0).all()
    assert (transfer.from_emf.real < 0).all()  # the induced voltage points against the current that is counted
    impedance = Dense(near, cable_s, feeders_s, S).inverse()
    assert (np.diagonal(impedance, axis1=1, axis2=2).real > -1e-12 * np.abs(impedance).max()).all()


def test_without_losses_all_power_arrives_in_the_resistances():
    """A current into the screen of a lossless network delivers what soil and cables take up, and nothing else."""
    near = _bare()
    cable_s, feeder_s = np.full(S.size, 1 / 20 + 0j), np.full(S.size, 1 / 35 + 0j)
    transfer = strap_transfer(near, cable_s, [feeder_s], S)
    volt = transfer.from_node * lead_impedance(near.strap.lead, S)
    core = feeder_core_node(near, 0)
    taken = np.abs(volt[CORE] - volt[SCREEN]) ** 2 / 20 + np.abs(volt[core] - volt[core + 1]) ** 2 / 35
    for node, way in ((SCREEN, near.soil), (core + 1, near.feeder_list[0].soil)):
        taken = taken + np.abs(volt[node]) ** 2 * soil_admittance(way, None, S).real
    assert volt[SCREEN].real == pytest.approx(taken, rel=1e-9)


def test_slow_current_into_the_screen_leaves_through_the_strap():
    """At low frequency strap and soil share as two resistances do; the capacitances take nothing."""
    lead = Lead(0.02, 0.6e-6)
    near = _bare(strap=Strap(lead, 40e-12))
    slow = np.array([2j * np.pi * 50.0])
    found = strap_transfer(near, np.zeros(1, complex), [np.zeros(1, complex)], slow).from_node[SCREEN]
    assert found == pytest.approx(30.0 / 30.02, abs=2e-5)


def test_fast_current_into_the_screen_shuns_the_strap():
    """Far above the resonance of strap and stray capacitance the strap's share falls as 1/(s^2 L C)."""
    near = _bare(strap=Strap(Lead(0.0, 0.6e-6), 1e-6))
    fast = np.array([2j * np.pi * 30e6])
    found = strap_transfer(near, np.zeros(1, complex), [np.zeros(1, complex)], fast).from_node[SCREEN]
    assert found == pytest.approx(1 / (fast**2 * 0.6e-6 * 1e-6), rel=1e-2)


def test_charge_between_core_and_screen_halves():
    """Between a matched cable and a near end of the same resistance half of a current goes each way."""
    short = LossyCapacitance(1.0, 0.0)
    panel = Panel(short, Lead(0.0, 1e-6), Lead(0.0, 1e-6), LossyCapacitance(1e-12, 0.0))
    near = _bare(
        tail=Lead(20.0, 0.0),
        termination=StressCone(LossyCapacitance(1e-18, 0.0)),
        box=LossyCapacitance(1e-18, 0.0),
        strap=Strap(Lead(0.0, 1e-12), 0.0),
        panels=(panel,),
        own=0,
    )
    transfer = strap_transfer(near, np.full(S.size, 1 / 20 + 0j), [], S)
    # it comes back through the strap from the earth bar
    assert transfer.from_node[CORE] - transfer.from_node[SCREEN] == pytest.approx(np.full(S.size, -0.5), abs=1e-3)


def _wave(response):
    """Samples of a response to a Gaussian current of unit charge whose middle stands at LEAD_S."""
    s = laplace_grid()
    return to_samples(response * np.exp(0.5 * (SIGMA_S * s) ** 2 - s * LEAD_S), RATE_HZ)


@pytest.mark.parametrize("seed", range(6))
def test_nothing_comes_before_its_cause(seed):
    """Until 100 ns before the middle of a source current of 15 ns less than 1e-8 of the energy has come."""
    near, s = _near(seed=seed), laplace_grid()
    transfer = strap_transfer(near, np.full(s.size, 1 / 20 + 0j), [np.full(s.size, 1 / 25 + 0j)] * near.feeders, s)
    before = np.arange(record_samples(RATE_HZ)) / RATE_HZ < LEAD_S - 100e-9
    for response in (*transfer.from_node, *transfer.from_feeder, transfer.from_field, transfer.from_tail_emf):
        energy = _wave(response) ** 2
        assert energy[before].sum() < 1e-8 * energy.sum()


def test_a_station_of_one_panel_more_with_nothing_in_it_is_the_same():
    """A further panel behind a section that hardly conducts changes nothing, wherever it stands."""
    near = _bare()
    cable_s, feeders_s = _routes(near)
    empty = replace(near.panels[1], section=Lead(1e15, 0.0))
    before = strap_transfer(near, cable_s, feeders_s, S)
    after = strap_transfer(replace(near, panels=(empty, *near.panels), own=2), cable_s, feeders_s, S)
    for panel in range(3):
        for node in (bus_node, equipment_node):
            assert after.from_node[node(panel + 1)] == pytest.approx(before.from_node[node(panel)], rel=1e-9)
    assert after.from_feeder == pytest.approx(before.from_feeder, rel=1e-9)


def test_a_mirrored_ladder_is_the_same_ladder():
    """Counting the panels from the other end changes no current."""
    near = _bare()
    sections = [panel.section for panel in near.panels]
    turned = tuple(
        replace(panel, section=section)
        for panel, section in zip(near.panels[::-1], [sections[1], sections[0], sections[2]], strict=True)
    )
    cable_s, feeders_s = _routes(near)
    one = strap_transfer(near, cable_s, feeders_s, S)
    other = strap_transfer(replace(near, panels=turned, own=1), cable_s, feeders_s, S)
    assert other.from_node[bus_node(2)] == pytest.approx(one.from_node[bus_node(0)], rel=1e-12)
    assert other.from_node[equipment_node(0)] == pytest.approx(one.from_node[equipment_node(2)], rel=1e-12)
    assert other.from_feeder == pytest.approx(one.from_feeder, rel=1e-12)


def test_as_many_routes_as_feeders():
    """A route too few or too many is refused, naming how many are needed."""
    near = _bare()
    with pytest.raises(InputError, match="feeders: expected 1, found 0 admittances"):
        strap_transfer(near, S * 0, [], S)


def test_an_own_panel_outside_the_ladder():
    """An own panel that the ladder lacks is refused."""
    with pytest.raises(InputError, match="own: expected a panel from 0 to 2, found 3"):
        _bare(own=3)
