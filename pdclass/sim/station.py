"""Cable, near end and neighbouring cables as one network: the strap current that a charge makes wherever it enters."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from pdclass.sim.grid import ComplexArray, laplace_grid
from pdclass.sim.nearend import CORE, SCREEN, NearEnd, StrapTransfer, bus_node, equipment_node, strap_transfer
from pdclass.sim.network import Route, route_length_m, shown_admittance, voltage_along

#: Voltage induced in the strap's loop per slope of a distant current [V s/A]: only its shape matters.
_MUTUAL_H = 1e-8


@dataclass(frozen=True)
class Station:
    """What lies between sources and strap current, solved on the frequency grid.

    Attributes
    ----------
    near : the near end.
    route : the cable with the sensor, as far as its far end.
    neighbours : the other cables on the busbar.
    transfer : strap current per excitation of the near end.
    """

    near: NearEnd
    route: Route
    neighbours: tuple[Route, ...]
    transfer: StrapTransfer

    @property
    def length_m(self) -> float:
        """Length of the cable with the sensor [m]."""
        return route_length_m(self.route)


def solve_station(near: NearEnd, route: Route, neighbours: Sequence[Route], s: ComplexArray | None = None) -> Station:
    """The network at complex frequencies [1/s], by default those of the grid.

    Parameters
    ----------
    neighbours : as many as the near end has feeders.
    """
    grid = laplace_grid() if s is None else s
    shown = [shown_admittance(neighbour) for neighbour in neighbours]
    return Station(near, route, tuple(neighbours), strap_transfer(near, shown_admittance(route), shown, grid))


def from_cable(station: Station, distance_m: float) -> ComplexArray:
    """Strap current per current between core and screen at a distance along the cable, (frequencies,).

    The network is reciprocal: what a current there drives through the near end is what a voltage at the near end
    leaves there.
    """
    across = station.transfer.from_node[CORE] - station.transfer.from_node[SCREEN]
    return np.asarray(across * voltage_along(station.route, distance_m))


def from_neighbour(station: Station, number: int, distance_m: float) -> ComplexArray:
    """Strap current per current between core and screen of a neighbour's cable, (frequencies,)."""
    neighbour = station.neighbours[number]
    return np.asarray(station.transfer.from_feeder[number] * voltage_along(neighbour, distance_m))


def from_box(station: Station) -> ComplexArray:
    """Strap current per current from the core of the termination to the earthed cable box, (frequencies,)."""
    return np.asarray(station.transfer.from_node[CORE])


def from_screen(station: Station) -> ComplexArray:
    """Strap current per current conducted into the cable's screen from elsewhere, (frequencies,)."""
    return np.asarray(station.transfer.from_node[SCREEN])


def from_bus(station: Station, panel: int) -> ComplexArray:
    """Strap current per current from a panel's busbar to earth, (frequencies,)."""
    return np.asarray(station.transfer.from_node[bus_node(panel)])


def from_equipment(station: Station, panel: int) -> ComplexArray:
    """Strap current per current from the equipment on a panel's dropper to earth, (frequencies,)."""
    return np.asarray(station.transfer.from_node[equipment_node(panel)])


def from_field(station: Station, s: ComplexArray | None = None) -> ComplexArray:
    """Strap current per distant current whose field crosses the loops of the station, (frequencies,)."""
    grid = laplace_grid() if s is None else s
    return np.asarray(grid * _MUTUAL_H * station.transfer.from_field)
