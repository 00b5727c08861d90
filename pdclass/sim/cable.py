"""One screened cable core as a line: impedance and admittance per metre from its dimensions and materials.

Everything takes complex frequency s [1/s], so that the same functions serve sinusoids (s = j*omega) and the
damped line of the numerical Laplace transform.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from scipy.constants import epsilon_0, mu_0
from scipy.special import ive, kve

from pdclass.sim.grid import ComplexArray

COPPER_OHM_M = 1.7241e-8
ALUMINIUM_OHM_M = 2.8264e-8
_REFERENCE_RAD_PER_S = 2 * np.pi * 1e6


@dataclass(frozen=True)
class Semicon:
    """A semiconducting screen: conductivity and a permittivity that may fall with frequency.

    Attributes
    ----------
    conductivity_s_per_m : [S/m], > 0.
    permittivity : relative permittivity at high frequency, >= 1.
    step : rise of the permittivity towards low frequency (Cole-Cole), >= 0.
    relaxation_s : time constant of that step [s].
    spread : 0 for a Debye step, towards 1 for a broad one.
    """

    conductivity_s_per_m: float
    permittivity: float
    step: float = 0.0
    relaxation_s: float = 1e-7
    spread: float = 0.0


@dataclass(frozen=True)
class Cable:
    """A core with solid-equivalent conductor, semiconducting screens and a tubular metal screen.

    Attributes
    ----------
    conductor_m, inner_m, outer_m, screen_m : radii of conductor, inside and outside of the insulation, inside of
        the metal screen [m], rising.
    screen_thickness_m : wall of the equivalent tube [m].
    conductor_ohm_m, screen_ohm_m : resistivities [ohm m].
    permittivity : of the insulation, relative, at 1 MHz.
    loss_tangent : of the insulation, the same at every frequency.
    semicon : (conductor screen, insulation screen), or None for perfect radial contacts.
    excess : further series impedance (helical screen wires, stranding) as a share of the ideal high-frequency
        skin-effect impedance, >= 0; it has the phase of skin effect and is therefore causal.
    """

    conductor_m: float
    inner_m: float
    outer_m: float
    screen_m: float
    screen_thickness_m: float
    conductor_ohm_m: float
    screen_ohm_m: float
    permittivity: float
    loss_tangent: float
    semicon: tuple[Semicon, Semicon] | None = None
    excess: float = 0.0


class LineConstants(NamedTuple):
    """Series impedance [ohm/m] and shunt admittance [S/m] of a line, each (frequencies,)."""

    impedance: ComplexArray
    admittance: ComplexArray


def conductor_impedance(radius_m: float, resistivity_ohm_m: float, s: ComplexArray) -> ComplexArray:
    """Internal impedance of a solid round conductor [ohm/m], (frequencies,).

    S. A. Schelkunoff, Bell Syst. Tech. J. 13(4), 532-578, 1934. Exponentially scaled Bessel functions, so that
    the ratio holds from 50 Hz to any frequency.
    """
    m = np.sqrt(s * mu_0 / resistivity_ohm_m)
    return np.asarray(resistivity_ohm_m * m / (2 * np.pi * radius_m) * ive(0, m * radius_m) / ive(1, m * radius_m))


def screen_impedance(inside_m: float, thickness_m: float, resistivity_ohm_m: float, s: ComplexArray) -> ComplexArray:
    """Inner-surface impedance of a tube whose current returns inside it [ohm/m], (frequencies,).

    S. A. Schelkunoff, Bell Syst. Tech. J. 13(4), 532-578, 1934, with the exponentials factored out.
    """
    m = np.sqrt(s * mu_0 / resistivity_ohm_m)
    x, y = m * inside_m, m * (inside_m + thickness_m)
    through = np.exp(-(y - x) - (y - x).real)
    above = ive(1, y) * kve(0, x) + ive(0, x) * kve(1, y) * through
    below = ive(1, y) * kve(1, x) - ive(1, x) * kve(1, y) * through
    return np.asarray(resistivity_ohm_m * m / (2 * np.pi * inside_m) * above / below)


def excess_impedance(cable: Cable, s: ComplexArray) -> ComplexArray:
    """Series impedance k*sqrt(s) of helical wires and strands on top of the ideal conductors [ohm/m]."""
    ideal = np.sqrt(mu_0 * cable.conductor_ohm_m) / cable.conductor_m
    ideal += np.sqrt(mu_0 * cable.screen_ohm_m) / cable.screen_m
    return np.asarray(cable.excess * ideal / (2 * np.pi) * np.sqrt(s))


def semicon_admittance(layer: Semicon, inside_m: float, outside_m: float, s: ComplexArray) -> ComplexArray:
    """Radial admittance of a semiconducting layer [S/m], (frequencies,).

    A. Ametani, Y. Miyamoto, N. Nagaoka, IEEE Trans. Power Delivery 19(4), 1523-1531, 2004, Eq. 14; the
    Cole-Cole step of the permittivity is from memory.
    """
    step = layer.step / (1 + (s * layer.relaxation_s) ** (1 - layer.spread)) if layer.step else 0.0
    conductance = layer.conductivity_s_per_m + s * epsilon_0 * (layer.permittivity + step)
    return np.asarray(2 * np.pi * conductance / np.log(outside_m / inside_m))


def insulation_admittance(cable: Cable, s: ComplexArray) -> ComplexArray:
    """Radial admittance of the insulation [S/m]: constant loss angle, with the falling permittivity it implies.

    A constant-phase form (s/s0)^-n with n = (2/pi) atan(tan delta) is causal, which a constant permittivity with
    a constant loss tangent is not (common practice, no source).
    """
    power = 2 / np.pi * np.arctan(cable.loss_tangent)
    permittivity = cable.permittivity * (s / _REFERENCE_RAD_PER_S) ** -power
    return np.asarray(2 * np.pi * epsilon_0 * s * permittivity / np.log(cable.outer_m / cable.inner_m))


def line_constants(cable: Cable, s: ComplexArray) -> LineConstants:
    """Series impedance and shunt admittance of a screened core per metre.

    The magnetic field fills the semiconducting layers too, so the inductance has the radii of the metal; the
    layers stand in series radially (Ametani et al. 2004, Eq. 15).
    """
    external = s * mu_0 / (2 * np.pi) * np.log(cable.screen_m / cable.conductor_m)
    impedance = (
        external
        + conductor_impedance(cable.conductor_m, cable.conductor_ohm_m, s)
        + screen_impedance(cable.screen_m, cable.screen_thickness_m, cable.screen_ohm_m, s)
        + excess_impedance(cable, s)
    )
    elastance = 1 / insulation_admittance(cable, s)
    if cable.semicon is not None:
        elastance = elastance + 1 / semicon_admittance(cable.semicon[0], cable.conductor_m, cable.inner_m, s)
        elastance = elastance + 1 / semicon_admittance(cable.semicon[1], cable.outer_m, cable.screen_m, s)
    return LineConstants(impedance, np.asarray(1 / elastance))


def propagation(line: LineConstants) -> ComplexArray:
    """Propagation constant gamma [1/m], (frequencies,); its real part is never negative."""
    # the root of the product could leave the right half plane, the product of the roots cannot
    return np.asarray(np.sqrt(line.impedance) * np.sqrt(line.admittance))


def characteristic_impedance(line: LineConstants) -> ComplexArray:
    """Characteristic impedance [ohm], (frequencies,); its real part is never negative."""
    return np.asarray(np.sqrt(line.impedance) / np.sqrt(line.admittance))
