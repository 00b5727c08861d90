"""One circuit of the synthetic world: its network, its chain, its noise, and its sources.

The label of a source is only the place where its charge enters the one network that all classes share.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from pdclass.sim.cable import Cable, characteristic_impedance, line_constants, propagation
from pdclass.sim.draw import (
    draw_arc,
    draw_background,
    draw_cable,
    draw_converter,
    draw_discharge,
    draw_far_end,
    draw_near_end,
    draw_receiver,
    even,
    log_even,
    whole,
)
from pdclass.sim.grid import LEAD_S, ComplexArray, laplace_grid, to_samples
from pdclass.sim.interference import Background
from pdclass.sim.nearend import (
    CORE,
    SCREEN,
    NearEnd,
    StrapTransfer,
    bus_node,
    equipment_node,
    strap_transfer,
)
from pdclass.sim.network import FarEnd, far_admittance, input_admittance, reflection, short_circuit_transfer
from pdclass.sim.phase import Pattern
from pdclass.sim.ranges import CircuitEntry, CouplingPath, InterferenceRanges, Label, Scenario, SourceEntry
from pdclass.sim.receiver import Receiver, chain_response
from pdclass.sim.source import SourceCurrent, source_spectrum

#: Nearest place of a `cable` source and farthest of a `local` one [m].
NEAR_M = 10.0
#: Share of its peak at which a noiseless response counts as begun.
ONSET_SHARE_OF_PEAK = 0.02
_FINE_RATE_HZ = 250e6
#: Voltage induced in the strap's loop per slope of a distant current [V s/A]: only its shape matters here.
_MUTUAL_H = 1e-8
#: Skin effect of the way along another feeder: K of exp(-K sqrt(s)), some metres to some kilometres [s^0.5].
_FEEDER_SKIN = (1e-5, 1e-3)
#: How interference reaches the sensor in drawn worlds, evenly from this list (common practice, no source).
_PATHS: tuple[CouplingPath, ...] = (*("radiated", "screen") * 3, "feeder", "far-end")
_DISCHARGES: tuple[Pattern, ...] = ("void", "surface", "floating")
_DISTURBANCES: tuple[Pattern, ...] = ("uniform", "switching")


@dataclass(frozen=True)
class Network:
    """What lies between sources and strap current, on the frequency grid.

    Attributes
    ----------
    gamma : propagation constant of the cable [1/m].
    far_reflection : reflection coefficient at its far end.
    length_m : its length [m].
    transfer : strap current per excitation of the near end.
    panels : number of panels.
    """

    gamma: ComplexArray
    far_reflection: ComplexArray
    length_m: float
    transfer: StrapTransfer
    panels: int


@dataclass(frozen=True)
class Source:
    """A place that sends pulses into the network.

    Attributes
    ----------
    label, family : class, and kind within it.
    distance_m : along the cable from the sensor [m], or None where that has no meaning.
    current : the nominal source current.
    response : source current to sampled voltage on the grid [V/A].
    delay_s : from the record's begin to the nominal onset [s].
    pattern : when in the cycle it discharges.
    pulses_per_cycle : mean number, or None where the scenario's mix decides.
    switching_hz : of a converter [Hz], else 0.
    snr_db : peak over noise [dB], least and most.
    """

    label: Label
    family: str
    distance_m: float | None
    current: SourceCurrent
    response: ComplexArray
    delay_s: float
    pattern: Pattern
    pulses_per_cycle: float | None
    switching_hz: float
    snr_db: tuple[float, float]


@dataclass(frozen=True)
class Circuit:
    """One sensor on one circuit: names, chain, noise [V], full scale over noise [dB], sources."""

    name: str
    site: str | None
    sensor: str
    conductor: str
    mains_hz: float
    receiver: Receiver
    background: Background
    noise_v: float
    full_scale_db: float
    sources: tuple[Source, ...]


@dataclass(frozen=True)
class _Entrance:
    """Where a source's current enters: its family and nominal current, its place, the strap current it makes."""

    family: str
    current: SourceCurrent
    distance_m: float | None
    transfer: ComplexArray


def solve_network(cable: Cable, length_m: float, far: FarEnd, near: NearEnd, s: ComplexArray | None = None) -> Network:
    """Cable and near end at complex frequencies [1/s], by default those of the grid."""
    grid = laplace_grid() if s is None else s
    constants = line_constants(cable, grid)
    gamma, impedance = propagation(constants), characteristic_impedance(constants)
    far_reflection = reflection(far_admittance(far, grid), impedance)
    shown = input_admittance(gamma, impedance, length_m, far_reflection)
    return Network(gamma, far_reflection, length_m, strap_transfer(near, shown, grid), len(near.panels))


def from_cable(network: Network, distance_m: float) -> ComplexArray:
    """Strap current per current between core and screen at a distance along the cable, (frequencies,)."""
    norton = short_circuit_transfer(network.gamma, network.length_m, network.far_reflection, distance_m)
    across = network.transfer.from_node[:, CORE] - network.transfer.from_node[:, SCREEN]
    return np.asarray(norton * across)


def draw_circuit(scenario: Scenario, index: int, *, rng: np.random.Generator) -> Circuit:
    """Circuit number `index` (from 0) of a scenario with everything that belongs to it for good."""
    drawn = f"{scenario.name}-{{}}-{index + 1:04d}"
    length_m = log_even(scenario.cable.length_m, rng=rng)
    entry = CircuitEntry(
        name=drawn.format("circuit"),
        site=drawn.format("site"),
        sensor=drawn.format("strap"),
        length_m=length_m,
        sources=tuple(_draw_entries(scenario, length_m, rng=rng)),
    )
    if scenario.circuit:
        entry = scenario.circuit[index]
    conductor, far_end = str(rng.choice(["L1", "L2", "L3"])), rng.choice(scenario.cable.far_ends)
    receiver = draw_receiver(scenario.capture, rng=rng)
    mains_hz = float(rng.choice(scenario.capture.mains_hz))
    network = solve_network(
        draw_cable(scenario.cable, rng=rng),
        entry.length_m,
        draw_far_end(entry.far_end or far_end, rng=rng),
        draw_near_end(scenario.near_end, rng=rng),
    )
    return Circuit(
        name=entry.name,
        site=entry.site,
        sensor=entry.sensor,
        conductor=entry.conductor or conductor,
        mains_hz=mains_hz,
        receiver=receiver,
        background=draw_background(scenario.interference, rng=rng),
        noise_v=log_even(scenario.capture.noise_v, rng=rng),
        full_scale_db=even(scenario.capture.full_scale_db, rng=rng),
        sources=tuple(
            _draw_source(scenario, wish, network, receiver, mains_hz, rng=child)
            for wish, child in zip(entry.sources, rng.spawn(len(entry.sources)), strict=True)
        ),
    )


def _draw_entries(scenario: Scenario, length_m: float, *, rng: np.random.Generator) -> list[SourceEntry]:
    entries = []
    labels: tuple[Label, ...] = ("cable", "local", "switchgear", "interference")
    for label in labels:
        patterns = _DISTURBANCES if label == "interference" else _DISCHARGES
        entries += [
            SourceEntry(
                label=label,
                distance_m=_draw_distance(label, length_m, rng=rng),
                pulses_per_cycle=1.0,
                snr_db=scenario.snr_db,
                pattern=patterns[int(rng.integers(0, len(patterns)))],
                path=_draw_path(label, rng=rng),
            )
            for _ in range(whole(scenario.mix.sources, rng=rng))
        ]
    return entries


def _draw_path(label: Label, *, rng: np.random.Generator) -> CouplingPath:
    """A tenth of the cable sources lie on a neighbour's cable, a quarter of the local ones between core and box.

    Both shares: common practice, no source. Without them a model would learn that what comes from a feeder is
    nobody's, and that a termination only ever discharges to its screen.
    """
    usual = _PATHS[int(rng.integers(0, len(_PATHS)))]
    place = rng.uniform()
    if label == "cable":
        return "feeder" if place < 0.1 else "far-end"
    if label == "local":
        return "box" if place < 0.25 else "screen"
    return usual


def _draw_distance(label: Label, length_m: float, *, rng: np.random.Generator) -> float | None:
    """Half the local sources at the termination; of the cable ones a fifth at the far end, the rest mostly even.

    Faults do not prefer a place along the cable (common practice, no source); a few are drawn evenly in the
    logarithm, so that the first hundred metres are not empty on long circuits.
    """
    where, place = rng.uniform(), rng.uniform()
    if label == "local":
        return 0.0 if where < 0.5 else NEAR_M * place
    if label != "cable":
        return None
    if where < 0.2:
        return length_m
    if where < 0.8:
        return NEAR_M + (length_m - NEAR_M) * place
    return float(NEAR_M * (length_m / NEAR_M) ** place)


def _draw_source(
    scenario: Scenario,
    wish: SourceEntry,
    network: Network,
    receiver: Receiver,
    mains_hz: float,
    *,
    rng: np.random.Generator,
) -> Source:
    if wish.label == "interference":
        entrance = _disturbance(scenario.interference, wish, network, rng=rng)
    else:
        entrance = _discharge(wish, network, rng=rng)
    response = entrance.transfer * chain_response(receiver, laplace_grid())
    named = bool(scenario.circuit)
    drawn_hz = log_even(scenario.interference.switching_hz, rng=rng)
    switching_hz = wish.pulses_per_cycle * mains_hz / 2 if named else drawn_hz
    return Source(
        label=wish.label,
        family=entrance.family,
        distance_m=entrance.distance_m,
        current=entrance.current,
        response=response,
        delay_s=_nominal_delay_s(entrance.current, response),
        pattern=wish.pattern,
        pulses_per_cycle=wish.pulses_per_cycle if named else None,
        switching_hz=switching_hz if wish.pattern == "switching" else 0.0,
        snr_db=wish.snr_db,
    )


def _discharge(wish: SourceEntry, network: Network, *, rng: np.random.Generator) -> _Entrance:
    current = draw_discharge(rng=rng)
    if wish.label == "switchgear":
        panel = int(rng.integers(0, network.panels))
        node = bus_node(panel) if rng.uniform() < 0.5 else equipment_node(panel)
        return _Entrance(wish.pattern, current, 0.0, network.transfer.from_node[:, node])
    if wish.label == "cable" and wish.path == "feeder":
        return _Entrance(wish.pattern, current, None, _disturbance_transfer(network, "feeder", rng=rng))
    if wish.label == "local" and wish.path == "box":
        return _Entrance(wish.pattern, current, 0.0, network.transfer.from_node[:, CORE])
    otherwise = 0.0 if wish.label == "local" else network.length_m
    distance_m = otherwise if wish.distance_m is None else wish.distance_m
    return _Entrance(wish.pattern, current, distance_m, from_cable(network, distance_m))


def _disturbance(
    ranges: InterferenceRanges, wish: SourceEntry, network: Network, *, rng: np.random.Generator
) -> _Entrance:
    transfer = _disturbance_transfer(network, wish.path, rng=rng)
    distance_m = network.length_m if wish.path == "far-end" else None
    if wish.pattern == "switching":
        return _Entrance("converter", draw_converter(ranges, rng=rng), distance_m, transfer)
    if wish.path in ("feeder", "far-end"):
        return _Entrance("line-corona", draw_discharge(rng=rng), distance_m, transfer)
    return _Entrance("arc", draw_arc(rng=rng), distance_m, transfer)


def _disturbance_transfer(network: Network, path: CouplingPath, *, rng: np.random.Generator) -> ComplexArray:
    if path == "radiated":
        return np.asarray(laplace_grid() * _MUTUAL_H * network.transfer.from_emf)
    if path == "screen":
        return network.transfer.from_node[:, SCREEN]
    if path == "far-end":
        return from_cable(network, network.length_m)
    travelled = np.exp(-log_even(_FEEDER_SKIN, rng=rng) * np.sqrt(laplace_grid()))
    node = bus_node(int(rng.integers(0, network.panels)))
    return np.asarray(travelled * network.transfer.from_node[:, node])


def _nominal_delay_s(current: SourceCurrent, response: ComplexArray) -> float:
    s = laplace_grid()
    wave = np.abs(to_samples(source_spectrum(current, s) * response * np.exp(-s * LEAD_S), _FINE_RATE_HZ))
    return float(np.argmax(wave > ONSET_SHARE_OF_PEAK * wave.max()) / _FINE_RATE_HZ)
