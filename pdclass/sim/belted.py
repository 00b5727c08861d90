"""A belted three-core cable as one line: the coaxial radius that stands for one core against the common sheath."""

from __future__ import annotations

from typing import Literal

import numpy as np

from pdclass.pulses import FloatArray
from pdclass.sim.grid import ComplexArray

Others = Literal["floating", "earthed"]
_CHARGES = 24
# line charges at this share of the radius: the inductance is good to 1e-4 for the narrowest gaps, 1e-6 for usual ones
_DEPTH = 0.6


def belted_screen(conductor_m: float, core_insulation_m: float, belt_m: float, others: Others) -> float:
    """Radius of the screen [m] around one core alone that has the inductance of that core in a belted cable.

    Three round cores, each in its insulation, touch one another and the belt; the sheath lies on the belt. At high
    frequency the field keeps out of the metal, and one dielectric fills the space: inductance and capacitance
    then belong to one radius. It is smaller than the sheath's, which makes the sheath's resistance larger, as the
    current crowds under the core.

    Parameters
    ----------
    conductor_m : radius of the conductor [m]; of a sector, of the circle of the same circumference.
    core_insulation_m, belt_m : thickness of insulation on each core, and of the belt over all [m].
    others : the other two cores carry no current along the cable (floating) or have no voltage (earthed).
    """
    from_axis = 2 * (conductor_m + core_insulation_m) / np.sqrt(3)
    sheath_m = from_axis + conductor_m + core_insulation_m + belt_m
    centres = from_axis * np.exp(2j * np.pi * np.arange(3) / 3)
    charge = charge_per_voltage(centres, conductor_m, sheath_m)
    voltage = 1 / charge[0, 0] if others == "earthed" else np.linalg.inv(charge)[0, 0]
    return float(conductor_m * np.exp(voltage))


def charge_per_voltage(centres_m: ComplexArray, radius_m: float, sheath_m: float) -> FloatArray:
    """Capacitance matrix of equal round conductors in a round sheath over 2*pi*epsilon, (conductors, conductors).

    Line charges within each conductor and their images in the sheath, such that each surface has one voltage
    (method of fundamental solutions, from memory).

    Parameters
    ----------
    centres_m : axes of the conductors in the complex plane, the sheath's axis at 0 [m], (conductors,).
    radius_m : of the conductors [m]; they touch neither each other nor the sheath.
    sheath_m : radius of the sheath's inside [m].
    """
    count = centres_m.size
    around = np.exp(2j * np.pi * np.arange(_CHARGES) / _CHARGES)
    surface = (centres_m[:, np.newaxis] + radius_m * around).reshape(-1, 1)
    charges = (centres_m[:, np.newaxis] + _DEPTH * radius_m * around).reshape(1, -1)
    voltage = np.log(np.abs((sheath_m**2 - surface * charges.conj()) / (sheath_m * (surface - charges))))
    ones = np.kron(np.eye(count), np.ones((_CHARGES, 1)))
    found = np.linalg.solve(voltage, ones)
    return np.asarray(found.reshape(count, _CHARGES, count).sum(axis=1))
