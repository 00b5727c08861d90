"""The near end: one network for every class; only the place where charge enters makes the difference.

The reference is the earth bar. The cable stands between the core and the screen of its termination; the strap with
the sensor stands between the screen and the earth bar, and beside it the screen has a way of its own to the soil. The
tail joins the core to the busbar of its own panel, which stands anywhere in a ladder of panels; other cables leave
other panels, each with a strap and a way to the soil of its own. All of this is a tree: its branches are folded from
the leaves to the root, the screen, and reciprocity turns the one solution with a current into the screen into the
strap current for a current into every node. Topology: common practice, no source.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from pdclass.errors import InputError, complaint
from pdclass.sim.elements import (
    Lead,
    LossyCapacitance,
    Sheath,
    SheathLine,
    SoilWay,
    Strap,
    StressCone,
    capacitance_admittance,
    cone_admittance,
    lead_impedance,
    sheath_line,
    soil_admittance,
)
from pdclass.sim.grid import ComplexArray

CORE, SCREEN, FIRST_BUS = 0, 1, 2


@dataclass(frozen=True)
class Feeder:
    """Another cable of the station, as far as its termination; what its route shows comes from outside.

    Attributes
    ----------
    tail : from the busbar to its termination.
    box : capacitance from its core to its earthed cable box.
    cone : capacitance from its core to its screen.
    strap : from its screen to the earth bar.
    soil : its screen's own way to earth.
    loop_share : voltage that a radiated field induces in its strap's loop, as a share of that in the own strap's.
    """

    tail: Lead
    box: LossyCapacitance
    cone: LossyCapacitance
    strap: Strap
    soil: SoilWay
    loop_share: float = 0.0


@dataclass(frozen=True)
class Winding:
    """A power transformer on a busbar: the capacitance of its winding to earth behind a lead."""

    lead: Lead
    capacitance: LossyCapacitance


@dataclass(frozen=True)
class Panel:
    """One panel of the ladder.

    Attributes
    ----------
    busbar : capacitance of the busbar to the enclosure.
    section : busbar to the next panel (without effect in the last one).
    dropper : lead from the busbar to the equipment.
    equipment : capacitance to earth of transformers and bushings, or of an open breaker's near side alone.
    feeders : cables that leave it; the cable with the sensor is not among them.
    transformer : power transformer that it feeds, or None.
    """

    busbar: LossyCapacitance
    section: Lead
    dropper: Lead
    equipment: LossyCapacitance
    feeders: tuple[Feeder, ...] = ()
    transformer: Winding | None = None


@dataclass(frozen=True)
class NearEnd:
    """Termination, strap and switchgear at the sensor.

    Attributes
    ----------
    tail : conductor from the termination to the busbar of its own panel.
    termination : between core and screen.
    box : capacitance from core to the cable box, which is earthed.
    strap : from screen to earth bar; the sensor sits round it.
    soil : the screen's own way to earth.
    panels : the ladder, in order.
    own : place of the panel of the cable with the sensor, from 0.
    sheath : line that every way through the soil is, or None where the resistance to earth stands in its place.
    tail_share : voltage that a radiated field induces in the loop of the tail, as a share of that in the strap's.

    Raises
    ------
    InputError
        If there is no such own panel.
    """

    tail: Lead
    termination: StressCone
    box: LossyCapacitance
    strap: Strap
    soil: SoilWay
    panels: tuple[Panel, ...]
    own: int = 0
    sheath: Sheath | None = None
    tail_share: float = 0.0

    def __post_init__(self) -> None:
        if not 0 <= self.own < len(self.panels):
            expected = f"a panel from 0 to {len(self.panels) - 1}"
            advice = "name a panel of the ladder"
            raise InputError(complaint("near end", "own", expected=expected, found=self.own, advice=advice))

    @property
    def feeder_list(self) -> tuple[Feeder, ...]:
        """The other cables, panel by panel."""
        return tuple(feeder for panel in self.panels for feeder in panel.feeders)

    @property
    def feeders(self) -> int:
        """Number of other cables, whose admittances the caller supplies."""
        return len(self.feeder_list)

    @property
    def nodes(self) -> int:
        """Number of nodes apart from the earth bar."""
        return FIRST_BUS + 2 * len(self.panels) + 2 * self.feeders


@dataclass(frozen=True)
class StrapTransfer:
    """Current through the strap, from screen to earth bar, per unit of excitation.

    Attributes
    ----------
    from_node : (nodes, frequencies) for a current driven from earth into each node.
    from_feeder : (feeders, frequencies) for a current driven from screen to core at the near end of a feeder's route.
    from_emf : (frequencies,) [S] for a voltage induced in the strap's loop.
    from_feeder_emf : (feeders, frequencies) [S] for a voltage induced in a feeder's strap loop.
    from_tail_emf : (frequencies,) [S] for a voltage induced in the loop of the tail.
    from_field : (frequencies,) [S] for a radiated field: per volt in the strap's loop, all loops in their shares.
    """

    from_node: ComplexArray
    from_feeder: ComplexArray
    from_emf: ComplexArray
    from_feeder_emf: ComplexArray
    from_tail_emf: ComplexArray
    from_field: ComplexArray


class _Frequencies(NamedTuple):
    s: ComplexArray
    root: ComplexArray


class _Branch(NamedTuple):
    """One node of the tree: what joins it to its parent in series, and what it has to earth."""

    node: int
    parent: int
    series_ohm: ComplexArray
    shunt_s: ComplexArray


def bus_node(panel: int) -> int:
    """Node of a panel's busbar."""
    return FIRST_BUS + 2 * panel


def equipment_node(panel: int) -> int:
    """Node of the equipment at the end of a panel's dropper."""
    return FIRST_BUS + 2 * panel + 1


def feeder_core_node(near: NearEnd, number: int) -> int:
    """Node of the core of a feeder's termination; that of its screen is the next one."""
    return FIRST_BUS + 2 * len(near.panels) + 2 * number


def strap_transfer(
    near: NearEnd, cable_s: ComplexArray, feeders_s: Sequence[ComplexArray], s: ComplexArray
) -> StrapTransfer:
    """Strap current for a current into any node, and for a voltage induced in any loop.

    Parameters
    ----------
    near : the network.
    cable_s : input admittance of the cable between core and screen [S], (frequencies,).
    feeders_s : the same for each other cable, panel by panel.
    s : complex frequency [1/s], (frequencies,), none of them 0.

    Raises
    ------
    InputError
        If there are not as many admittances as other cables.
    """
    if len(feeders_s) != near.feeders:
        advice = "give one route for each feeder"
        found = f"{len(feeders_s)} admittances"
        raise InputError(complaint("near end", "feeders", expected=near.feeders, found=found, advice=advice))
    at = _Frequencies(s, np.sqrt(s))
    strap = 1 / _lead(near.strap.lead, at)
    from_node = _voltages(near, cable_s, feeders_s, at) * strap
    from_emf = strap * (from_node[SCREEN] - 1)
    from_tail_emf = (from_node[CORE] - from_node[bus_node(near.own)]) / _lead(near.tail, at)
    first = feeder_core_node(near, 0)
    cores, screens = from_node[first::2], from_node[first + 1 :: 2]
    from_feeder_emf = np.empty_like(screens)
    from_field = from_emf + near.tail_share * from_tail_emf
    for number, feeder in enumerate(near.feeder_list):
        from_feeder_emf[number] = screens[number] / _lead(feeder.strap.lead, at)
        from_field += feeder.loop_share * from_feeder_emf[number]
    return StrapTransfer(from_node, cores - screens, from_emf, from_feeder_emf, from_tail_emf, from_field)


def _voltages(
    near: NearEnd, cable_s: ComplexArray, feeders_s: Sequence[ComplexArray], at: _Frequencies
) -> ComplexArray:
    """Voltage of every node per current into the screen [ohm], (nodes, frequencies)."""
    line = None if near.sheath is None else sheath_line(near.sheath, at.s)
    branches = list(_branches(near, cable_s, feeders_s, line, at))
    to_earth = {branch.node: branch.shunt_s for branch in branches}
    to_earth[SCREEN] = _screen_shunt(near.strap, near.soil, line, at)
    share: dict[int, ComplexArray] = {}
    for branch in reversed(branches):
        # what a child takes of its parent's voltage, and what it adds to its parent's way to earth
        share[branch.node] = 1 / (1 + branch.series_ohm * to_earth[branch.node])
        to_earth[branch.parent] = to_earth[branch.parent] + to_earth[branch.node] * share[branch.node]
    voltage = np.empty((near.nodes, at.s.size), np.complex128)
    voltage[SCREEN] = 1 / to_earth[SCREEN]
    for branch in branches:
        np.multiply(voltage[branch.parent], share[branch.node], out=voltage[branch.node])
    return voltage


def _branches(
    near: NearEnd,
    cable_s: ComplexArray,
    feeders_s: Sequence[ComplexArray],
    line: SheathLine | None,
    at: _Frequencies,
) -> Iterator[_Branch]:
    """Every node but the screen, parents before their children."""
    own, last = near.own, len(near.panels) - 1
    across = cable_s + cone_admittance(near.termination, at.s)
    yield _Branch(CORE, SCREEN, 1 / across, capacitance_admittance(near.box, at.s))
    yield _Branch(bus_node(own), CORE, _lead(near.tail, at), _bus_shunt(near.panels[own], at))
    for number in range(own - 1, -1, -1):
        panel = near.panels[number]
        yield _Branch(bus_node(number), bus_node(number + 1), _lead(panel.section, at), _bus_shunt(panel, at))
    for number in range(own, last):
        onward = _lead(near.panels[number].section, at)
        yield _Branch(bus_node(number + 1), bus_node(number), onward, _bus_shunt(near.panels[number + 1], at))
    number = 0
    for place, panel in enumerate(near.panels):
        equipment = capacitance_admittance(panel.equipment, at.s)
        yield _Branch(equipment_node(place), bus_node(place), _lead(panel.dropper, at), equipment)
        for feeder in panel.feeders:
            core = feeder_core_node(near, number)
            route_s = feeders_s[number] + capacitance_admittance(feeder.cone, at.s)
            yield _Branch(core, bus_node(place), _lead(feeder.tail, at), capacitance_admittance(feeder.box, at.s))
            yield _Branch(core + 1, core, 1 / route_s, _screen_shunt(feeder.strap, feeder.soil, line, at))
            number += 1


def _bus_shunt(panel: Panel, at: _Frequencies) -> ComplexArray:
    busbar = capacitance_admittance(panel.busbar, at.s)
    if panel.transformer is None:
        return busbar
    winding = capacitance_admittance(panel.transformer.capacitance, at.s)
    return np.asarray(busbar + winding / (1 + winding * _lead(panel.transformer.lead, at)))


def _screen_shunt(strap: Strap, soil: SoilWay, line: SheathLine | None, at: _Frequencies) -> ComplexArray:
    return np.asarray(1 / _lead(strap.lead, at) + at.s * strap.stray_farad + soil_admittance(soil, line, at.s))


def _lead(lead: Lead, at: _Frequencies) -> ComplexArray:
    return lead_impedance(lead, at.s, at.root)
