"""The near end: one network for every class; only the place where charge enters makes the difference.

Nodes: core of the termination, screen of the cable, and for each panel a busbar node and an equipment node
(voltage transformer, current transformer, bushings at the end of a dropper). The reference is the earth bar.
The cable stands between core and screen; the strap with the sensor stands between screen and earth bar.
Element values are broad assumptions (common practice, no source): ring frequency and Q come out as random
variables of a few MHz to some tens of MHz.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pdclass.sim.grid import ComplexArray

CORE, SCREEN, FIRST_BUS = 0, 1, 2


@dataclass(frozen=True)
class Lead:
    """An inductance with its losses: R + sL + k sqrt(s) [ohm, H, ohm s^0.5]."""

    ohm: float
    henry: float
    skin: float = 0.0


@dataclass(frozen=True)
class LossyCapacitance:
    """A capacitance with a resistance in series [F], [ohm]."""

    farad: float
    ohm: float


@dataclass(frozen=True)
class Panel:
    """One panel: its length of busbar, the equipment on its dropper, and the feeders that leave it.

    Attributes
    ----------
    busbar : capacitance of the busbar to the enclosure.
    dropper : lead from the busbar to the equipment.
    equipment : capacitance of transformers and bushings to earth.
    feeders : series lead and surge impedance of other cables, their own strap included [ohm, H].
    section : busbar to the next panel (unused in the last one).
    """

    busbar: LossyCapacitance
    dropper: Lead
    equipment: LossyCapacitance
    feeders: tuple[Lead, ...]
    section: Lead


@dataclass(frozen=True)
class NearEnd:
    """Termination, strap and switchgear at the sensor.

    Attributes
    ----------
    tail : conductor from the termination to the first busbar.
    termination : capacitance from core to screen.
    box : capacitance from core to the cable box, which is earthed.
    strap : earth strap from screen to earth bar, round which the sensor sits.
    soil_ohm : surge resistance of the screen against soil [ohm].
    screen_f : stray capacitance of the screen's end to earth [F].
    panels : two or three; the first is that of this cable.
    """

    tail: Lead
    termination: LossyCapacitance
    box: LossyCapacitance
    strap: Lead
    soil_ohm: float
    screen_f: float
    panels: tuple[Panel, ...]

    @property
    def nodes(self) -> int:
        """Number of nodes apart from the earth bar."""
        return FIRST_BUS + 2 * len(self.panels)


@dataclass(frozen=True)
class StrapTransfer:
    """Strap current per unit of excitation.

    Attributes
    ----------
    from_node : (frequencies, nodes) for a current driven from earth into each node.
    from_emf : (frequencies,) [S] for a voltage induced in the strap's loop.
    """

    from_node: ComplexArray
    from_emf: ComplexArray


def lead_admittance(lead: Lead, s: ComplexArray) -> ComplexArray:
    """Admittance of a lead [S], (frequencies,)."""
    return np.asarray(1 / (lead.ohm + s * lead.henry + lead.skin * np.sqrt(s)))


def capacitance_admittance(part: LossyCapacitance, s: ComplexArray) -> ComplexArray:
    """Admittance of a lossy capacitance [S], (frequencies,)."""
    return np.asarray(s * part.farad / (1 + s * part.farad * part.ohm))


def nodal_matrix(near: NearEnd, cable_s: ComplexArray, s: ComplexArray) -> ComplexArray:
    """Nodal admittance matrix of the near end with its cable [S], (frequencies, nodes, nodes), symmetric.

    Parameters
    ----------
    near : the network.
    cable_s : input admittance of the cable between core and screen [S], (frequencies,).
    s : complex frequency [1/s].
    """
    matrix = np.zeros((s.size, near.nodes, near.nodes), np.complex128)
    _join(matrix, CORE, SCREEN, cable_s + capacitance_admittance(near.termination, s))
    _to_earth(matrix, CORE, capacitance_admittance(near.box, s))
    _to_earth(matrix, SCREEN, lead_admittance(near.strap, s) + 1 / near.soil_ohm + s * near.screen_f)
    _join(matrix, CORE, FIRST_BUS, lead_admittance(near.tail, s))
    for number, panel in enumerate(near.panels):
        bus, equipment = bus_node(number), equipment_node(number)
        _to_earth(matrix, bus, capacitance_admittance(panel.busbar, s))
        _join(matrix, bus, equipment, lead_admittance(panel.dropper, s))
        _to_earth(matrix, equipment, capacitance_admittance(panel.equipment, s))
        for feeder in panel.feeders:
            _to_earth(matrix, bus, lead_admittance(feeder, s))
        if number + 1 < len(near.panels):
            _join(matrix, bus, bus_node(number + 1), lead_admittance(panel.section, s))
    return matrix


def strap_transfer(near: NearEnd, cable_s: ComplexArray, s: ComplexArray) -> StrapTransfer:
    """Strap current for a current into any node, and for a voltage induced in the strap's loop.

    The network is reciprocal: one solution with a current into the screen gives the screen's voltage for a
    current into every node.
    """
    matrix = nodal_matrix(near, cable_s, s)
    into_screen = np.zeros((s.size, near.nodes, 1), np.complex128)
    into_screen[:, SCREEN, 0] = 1
    voltage = np.linalg.solve(matrix, into_screen)[:, :, 0]
    strap = lead_admittance(near.strap, s)
    return StrapTransfer(voltage * strap[:, None], strap * (voltage[:, SCREEN] * strap - 1))


def bus_node(panel: int) -> int:
    """Node of a panel's busbar."""
    return FIRST_BUS + 2 * panel


def equipment_node(panel: int) -> int:
    """Node of the equipment at the end of a panel's dropper."""
    return FIRST_BUS + 2 * panel + 1


def _join(matrix: ComplexArray, one: int, other: int, admittance: ComplexArray) -> None:
    matrix[:, one, one] += admittance
    matrix[:, other, other] += admittance
    matrix[:, one, other] -= admittance
    matrix[:, other, one] -= admittance


def _to_earth(matrix: ComplexArray, node: int, admittance: ComplexArray) -> None:
    matrix[:, node, node] += admittance
