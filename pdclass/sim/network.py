"""A cable route between two ends: sections, joints and far end, what they show to the near end, all reflections in it.

Only decaying exponentials appear, so nothing overflows however long or lossy the cable.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from pdclass.errors import InputError, complaint
from pdclass.sim.cable import Line
from pdclass.sim.grid import ComplexArray, laplace_grid


@dataclass(frozen=True, eq=False)
class Section:
    """A stretch of one kind of cable, `length_m` [m] > 0."""

    line: Line
    length_m: float


@dataclass(frozen=True)
class Joint:
    """A joint as a small mismatch: half of a resistance and an inductance on each side of a capacitance to the screen.

    Attributes
    ----------
    henry : inductance of its longer way, over that of the cable [H], >= 0.
    farad : capacitance of its body [F], >= 0.
    ohm : resistance of its contacts [ohm], >= 0.
    """

    henry: float
    farad: float
    ohm: float


@dataclass(frozen=True, eq=False)
class _Piece:
    """A section within its route: voltage at its begin per volt at the near end, and what comes back from its end."""

    begin: ComplexArray
    reflection: ComplexArray
    whole: ComplexArray


@dataclass(frozen=True, eq=False)
class Route:
    """Sections from the near end to the far one, a joint between each two, and what stands at the far end.

    Attributes
    ----------
    sections : at least one.
    joints : one fewer.
    far_s : admittance at the far end [S], (frequencies,).
    s : complex frequencies [1/s] of all of these, by default the grid's, (frequencies,).

    Raises
    ------
    InputError
        If the counts or the numbers of frequencies do not fit.
    """

    sections: tuple[Section, ...]
    joints: tuple[Joint, ...]
    far_s: ComplexArray
    s: ComplexArray = field(default_factory=laplace_grid)

    def __post_init__(self) -> None:
        expected: object = f"{len(self.sections) - 1} joints between {len(self.sections)} sections"
        if not self.sections or len(self.joints) != len(self.sections) - 1:
            advice = "give one joint between each two sections"
            raise InputError(complaint("route", "joints", expected=expected, found=len(self.joints), advice=advice))
        shapes = {self.far_s.shape, *(part.shape for section in self.sections for part in section.line)}
        if shapes != {self.s.shape}:
            advice = "compute lines and far end at the route's own frequencies"
            expected = f"shape {self.s.shape} throughout"
            raise InputError(complaint("route", "frequencies", expected=expected, found=sorted(shapes), advice=advice))

    @cached_property
    def _solved(self) -> tuple[ComplexArray, tuple[_Piece, ...]]:
        return _solve(self)


@dataclass(frozen=True, eq=False)
class FarEnd:
    """What stands at the far end: the termination, and through a lead a busbar with what hangs on it.

    An open end has no lead; a transformer is a capacitance behind one; a through-connected ring is one further
    route behind it, and a busbar with feeders has several.

    Attributes
    ----------
    stray_f : capacitance of the termination [F], >= 0.
    lead_ohm, lead_h : resistance and inductance of the lead [ohm], [H], >= 0.
    busbar_f : capacitance behind the lead, of a busbar or a transformer's winding [F], >= 0.
    shunt_ohm : resistance behind the lead, of a winding or a cable without end [ohm], > 0, inf = none.
    onward : routes that begin behind the lead.
    """

    stray_f: float
    lead_ohm: float = 0.0
    lead_h: float = 0.0
    busbar_f: float = 0.0
    shunt_ohm: float = np.inf
    onward: tuple[Route, ...] = ()


def far_admittance(far: FarEnd, s: ComplexArray) -> ComplexArray:
    """Admittance of what stands at the far end [S], (frequencies,)."""
    behind = s * far.busbar_f + 1 / far.shunt_ohm
    for route in far.onward:
        behind = behind + shown_admittance(route)
    return np.asarray(s * far.stray_f + behind / (1 + behind * (far.lead_ohm + s * far.lead_h)))


def reflection(load_s: ComplexArray, impedance_ohm: ComplexArray) -> ComplexArray:
    """Reflection coefficient of the voltage at a load of given admittance [S], (frequencies,)."""
    mismatch = load_s * impedance_ohm
    return np.asarray((1 - mismatch) / (1 + mismatch))


def route_length_m(route: Route) -> float:
    """Length of a route [m]."""
    return sum(section.length_m for section in route.sections)


def shown_admittance(route: Route) -> ComplexArray:
    """Admittance that a route shows at its near end [S], (frequencies,)."""
    return route._solved[0]  # noqa: SLF001  (solved once, in this module, for every place that is asked for)


def voltage_along(route: Route, distance_m: float) -> ComplexArray:
    """Voltage between core and screen at a distance, per volt at the near end, (frequencies,).

    The route is reciprocal: it is also the current through a short circuit at the near end per current that a
    source drives between core and screen at that distance. With `shown_admittance` this is the Norton equivalent
    of route and source, every reflection of joints, far end, near end and source included.

    Parameters
    ----------
    route : without a source.
    distance_m : from the near end [m], 0 to the route's length.

    Raises
    ------
    InputError
        If the distance does not lie on the route.
    """
    section, piece, inside_m = _place(route, distance_m)
    onward = np.exp(section.line.gamma * -(section.length_m - inside_m))
    gone = np.exp(section.line.gamma * -inside_m)
    back = piece.reflection * piece.whole**2
    return np.asarray(piece.begin * gone * (1 + piece.reflection * onward**2) / (1 + back))


def _place(route: Route, distance_m: float) -> tuple[Section, _Piece, float]:
    """The section in which a place lies, solved, and the distance from its begin [m]."""
    length_m = route_length_m(route)
    # a sum of lengths may differ in its last digit from the length that was shared out
    if not 0 <= distance_m <= length_m * (1 + 1e-9):
        advice = "choose a place on the route"
        expected = f"0 to {length_m:g}"
        raise InputError(complaint("route", "distance_m", expected=expected, found=distance_m, advice=advice))
    rest = min(distance_m, length_m)
    number = 0
    while rest > route.sections[number].length_m and number < len(route.sections) - 1:
        rest -= route.sections[number].length_m
        number += 1
    section = route.sections[number]
    return section, route._solved[1][number], min(rest, section.length_m)  # noqa: SLF001  (see above)


def _solve(route: Route) -> tuple[ComplexArray, tuple[_Piece, ...]]:
    """Admittance at the near end, and each section as a piece; from the far end back, then forth again."""
    shown, steps = route.far_s, []
    for number in reversed(range(len(route.sections))):
        shown, coefficient, whole, across = _before_section(route.sections[number], shown)
        passed: ComplexArray | float = 1.0
        if number:
            shown, passed = _before_joint(route.joints[number - 1], shown, route.s)
        steps.append((passed, coefficient, whole, across))
    begin, pieces = np.ones_like(route.far_s), []
    for passed, coefficient, whole, across in reversed(steps):
        begin = begin * passed
        pieces.append(_Piece(begin, coefficient, whole))
        begin = begin * across
    return shown, tuple(pieces)


def _before_section(
    section: Section, load_s: ComplexArray
) -> tuple[ComplexArray, ComplexArray, ComplexArray, ComplexArray]:
    """Admittance before a section, reflection at its end, its whole exponential, voltage at its end per begin."""
    coefficient = reflection(load_s, section.line.impedance)
    whole = np.exp(section.line.gamma * -section.length_m)
    back = coefficient * whole**2
    before = (1 - back) / ((1 + back) * section.line.impedance)
    return before, coefficient, whole, whole * (1 + coefficient) / (1 + back)


def _before_joint(joint: Joint, load_s: ComplexArray, s: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    """Admittance before a joint, and the voltage behind it per volt before it."""
    half = joint.ohm / 2 + s * (joint.henry / 2)
    drop_behind = 1 + load_s * half
    middle = load_s / drop_behind + s * joint.farad
    drop_before = 1 + middle * half
    return middle / drop_before, 1 / (drop_behind * drop_before)
