"""One cable between two ends: what it shows to its near end, all reflections included.

Only decaying exponentials appear, so nothing overflows however long or lossy the cable.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pdclass.sim.grid import ComplexArray


@dataclass(frozen=True)
class FarEnd:
    """Load at the far end: a resistance and an inductance in series with what is there, and a capacitance beside.

    Attributes
    ----------
    series_ohm, series_h : lead and losses of the load [ohm], [H], >= 0.
    load_ohm : resistive load behind the lead, e.g. the surge impedance of a cable that goes on [ohm]; inf = none.
    load_f : capacitance behind the lead, e.g. of a transformer [F], >= 0.
    stray_f : capacitance of the termination itself [F], > 0.
    """

    series_ohm: float
    series_h: float
    load_ohm: float
    load_f: float
    stray_f: float


def far_admittance(far: FarEnd, s: ComplexArray) -> ComplexArray:
    """Admittance of the load at the far end [S], (frequencies,)."""
    behind = s * far.load_f + 1 / far.load_ohm
    return np.asarray(s * far.stray_f + behind / (1 + behind * (far.series_ohm + s * far.series_h)))


def reflection(load_s: ComplexArray, impedance_ohm: ComplexArray) -> ComplexArray:
    """Reflection coefficient of the voltage at a load of given admittance [S], (frequencies,)."""
    return np.asarray((1 - load_s * impedance_ohm) / (1 + load_s * impedance_ohm))


def input_admittance(
    gamma: ComplexArray, impedance_ohm: ComplexArray, length_m: float, far_reflection: ComplexArray
) -> ComplexArray:
    """Admittance that a cable with a load at its far end shows to its near end [S], (frequencies,)."""
    back = far_reflection * np.exp(-2 * gamma * length_m)
    return np.asarray((1 - back) / (1 + back) / impedance_ohm)


def short_circuit_transfer(
    gamma: ComplexArray, length_m: float, far_reflection: ComplexArray, distance_m: float
) -> ComplexArray:
    """Current through a short circuit at the near end per current that a source drives at a distance.

    With `input_admittance` this is the Norton equivalent of cable and source, every reflection of far end, near
    end and source point included: e^(-gx) (1 + r e^(-2g(l-x))) / (1 + r e^(-2gl)), from the line equations.

    Parameters
    ----------
    gamma : propagation constant [1/m], (frequencies,).
    length_m : length of the cable [m].
    far_reflection : reflection coefficient at the far end.
    distance_m : from the near end to the source, which lies between core and screen [m], 0 to `length_m`.
    """
    onward = far_reflection * np.exp(-2 * gamma * (length_m - distance_m))
    back = far_reflection * np.exp(-2 * gamma * length_m)
    return np.asarray(np.exp(-gamma * distance_m) * (1 + onward) / (1 + back))
