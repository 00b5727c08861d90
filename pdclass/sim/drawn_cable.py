"""Drawing cables and routes: dimensions of standards, materials as wide as what a utility does not know of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path
from typing import Annotated, Literal, NamedTuple, Self, cast, get_args

import numpy as np
from pydantic import Field, model_validator

from pdclass.pulses import FloatArray
from pdclass.sim.belted import Others, belted_screen
from pdclass.sim.cable import (
    ALUMINIUM_OHM_M,
    COPPER_OHM_M,
    DB_PER_NEPER,
    LEAD_OHM_M,
    Cable,
    Line,
    Relaxation,
    Semicon,
    Tube,
    line_of,
    wire_screen,
)
from pdclass.sim.cable_kinds import (
    BELTED,
    BELTED_MM,
    CONDUCTOR_MM,
    EPR,
    EXTRUDED_MM,
    PAPER,
    PAPER_MM,
    RATED_KV,
    SECTOR,
    XLPE,
    Area,
    Kind,
    Materials,
)
from pdclass.sim.draw import (
    Farads,
    Henries,
    Nanoseconds,
    Ohms,
    Pair,
    Positive,
    Ranges,
    Share,
    Weights,
    Whole,
    chosen,
    even,
    known_names,
    log_even,
    whole,
    within,
)
from pdclass.sim.grid import ComplexArray
from pdclass.sim.measured_line import fit_line, measured_line, read_curve
from pdclass.sim.network import FarEnd, Joint, Route, Section, far_admittance

FarEndKind = Literal["open", "transformer", "ring", "feeders"]
Screen = Literal["wires", "tape", "foil"]
_SCREEN_WIRE_MM = (0.7, 1.1)
_LAY_DIAMETERS = (8.0, 20.0)
_TAPE_MM = (0.1, 0.2)
_FOIL_MM = (0.15, 0.3)
_SHEATH_MM = (1.2, 2.2)
_MOST_LINES = 3
# joints of other feeders matter less; few pieces keep a station quick to solve
_NEIGHBOUR_SPACING_M = (250.0, 800.0)
_MOST_NEIGHBOUR_PIECES = 3
# the lead to a busbar is shorter than that to a transformer
_BUSBAR_OHM = 0.1
_BUSBAR_H = 0.3


class CableRanges(Ranges):
    """Cables and routes: dimensions of standards, materials and losses drawn widely.

    Attributes
    ----------
    length_m : of a circuit [m], evenly in its logarithm.
    kinds : of insulation: XLPE, EPR, paper (screened cores in lead), belted (three cores of paper in one sheath).
    areas_mm2 : conductor, each as often as it stands here [mm2].
    copper_share : of the conductors, 0 to 1; the others are of aluminium.
    rated_kv : rated voltages U0/U [kV], from which the thickness of insulation follows.
    thickness_share : factor on that thickness.
    semicon_mm : thickness of semiconducting screens [mm].
    tape_mm : semiconducting tape under the metal screen of extruded cables, counted to the screen [mm].
    semicon_s_per_m, semicon_permittivity : conductivity [S/m] and relative permittivity of semiconducting screens.
    old_share : share of extruded cables with screens of an early, poorly conducting make.
    old_semicon_s_per_m, old_semicon_permittivity : the same of these.
    cole_cole_share : share of semiconducting screens whose permittivity falls with frequency.
    cole_cole_step, cole_cole_ns, cole_cole_spread : its step, time constant [ns] and spread.
    screens : of extruded cables: helical copper wires, copper tape, aluminium foil.
    screen_mm2 : copper in screens of wires [mm2].
    earthed_share : share of belted cables whose other cores count as earthed, 0 to 1; else as floating.
    xlpe, epr, paper, belted : materials of each kind.
    sections : how many sections of different cable a route has, "1" to "4".
    other_kind_share : share of further sections that are of another kind than the first.
    joint_henry, joint_farad, joint_ohm : of a joint [H], [F], [ohm].
    far_ends : open, transformer, ring (the cable goes on), feeders (a busbar with several cables).
    far_stray_f, far_lead_h, far_lead_ohm : termination [F], lead [H] and its losses [ohm] of a far end.
    transformer_f, transformer_ohm : capacitance [F] and surge resistance [ohm] of a winding.
    busbar_f : capacitance of a busbar at the far end [F].
    feeders : how many cables hang on it.
    curve : CSV file of a measured attenuation and velocity, which then is the line of every section; or none.
    curve_ohm : characteristic impedance of that line [ohm], where the file has none.
    """

    length_m: Annotated[Pair, within(25.0, 1e4, "m")] = (60.0, 5000.0)
    kinds: Annotated[Weights, known_names(*get_args(Kind))] = Field(
        default={"XLPE": 0.5, "EPR": 0.15, "paper": 0.2, "belted": 0.15}
    )
    areas_mm2: Annotated[tuple[Area, ...], Field(min_length=1)] = get_args(Area)
    copper_share: Share = 0.3
    rated_kv: Annotated[Weights, known_names(*EXTRUDED_MM)] = Field(
        default={"3.6/6": 0.1, "6/10": 0.25, "8.7/15": 0.2, "12/20": 0.3, "18/30": 0.15}
    )
    thickness_share: Annotated[Pair, within(0.2, 5.0)] = (0.95, 1.15)
    semicon_mm: Annotated[Pair, within(0.01, 10.0, "mm")] = (0.3, 1.0)
    tape_mm: Annotated[Pair, within(0.01, 10.0, "mm")] = (0.05, 0.5)
    semicon_s_per_m: Positive = (3e-3, 10.0)
    semicon_permittivity: Positive = (10.0, 300.0)
    old_share: Share = 0.15
    old_semicon_s_per_m: Positive = (1e-3, 0.1)
    old_semicon_permittivity: Positive = (5.0, 50.0)
    cole_cole_share: Share = 0.5
    cole_cole_step: Positive = (10.0, 1000.0)
    cole_cole_ns: Nanoseconds = (3.0, 3000.0)
    cole_cole_spread: Annotated[Pair, within(0.0, 0.9)] = (0.0, 0.6)
    screens: Annotated[Weights, known_names(*get_args(Screen))] = Field(
        default={"wires": 0.7, "tape": 0.2, "foil": 0.1}
    )
    screen_mm2: Positive = (10.0, 50.0)
    earthed_share: Share = 0.7
    xlpe: Materials = XLPE
    epr: Materials = EPR
    paper: Materials = PAPER
    belted: Materials = BELTED
    sections: Annotated[Weights, known_names("1", "2", "3", "4")] = Field(
        default={"1": 0.55, "2": 0.25, "3": 0.15, "4": 0.05}
    )
    other_kind_share: Share = 0.4
    joint_henry: Henries = (5e-9, 200e-9)
    joint_farad: Farads = (5e-12, 150e-12)
    joint_ohm: Ohms = (1e-4, 0.05)
    far_ends: Annotated[Weights, known_names(*get_args(FarEndKind))] = Field(
        default={"open": 0.2, "transformer": 0.3, "ring": 0.3, "feeders": 0.2}
    )
    far_stray_f: Farads = (30e-12, 300e-12)
    far_lead_h: Henries = (0.3e-6, 5e-6)
    far_lead_ohm: Ohms = (0.3, 30.0)
    transformer_f: Farads = (0.3e-9, 3e-9)
    transformer_ohm: Ohms = (300.0, 5000.0)
    busbar_f: Farads = (50e-12, 600e-12)
    feeders: Annotated[Whole, within(1, 50)] = (2, 5)
    curve: str | None = Field(default=None, min_length=1)
    curve_ohm: Ohms = (10.0, 40.0)

    @model_validator(mode="after")
    def _belted_cables_have_a_voltage(self) -> Self:
        if self.kinds.get("belted", 0) > 0 and not _made_for(self, "belted"):
            raise ValueError(f"belted cables are made for {', '.join(BELTED_MM)} kV, rated_kv has none of these")
        return self


class DrawnRoute(NamedTuple):
    """A route, the kind of its first section (`measured` where a curve is given), and its lines, one to three."""

    route: Route
    kind: str
    lines: tuple[Line, ...]


def draw_cable(
    ranges: CableRanges, kind: Kind | None = None, rated_kv: str | None = None, *, rng: np.random.Generator
) -> Cable:
    """A cable of standard size, of the given kind and rated voltage or of drawn ones."""
    kind = _draw_kind(ranges, rng=rng) if kind is None else kind
    rated_kv = chosen(_made_for(ranges, kind), rng=rng) if rated_kv is None else rated_kv
    area = ranges.areas_mm2[int(rng.integers(len(ranges.areas_mm2)))]
    conductor_m = even(CONDUCTOR_MM[area], rng=rng) / 2e3
    metal = COPPER_OHM_M if rng.uniform() < ranges.copper_share else ALUMINIUM_OHM_M
    thicker = even(ranges.thickness_share, rng=rng)
    if kind == "belted":
        core_mm, belt_mm = (thicker * part for part in BELTED_MM[rated_kv])
        return _belted(ranges, conductor_m * SECTOR, core_mm * 1e-3, belt_mm * 1e-3, metal, rng=rng)
    if kind == "paper":
        return _paper(ranges, conductor_m, thicker * PAPER_MM[rated_kv] * 1e-3, metal, rng=rng)
    return _extruded(ranges, kind, conductor_m, thicker * EXTRUDED_MM[rated_kv] * 1e-3, metal, rng=rng)


def draw_lines(ranges: CableRanges, count: int, *, rng: np.random.Generator, s: ComplexArray) -> tuple[list[Line], str]:
    """As many different lines as wanted, spliced into one circuit, and the kind of the first.

    Their rated voltage is one; all may be of one kind.

    Raises
    ------
    InputError
        If the scenario's curve cannot be read or is that of no passive, causal line.
    """
    if ranges.curve is not None:
        ohm = log_even(ranges.curve_ohm, rng=rng)
        fitted = fit_line(read_curve(Path(ranges.curve)))
        return [measured_line(fitted, s, impedance_ohm=ohm)] * count, "measured"
    kinds = [_draw_kind(ranges, rng=rng)]
    while len(kinds) < count:
        kinds.append(_draw_kind(ranges, rng=rng) if rng.uniform() < ranges.other_kind_share else kinds[0])
    common = {name: weight for name, weight in ranges.rated_kv.items() if all(name in RATED_KV[k] for k in kinds)}
    rated_kv = chosen(common, rng=rng)
    return [line_of(draw_cable(ranges, kind, rated_kv, rng=rng), s) for kind in kinds], kinds[0]


def draw_route(
    ranges: CableRanges,
    length_m: float,
    far: FarEndKind | None = None,
    *,
    rng: np.random.Generator,
    s: ComplexArray,
) -> DrawnRoute:
    """A circuit's cable from the sensor to the far end, of the given kind or a drawn one."""
    sections = int(chosen(ranges.sections, rng=rng))
    lines, kind = draw_lines(ranges, min(sections, _MOST_LINES), rng=rng, s=s)
    spacing_m = log_even(_materials(ranges, kind).joint_spacing_m, rng=rng)
    # a fourth section is of the first's cable again, as where a stretch was replaced
    spliced = [lines[number % len(lines)] for number in range(sections)]
    load = far_admittance(draw_far_end(ranges, far, lines, rng=rng, s=s), s)
    return DrawnRoute(_joined(ranges, spliced, length_m, spacing_m, load, rng=rng, s=s), kind, tuple(lines))


def draw_neighbour(ranges: CableRanges, lines: Sequence[Line], *, rng: np.random.Generator, s: ComplexArray) -> Route:
    """Another feeder of the station, of the same kinds of cable; where it ends in further cables, these have no end."""
    line = lines[int(rng.integers(len(lines)))]
    length_m = log_even(ranges.length_m, rng=rng)
    spacing_m = max(log_even(_NEIGHBOUR_SPACING_M, rng=rng), length_m / _MOST_NEIGHBOUR_PIECES)
    far = _draw_local_end(ranges, chosen(ranges.far_ends, rng=rng), line, rng=rng)
    return _joined(ranges, [line], length_m, spacing_m, far_admittance(far, s), rng=rng, s=s)


def draw_far_end(
    ranges: CableRanges, kind: FarEndKind | None, lines: Sequence[Line], *, rng: np.random.Generator, s: ComplexArray
) -> FarEnd:
    """What stands at the far end, of the given kind or a drawn one (values: common practice, no source)."""
    if kind is None:
        kind = cast("FarEndKind", chosen(ranges.far_ends, rng=rng))
    local = _draw_local_end(ranges, kind, lines[-1], rng=rng)
    if kind in {"open", "transformer"}:
        return local
    count = 1 if kind == "ring" else whole(ranges.feeders, rng=rng)
    onward = tuple(draw_neighbour(ranges, lines, rng=rng, s=s) for _ in range(count))
    return replace(local, shunt_ohm=np.inf, onward=onward)


def attenuation_spread(
    ranges: CableRanges, kind: Kind, hz: FloatArray, count: int, *, rng: np.random.Generator
) -> FloatArray:
    """Attenuation of drawn cables of one kind [dB/km], (count, frequencies)."""
    return np.array([line.gamma.real * DB_PER_NEPER * 1000 for line in _some_lines(ranges, kind, hz, count, rng=rng)])


def velocity_spread(
    ranges: CableRanges, kind: Kind, hz: FloatArray, count: int, *, rng: np.random.Generator
) -> FloatArray:
    """Phase velocity of drawn cables of one kind [m/us], (count, frequencies)."""
    lines = _some_lines(ranges, kind, hz, count, rng=rng)
    return np.array([2e-6 * np.pi * hz / line.gamma.imag for line in lines])


def _some_lines(ranges: CableRanges, kind: Kind, hz: FloatArray, count: int, *, rng: np.random.Generator) -> list[Line]:
    s = 2j * np.pi * np.asarray(hz, float)
    return [line_of(draw_cable(ranges, kind, rng=rng), s) for _ in range(count)]


def _made_for(ranges: CableRanges, kind: str) -> dict[str, float]:
    """The rated voltages for which a kind of cable is made, by weight; empty where all weigh nothing."""
    return {name: weight for name, weight in ranges.rated_kv.items() if name in RATED_KV[kind] and weight > 0}


def _draw_kind(ranges: CableRanges, *, rng: np.random.Generator) -> Kind:
    return cast("Kind", chosen(ranges.kinds, rng=rng))


def _materials(ranges: CableRanges, kind: str) -> Materials:
    named = {"XLPE": ranges.xlpe, "EPR": ranges.epr, "paper": ranges.paper, "belted": ranges.belted}
    # what a measured curve is of is not known; most cables are of XLPE
    return named.get(kind, ranges.xlpe)


def _extruded(
    ranges: CableRanges, kind: Kind, conductor_m: float, wall_m: float, metal: float, *, rng: np.random.Generator
) -> Cable:
    materials = _materials(ranges, kind)
    inner_m = conductor_m + even(ranges.semicon_mm, rng=rng) * 1e-3
    outer_m = inner_m + wall_m
    screen_m = outer_m + (even(ranges.semicon_mm, rng=rng) + even(ranges.tape_mm, rng=rng)) * 1e-3
    tube = _draw_screen(ranges, screen_m, rng=rng)
    old = rng.uniform() < ranges.old_share
    return Cable(
        conductor_m=conductor_m,
        inner_m=inner_m,
        outer_m=outer_m,
        screen_m=screen_m,
        screen_thickness_m=tube.thickness_m,
        conductor_ohm_m=metal,
        screen_ohm_m=tube.ohm_m,
        permittivity=even(materials.permittivity, rng=rng),
        loss_tangent=log_even(materials.loss_tangent, rng=rng),
        semicon=(_draw_semicon(ranges, old=old, rng=rng), _draw_semicon(ranges, old=old, rng=rng)),
        relaxation=_draw_relaxation(materials, rng=rng),
        excess_db_per_km=log_even(materials.excess_db_per_km, rng=rng),
        excess_power=even(materials.excess_power, rng=rng),
    )


def _paper(ranges: CableRanges, conductor_m: float, wall_m: float, metal: float, *, rng: np.random.Generator) -> Cable:
    """A core with paper insulation between thin conducting papers, each core in a lead sheath."""
    return _impregnated(ranges.paper, conductor_m, conductor_m + wall_m, metal, rng=rng)


def _belted(
    ranges: CableRanges, conductor_m: float, core_m: float, belt_m: float, metal: float, *, rng: np.random.Generator
) -> Cable:
    others: Others = "earthed" if rng.uniform() < ranges.earthed_share else "floating"
    screen_m = belted_screen(conductor_m, core_m, belt_m, others)
    return _impregnated(ranges.belted, conductor_m, screen_m, metal, rng=rng)


def _impregnated(
    materials: Materials, conductor_m: float, screen_m: float, metal: float, *, rng: np.random.Generator
) -> Cable:
    return Cable(
        conductor_m=conductor_m,
        inner_m=conductor_m,
        outer_m=screen_m,
        screen_m=screen_m,
        screen_thickness_m=even(_SHEATH_MM, rng=rng) * 1e-3,
        conductor_ohm_m=metal,
        screen_ohm_m=LEAD_OHM_M,
        permittivity=even(materials.permittivity, rng=rng),
        loss_tangent=log_even(materials.loss_tangent, rng=rng),
        relaxation=_draw_relaxation(materials, rng=rng),
        excess_db_per_km=log_even(materials.excess_db_per_km, rng=rng),
        excess_power=even(materials.excess_power, rng=rng),
    )


def _draw_relaxation(materials: Materials, *, rng: np.random.Generator) -> Relaxation | None:
    if materials.relaxation_step[1] == 0:
        return None
    step, tau_ns = even(materials.relaxation_step, rng=rng), log_even(materials.relaxation_ns, rng=rng)
    return Relaxation(step, tau_ns * 1e-9, even((0.2, 0.6), rng=rng))


def _draw_screen(ranges: CableRanges, inside_m: float, *, rng: np.random.Generator) -> Tube:
    kind = chosen(ranges.screens, rng=rng)
    if kind == "tape":
        return Tube(even(_TAPE_MM, rng=rng) * 1e-3, COPPER_OHM_M)
    if kind == "foil":
        return Tube(even(_FOIL_MM, rng=rng) * 1e-3, ALUMINIUM_OHM_M)
    wire_mm = even(_SCREEN_WIRE_MM, rng=rng)
    count = max(round(log_even(ranges.screen_mm2, rng=rng) / (np.pi * wire_mm**2 / 4)), 1)
    lay_m = even(_LAY_DIAMETERS, rng=rng) * 2 * inside_m
    return wire_screen(count, wire_mm * 1e-3, inside_m, lay_m, COPPER_OHM_M)


def _draw_semicon(ranges: CableRanges, *, old: bool, rng: np.random.Generator) -> Semicon:
    conductivity = log_even(ranges.old_semicon_s_per_m if old else ranges.semicon_s_per_m, rng=rng)
    permittivity = log_even(ranges.old_semicon_permittivity if old else ranges.semicon_permittivity, rng=rng)
    if rng.uniform() >= ranges.cole_cole_share:
        return Semicon(conductivity, permittivity)
    step, tau_ns = log_even(ranges.cole_cole_step, rng=rng), log_even(ranges.cole_cole_ns, rng=rng)
    return Semicon(conductivity, permittivity, Relaxation(step, tau_ns * 1e-9, even(ranges.cole_cole_spread, rng=rng)))


def _draw_local_end(ranges: CableRanges, kind: str, line: Line, *, rng: np.random.Generator) -> FarEnd:
    """A far end without further routes: cables that go on from it are their impedance, as if they had no end."""
    stray_f = log_even(ranges.far_stray_f, rng=rng)
    if kind == "open":
        return FarEnd(stray_f)
    lead_ohm, lead_h = log_even(ranges.far_lead_ohm, rng=rng), log_even(ranges.far_lead_h, rng=rng)
    if kind == "transformer":
        winding_f, surge_ohm = log_even(ranges.transformer_f, rng=rng), log_even(ranges.transformer_ohm, rng=rng)
        return FarEnd(stray_f, lead_ohm, lead_h, winding_f, surge_ohm)
    count = 1 if kind == "ring" else whole(ranges.feeders, rng=rng)
    endless_ohm = float(np.abs(line.impedance[-1])) / count
    busbar_f = log_even(ranges.busbar_f, rng=rng)
    return FarEnd(stray_f, _BUSBAR_OHM * lead_ohm, _BUSBAR_H * lead_h, busbar_f, endless_ohm)


def _joined(
    ranges: CableRanges,
    spliced: Sequence[Line],
    length_m: float,
    spacing_m: float,
    load: ComplexArray,
    *,
    rng: np.random.Generator,
    s: ComplexArray,
) -> Route:
    """Lines one after the other over a length, with joints between them and within each about every `spacing_m`."""
    shares = rng.dirichlet(np.full(len(spliced), 2.0))
    sections = []
    for line, share in zip(spliced, shares, strict=True):
        pieces = max(round(share * length_m / spacing_m), 1)
        # drums differ somewhat, and joints stand where the route allows them
        parts = rng.uniform(0.7, 1.3, pieces)
        sections += [Section(line, float(part)) for part in share * length_m * parts / parts.sum()]
    joints = tuple(_draw_joint(ranges, rng=rng) for _ in sections[1:])
    return Route(tuple(sections), joints, load, s)


def _draw_joint(ranges: CableRanges, *, rng: np.random.Generator) -> Joint:
    return Joint(
        henry=log_even(ranges.joint_henry, rng=rng),
        farad=log_even(ranges.joint_farad, rng=rng),
        ohm=log_even(ranges.joint_ohm, rng=rng),
    )
