"""One screened cable core as a line: impedance and admittance per metre from its dimensions and materials.

Everything takes complex frequency s [1/s], so that the same functions serve sinusoids (s = j*omega) and the
damped line of the numerical Laplace transform.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import factorial, prod
from typing import NamedTuple

import numpy as np
from scipy.constants import epsilon_0, mu_0
from scipy.special import ive, kve

from pdclass.errors import InputError, complaint
from pdclass.sim.grid import ComplexArray

COPPER_OHM_M = 1.7241e-8
ALUMINIUM_OHM_M = 2.8264e-8
LEAD_OHM_M = 21.4e-8
#: Decibels in a neper.
DB_PER_NEPER = 20 / np.log(10)
#: Frequency at which an excess loss is stated [Hz].
EXCESS_HZ = 10e6
_PERMITTIVITY_RAD_PER_S = 2 * np.pi * 1e6
#: Arguments from which the asymptotic series of Bessel functions replace them.
_LARGE = 24.0
_TERMS = 10


@dataclass(frozen=True)
class Relaxation:
    """A permittivity that rises towards low frequency, after Cole and Cole (1941, from memory).

    Attributes
    ----------
    step : rise of the relative permittivity, >= 0.
    relaxation_s : time constant of that step [s], > 0.
    spread : 0 for a Debye step, towards 1 for a broad one.
    """

    step: float
    relaxation_s: float
    spread: float = 0.0


@dataclass(frozen=True)
class Semicon:
    """A semiconducting screen: conductivity and a permittivity that may fall with frequency.

    Attributes
    ----------
    conductivity_s_per_m : [S/m], > 0.
    permittivity : relative permittivity at high frequency, >= 1.
    relaxation : what is added to it towards low frequency, or None.
    """

    conductivity_s_per_m: float
    permittivity: float
    relaxation: Relaxation | None = None


@dataclass(frozen=True)
class Cable:
    """A core with solid-equivalent conductor, semiconducting screens and a tubular metal screen.

    Attributes
    ----------
    conductor_m, inner_m, outer_m, screen_m : radii of conductor, inside and outside of the insulation, inside of
        the metal screen [m], rising; without semiconducting screens the first two and the last two may be equal.
    screen_thickness_m : wall of the equivalent tube [m].
    conductor_ohm_m, screen_ohm_m : resistivities [ohm m].
    permittivity : of the insulation, relative, at 1 MHz, without its relaxation.
    loss_tangent : of the insulation, the same at every frequency, without its relaxation.
    semicon : (conductor screen, insulation screen), or None for perfect radial contacts.
    relaxation : of the insulation (impregnated paper), or None.
    excess_db_per_km : attenuation that helical wires, strands, tapes and ageing add at 10 MHz [dB/km], >= 0; what comes
        out is 0.9 to 1.08 of it, see `excess_impedance`.
    excess_power : power of frequency with which it rises, 0.5 (skin effect) up to below 1.
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
    relaxation: Relaxation | None = None
    excess_db_per_km: float = 0.0
    excess_power: float = 0.5


class LineConstants(NamedTuple):
    """Series impedance [ohm/m] and shunt admittance [S/m] of a line, each (frequencies,)."""

    impedance: ComplexArray
    admittance: ComplexArray


class Line(NamedTuple):
    """Propagation constant [1/m] and characteristic impedance [ohm] of a line, each (frequencies,)."""

    gamma: ComplexArray
    impedance: ComplexArray


class Tube(NamedTuple):
    """A metal screen as a tube: wall [m] and resistivity [ohm m]."""

    thickness_m: float
    ohm_m: float


def line_of(cable: Cable, s: ComplexArray) -> Line:
    """A cable as a line at complex frequencies [1/s].

    Raises
    ------
    InputError
        If the cable's excess loss is more than a passive line of its dimensions can have.
    """
    constants = line_constants(cable, s)
    # the root of the product could leave the right half plane, the product of the roots cannot
    series, shunt = np.sqrt(constants.impedance), np.sqrt(constants.admittance)
    return Line(np.asarray(series * shunt), np.asarray(series / shunt))


def line_constants(cable: Cable, s: ComplexArray) -> LineConstants:
    """Series impedance and shunt admittance of a screened core per metre.

    The magnetic field fills the semiconducting layers too, so the inductance has the radii of the metal; the
    layers stand in series radially (A. Ametani, Y. Miyamoto, N. Nagaoka, IEEE Trans. Power Delivery 19(4),
    1523-1531, 2004, Eq. 15).

    Raises
    ------
    InputError
        If the cable's excess loss is more than a passive line of its dimensions can have.
    """
    impedance = (
        s * external_inductance(cable)
        + conductor_impedance(cable.conductor_m, cable.conductor_ohm_m, s)
        + screen_impedance(cable.screen_m, cable.screen_thickness_m, cable.screen_ohm_m, s)
        + excess_impedance(cable, s)
    )
    admittance = insulation_admittance(cable, s)
    if cable.semicon is not None:
        within = semicon_admittance(cable.semicon[0], cable.conductor_m, cable.inner_m, s)
        around = semicon_admittance(cable.semicon[1], cable.outer_m, cable.screen_m, s)
        admittance = 1 / (1 / admittance + 1 / within + 1 / around)
    return LineConstants(np.asarray(impedance), np.asarray(admittance))


def external_inductance(cable: Cable) -> float:
    """Inductance of the field between conductor and metal screen [H/m]."""
    return float(mu_0 / (2 * np.pi) * np.log(cable.screen_m / cable.conductor_m))


def nominal_impedance(cable: Cable) -> float:
    """Characteristic impedance of the cable without any loss, at 1 MHz [ohm]."""
    capacitance = 2 * np.pi * epsilon_0 * cable.permittivity / np.log(cable.outer_m / cable.inner_m)
    return float(np.sqrt(external_inductance(cable) / capacitance))


def conductor_impedance(radius_m: float, resistivity_ohm_m: float, s: ComplexArray) -> ComplexArray:
    """Internal impedance of a solid round conductor [ohm/m], (frequencies,).

    S. A. Schelkunoff, Bell Syst. Tech. J. 13(4), 532-578, 1934; from 50 Hz to any frequency.
    """
    m = np.sqrt(s * mu_0 / resistivity_ohm_m)
    ratio = _by_size(m * radius_m, _conductor_exact, _conductor_asymptotic)
    return np.asarray(resistivity_ohm_m / (2 * np.pi * radius_m) * m * ratio)


def screen_impedance(inside_m: float, thickness_m: float, resistivity_ohm_m: float, s: ComplexArray) -> ComplexArray:
    """Inner-surface impedance of a tube whose current returns inside it [ohm/m], (frequencies,).

    S. A. Schelkunoff, Bell Syst. Tech. J. 13(4), 532-578, 1934, with the exponentials factored out.
    """
    m = np.sqrt(s * mu_0 / resistivity_ohm_m)
    wider = 1 + thickness_m / inside_m
    ratio = _by_size(m * inside_m, lambda x: _tube_exact(x, wider), lambda x: _tube_asymptotic(x, wider))
    return np.asarray(resistivity_ohm_m / (2 * np.pi * inside_m) * m * ratio)


def excess_impedance(cable: Cable, s: ComplexArray) -> ComplexArray:
    """Series impedance k*s^n of helical wires, strands, tapes and ageing [ohm/m], (frequencies,).

    With `excess_power` n the attenuation that it adds rises with the n-th power of frequency, and k follows from
    `excess_db_per_km` and the cable's nominal impedance. Internal inductance, semiconducting screens and relaxations
    make the impedance at 10 MHz another one, so that the cables of the base world get 0.9 to 1.08 of what is stated
    (99 of 100 of them). A loss that rises faster than skin effect comes with more
    internal inductance than skin effect; what it has more of it at 10 MHz is taken from the external one, so that
    at this frequency the loss alone makes no cable slower than its dimensions say (common practice, no source).
    The sum of both stays a passive, causal impedance as long as the external inductance is the larger one.

    Raises
    ------
    InputError
        If it is not.
    """
    if cable.excess_db_per_km == 0:
        return np.zeros_like(s)
    inductance, impedance = external_inductance(cable), nominal_impedance(cable)
    share = inductance_share(cable.excess_db_per_km, cable.excess_power, impedance / inductance)
    if share >= 1:
        found = f"{cable.excess_db_per_km:g} dB/km with power {cable.excess_power:g}"
        advice = "lower the excess loss or its power of frequency"
        raise InputError(complaint("cable", "excess", expected="a passive line", found=found, advice=advice))
    reference = 2 * np.pi * EXCESS_HZ
    resistance = 2 * impedance * cable.excess_db_per_km / 1000 / DB_PER_NEPER
    size = resistance / np.cos(cable.excess_power * np.pi / 2)
    return np.asarray(size * (s / reference) ** cable.excess_power - s * (share * inductance))


def inductance_share(db_per_km: float, power: float, velocity_m_per_s: float) -> float:
    """Share of a line's inductance that an excess loss takes over; the line is passive below 1.

    Parameters
    ----------
    db_per_km : excess loss at 10 MHz [dB/km].
    power : power of frequency with which it rises, 0.5 to below 1.
    velocity_m_per_s : of the line without loss [m/s].
    """
    neper_per_m = db_per_km / 1000 / DB_PER_NEPER
    return float(neper_per_m * velocity_m_per_s / (np.pi * EXCESS_HZ) * (np.tan(power * np.pi / 2) - 1))


def semicon_admittance(layer: Semicon, inside_m: float, outside_m: float, s: ComplexArray) -> ComplexArray:
    """Radial admittance of a semiconducting layer [S/m], (frequencies,).

    A. Ametani, Y. Miyamoto, N. Nagaoka, IEEE Trans. Power Delivery 19(4), 1523-1531, 2004, Eq. 14.
    """
    permittivity = layer.permittivity + relaxed(layer.relaxation, s)
    conductance = layer.conductivity_s_per_m + s * (epsilon_0 * permittivity)
    return np.asarray(2 * np.pi / np.log(outside_m / inside_m) * conductance)


def insulation_admittance(cable: Cable, s: ComplexArray) -> ComplexArray:
    """Radial admittance of the insulation [S/m]: a constant loss angle, and a relaxation where it has one.

    A constant-phase form (s/s0)^-n with n = (2/pi) atan(tan delta) is causal, which a constant permittivity with
    a constant loss tangent is not (common practice, no source).
    """
    power = 2 / np.pi * np.arctan(cable.loss_tangent)
    permittivity = cable.permittivity * (s / _PERMITTIVITY_RAD_PER_S) ** -power + relaxed(cable.relaxation, s)
    return np.asarray(2 * np.pi * epsilon_0 / np.log(cable.outer_m / cable.inner_m) * s * permittivity)


def relaxed(relaxation: Relaxation | None, s: ComplexArray) -> ComplexArray:
    """What a relaxation adds to the relative permittivity, (frequencies,)."""
    if relaxation is None:
        return np.zeros_like(s)
    return np.asarray(relaxation.step / (1 + (s * relaxation.relaxation_s) ** (1 - relaxation.spread)))


def wire_screen(count: int, wire_m: float, inside_m: float, lay_m: float, resistivity_ohm_m: float) -> Tube:
    """Helical wires as a tube: the wires' metal spread over the circumference, the way longer by the lay.

    The tube has the direct-current resistance of the wires; crowding between them at high frequency belongs to
    the excess loss (common practice, no source).

    Parameters
    ----------
    count : wires, >= 1.
    wire_m : their diameter [m].
    inside_m : radius of the screen's inside [m].
    lay_m : length along the cable of one turn [m].
    resistivity_ohm_m : of the metal [ohm m].
    """
    around = 2 * np.pi * (inside_m + wire_m / 2)
    longer = np.hypot(1.0, around / lay_m)
    area = count * np.pi * wire_m**2 / 4
    # the wall whose ring has this area
    wall = np.sqrt(inside_m**2 + area / np.pi) - inside_m
    return Tube(float(wall), float(resistivity_ohm_m * longer))


def _by_size(
    x: ComplexArray,
    exact: Callable[[ComplexArray], ComplexArray],
    asymptotic: Callable[[ComplexArray], ComplexArray],
) -> ComplexArray:
    large = np.abs(x) > _LARGE
    if large.all():
        return asymptotic(x)
    ratio = np.empty_like(x)
    ratio[large] = asymptotic(x[large])
    ratio[~large] = exact(x[~large])
    return ratio


def _conductor_exact(x: ComplexArray) -> ComplexArray:
    return np.asarray(ive(0, x) / ive(1, x))


def _conductor_asymptotic(x: ComplexArray) -> ComplexArray:
    return np.asarray(_series(0, -1 / x) / _series(1, -1 / x))


def _tube_exact(x: ComplexArray, wider: float) -> ComplexArray:
    y = x * wider
    through = np.exp(-(y - x) - (y - x).real)
    above = ive(1, y) * kve(0, x) + ive(0, x) * kve(1, y) * through
    return np.asarray(above / (ive(1, y) * kve(1, x) - ive(1, x) * kve(1, y) * through))


def _tube_asymptotic(x: ComplexArray, wider: float) -> ComplexArray:
    near, far = 1 / x, 1 / (x * wider)
    grown, through = _series(1, -far), _series(1, far) * np.exp(-2 * (wider - 1) * x)
    above = grown * _series(0, near) + through * _series(0, -near)
    return np.asarray(above / (grown * _series(1, near) - through * _series(1, -near)))


def _series(order: int, inverse: ComplexArray) -> ComplexArray:
    """Asymptotic series of a modified Bessel function K for 1/x, of I for -1/x, without its leading factor."""
    total = np.full_like(inverse, _COEFFICIENTS[order][-1])
    for coefficient in reversed(_COEFFICIENTS[order][:-1]):
        total *= inverse
        total += coefficient
    return total


# Hankel's expansion (M. Abramowitz, I. A. Stegun, Handbook of Mathematical Functions, 9.7.1 and 9.7.2, from memory)
_COEFFICIENTS = {
    order: [
        prod(4 * order**2 - (2 * k - 1) ** 2 for k in range(1, term + 1)) / (factorial(term) * 8**term)
        for term in range(_TERMS)
    ]
    for order in (0, 1)
}
