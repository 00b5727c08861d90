"""One circuit of the synthetic world: its network, its chain, its noise, and its sources.

The label of a source is only the place where its charge enters the one network that all classes share.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from pdclass.errors import InputError, complaint
from pdclass.sim.disturbers import Disturber, Repetition
from pdclass.sim.draw import even, log_even
from pdclass.sim.drawn_background import draw_background
from pdclass.sim.drawn_cable import DrawnRoute, draw_neighbour, draw_route
from pdclass.sim.drawn_chain import draw_receiver
from pdclass.sim.drawn_disturbance import draw_disturber
from pdclass.sim.drawn_near_end import draw_near_end
from pdclass.sim.drawn_source import KIND_PATTERNS, Kind, draw_discharge, most_charge_pc
from pdclass.sim.entries import completed, draw_entry, draw_labels
from pdclass.sim.grid import LEAD_S, ComplexArray, laplace_grid, to_samples
from pdclass.sim.interference import Reception, received
from pdclass.sim.network import route_length_m
from pdclass.sim.phase import Activity, draw_activity
from pdclass.sim.ranges import CircuitEntry, Label, Scenario, SourceEntry
from pdclass.sim.receiver import Receiver, chain_band_hz, chain_response, core_sensitivity, most_full_scale_db
from pdclass.sim.source import SourceCurrent, source_spectrum
from pdclass.sim.station import (
    Station,
    from_box,
    from_bus,
    from_cable,
    from_equipment,
    from_field,
    from_neighbour,
    from_screen,
    solve_station,
)

#: Share of its peak at which a noiseless response counts as begun.
ONSET_SHARE_OF_PEAK = 0.02
_FINE_RATE_HZ = 250e6
_TRIES = 20


@dataclass(frozen=True)
class Source:
    """A place that sends pulses into the network.

    Attributes
    ----------
    label, family : class, and kind within it.
    way : where its charge enters: a way of the mix, or the path of a disturbance.
    distance_m : along the cable from the sensor [m], or None where that has no meaning.
    current : the nominal source current.
    response : source current to sampled voltage on the grid, the sensor's core without mains current [V/A].
    delay_s : from the record's begin to the nominal onset [s].
    volts_per_coulomb : height of a sampled pulse per charge of the source [V/C].
    pulses_per_cycle : mean number, or None where the scenario's mix decides.
    snr_db : peak over noise [dB], least and most.
    activity, repetition : when it sends: one of the two.
    """

    label: Label
    family: str
    way: str
    distance_m: float | None
    current: SourceCurrent
    response: ComplexArray
    delay_s: float
    volts_per_coulomb: float
    pulses_per_cycle: float | None
    snr_db: tuple[float, float]
    activity: Activity | None = None
    repetition: Repetition | None = None


@dataclass(frozen=True)
class Circuit:
    """One sensor on one circuit.

    Attributes
    ----------
    name, site, sensor, conductor, mains_hz : as in a capture.
    receiver : its chain.
    sensitivity : what the mains current in the strap changes of it, on the grid.
    reception, noise_v : background that it receives, and its MAD/0.6745 at the digitiser [V].
    full_scale_db : of the digitiser over the noise [dB].
    sources : what sends pulses.
    traits : what the circuit is like, in words and figures, for studies; no part of a capture.
    """

    name: str
    site: str | None
    sensor: str
    conductor: str
    mains_hz: float
    receiver: Receiver
    sensitivity: ComplexArray
    reception: Reception
    noise_v: float
    full_scale_db: float
    sources: tuple[Source, ...]
    traits: dict[str, Any]


@dataclass(frozen=True)
class _Entrance:
    """Where a source's current enters: by which way, its place, and the strap current it makes per current."""

    way: str
    distance_m: float | None
    transfer: ComplexArray


@dataclass(frozen=True)
class _Place:
    """What every source of a circuit needs.

    Attributes
    ----------
    scenario, station : the world, and the network solved.
    chain : strap current to sampled voltage on the grid [V/A].
    noise_v : of the circuit [V].
    heights_db : peak over noise, the same for every drawn source of the circuit [dB].
    """

    scenario: Scenario
    station: Station
    chain: ComplexArray
    noise_v: float
    heights_db: tuple[float, float]


def draw_circuit(scenario: Scenario, index: int, *, rng: np.random.Generator) -> Circuit:
    """Circuit number `index` (from 0) of a scenario with everything that belongs to it for good."""
    entry = scenario.circuit[index] if scenario.circuit else _drawn_entry(scenario, index, rng=rng)
    conductor = str(rng.choice(["L1", "L2", "L3"]))
    s = laplace_grid()
    chain_rng, cable_rng, near_rng, sky_rng, source_rng = rng.spawn(5)
    receiver = draw_receiver(scenario.chain, rng=chain_rng)
    drawn = draw_route(scenario.cable, entry.length_m, entry.far_end, rng=cable_rng, s=s)
    near = draw_near_end(scenario.near_end, sensor_ohm=receiver.inserted_ohm, rng=near_rng)
    neighbours = [draw_neighbour(scenario.cable, drawn.lines, rng=cable_rng, s=s) for _ in range(near.feeders)]
    station = solve_station(near, drawn.route, neighbours)
    chain = chain_response(receiver, s)
    noise_v = log_even(scenario.capture.noise_v, rng=rng)
    full_scale_db = min(even(scenario.capture.full_scale_db, rng=rng), most_full_scale_db(receiver.bits))
    low_db, high_db = scenario.snr_db
    heights_db = (low_db, max(low_db, min(high_db, full_scale_db + scenario.capture.clipped_db)))
    place = _Place(scenario, station, chain, noise_v, heights_db)
    sources = _named(place, entry, rng=source_rng) if scenario.circuit else _drawn(place, rng=source_rng)
    return Circuit(
        name=entry.name,
        site=entry.site,
        sensor=entry.sensor,
        conductor=entry.conductor or conductor,
        mains_hz=receiver.mains_hz,
        receiver=receiver,
        sensitivity=core_sensitivity(receiver, s),
        reception=received(draw_background(scenario.background, rng=sky_rng), receiver, from_field(station) * chain),
        noise_v=noise_v,
        full_scale_db=full_scale_db,
        sources=sources,
        traits=_traits(station, drawn, receiver, sources),
    )


def _drawn_entry(scenario: Scenario, index: int, *, rng: np.random.Generator) -> CircuitEntry:
    name = f"{scenario.name}-{{}}-{index + 1:04d}"
    length_m = log_even(scenario.cable.length_m, rng=rng)
    return CircuitEntry(
        name=name.format("circuit"),
        site=name.format("site"),
        sensor=name.format("strap"),
        length_m=length_m,
    )


def _traits(station: Station, drawn: DrawnRoute, receiver: Receiver, sources: tuple[Source, ...]) -> dict[str, Any]:
    return {
        "cable": drawn.kind,
        "sections": len(drawn.route.sections),
        "length_m": station.length_m,
        "panels": len(station.near.panels),
        "rate_hz": receiver.rate_hz,
        "bits": receiver.bits,
        "low_hz": chain_band_hz(receiver)[0],
        "high_hz": chain_band_hz(receiver)[1],
        "interference": "|".join(sorted({one.family for one in sources if one.label == "interference"})),
    }


def _named(place: _Place, entry: CircuitEntry, *, rng: np.random.Generator) -> tuple[Source, ...]:
    """The sources that a scenario names, as often as it says."""
    children = rng.spawn(len(entry.sources))
    for wish in entry.sources:
        _check_neighbour(place, entry, wish)
    drawn = [_named_source(place, wish, rng=child) for wish, child in zip(entry.sources, children, strict=True)]
    return tuple(
        replace(one, pulses_per_cycle=wish.pulses_per_cycle) for one, wish in zip(drawn, entry.sources, strict=True)
    )


def _drawn(place: _Place, *, rng: np.random.Generator) -> tuple[Source, ...]:
    """One to some sources of each class."""
    labels = draw_labels(place.scenario.mix, rng=rng)
    children = rng.spawn(len(labels))
    return tuple(_audible(place, label, rng=child) for label, child in zip(labels, children, strict=True))


def _audible(place: _Place, label: Label, *, rng: np.random.Generator) -> Source:
    """A drawn source that is heard at the middle of the heights with a charge that its kind has.

    Kind and current must be heard at the termination, whatever the label, so that they tell nothing about it. Then a
    place is drawn again while it lies too far on too lossy a cable: nobody would ever see its pulses. Where no place
    will do, the one that is heard best is taken.
    """
    if label == "interference":
        return _interference(place, SourceEntry(label=label, pulses_per_cycle=1.0, snr_db=place.heights_db), rng=rng)
    kind, current = _audible_current(place, rng=rng)
    tried = []
    for _ in range(_TRIES):
        wish = draw_entry(label, place.scenario.mix, place.station.length_m, place.heights_db, rng=rng)
        tried.append(_discharge(place, wish, kind, current, rng=rng))
        if _is_heard(place, kind, tried[-1].volts_per_coulomb):
            break
    return max(tried, key=lambda source: source.volts_per_coulomb) if len(tried) == _TRIES else tried[-1]


def _audible_current(place: _Place, *, rng: np.random.Generator) -> tuple[Kind, SourceCurrent]:
    at_termination = from_cable(place.station, 0.0) * place.chain
    for _ in range(_TRIES):
        kind, current = draw_discharge(place.scenario.source, rng=rng)
        if _is_heard(place, kind, _nominal(current, at_termination)[1]):
            break
    return kind, current


def _is_heard(place: _Place, kind: Kind, volts_per_coulomb: float) -> bool:
    middle_v = place.noise_v * 10 ** (np.mean(place.heights_db) / 20)
    return bool(middle_v <= volts_per_coulomb * 1e-12 * most_charge_pc(place.scenario.source, kind))


def _named_source(place: _Place, wish: SourceEntry, *, rng: np.random.Generator) -> Source:
    if wish.label == "interference":
        return _interference(place, wish, rng=rng)
    whole = completed(wish, place.scenario.mix, place.station.length_m, rng=rng)
    kind, current = draw_discharge(place.scenario.source, kind=wish.kind, rng=rng)
    return _discharge(place, whole, kind, current, rng=rng)


def _check_neighbour(place: _Place, entry: CircuitEntry, wish: SourceEntry) -> None:
    if place.station.neighbours or (wish.way != "neighbour" and wish.path != "feeder"):
        return
    found, advice = "a station without one", "give the near end more panels or a role 'feeder', or choose another way"
    where = f"circuit '{entry.name}'"
    raise InputError(complaint(where, "sources", expected="another cable on the busbar", found=found, advice=advice))


def _interference(place: _Place, wish: SourceEntry, *, rng: np.random.Generator) -> Source:
    disturber = draw_disturber(place.scenario.interference, family=wish.family, path=wish.path, rng=rng)
    entrance = _disturbance(disturber, place.station, rng=rng)
    source = _source(place, wish, disturber.family, disturber.current, entrance)
    if disturber.repetition.pattern is None:
        return replace(source, repetition=disturber.repetition)
    # a point in air is a source that lasts, as a void is
    return replace(source, activity=draw_activity(disturber.repetition.pattern, place.scenario.activity, rng=rng))


def _discharge(
    place: _Place, wish: SourceEntry, kind: Kind, current: SourceCurrent, *, rng: np.random.Generator
) -> Source:
    activity = draw_activity(wish.pattern or KIND_PATTERNS[kind], place.scenario.activity, rng=rng)
    entrance = _entrance(place.scenario, wish, place.station, rng=rng)
    return replace(_source(place, wish, kind, current, entrance), activity=activity)


def _source(place: _Place, wish: SourceEntry, family: str, current: SourceCurrent, entrance: _Entrance) -> Source:
    response = entrance.transfer * place.chain
    delay_s, height = _nominal(current, response)
    return Source(
        label=wish.label,
        family=family,
        way=entrance.way,
        distance_m=entrance.distance_m,
        current=current,
        response=response,
        delay_s=delay_s,
        volts_per_coulomb=height,
        pulses_per_cycle=None,
        snr_db=wish.snr_db,
    )


def _entrance(scenario: Scenario, wish: SourceEntry, station: Station, *, rng: np.random.Generator) -> _Entrance:
    if wish.label == "switchgear":
        panel = _panel(scenario.mix.own_panel, station, rng=rng)
        if wish.way == "equipment":
            return _Entrance("equipment", 0.0, from_equipment(station, panel))
        return _Entrance("bus", 0.0, from_bus(station, panel))
    if wish.label == "local":
        distance_m = wish.distance_m or 0.0
        if wish.way == "box":
            return _Entrance("box", 0.0, from_box(station))
        return _Entrance("stress-cone", distance_m, from_cable(station, distance_m))
    if wish.way == "neighbour" and station.neighbours:
        number = int(rng.integers(0, len(station.neighbours)))
        place_m = rng.uniform() * route_length_m(station.neighbours[number])
        return _Entrance("neighbour", None, from_neighbour(station, number, place_m))
    distance_m = station.length_m if wish.distance_m is None else wish.distance_m
    return _Entrance("cable", distance_m, from_cable(station, distance_m))


def _panel(own_share: float, station: Station, *, rng: np.random.Generator) -> int:
    """The own panel as often as said, else any other."""
    others = [number for number in range(len(station.near.panels)) if number != station.near.own]
    own = rng.uniform() < own_share or not others
    return station.near.own if own else int(rng.choice(others))


def _disturbance(disturber: Disturber, station: Station, *, rng: np.random.Generator) -> _Entrance:
    """Interference along a neighbour's cable comes from its far end; without a neighbour along this cable."""
    if disturber.path == "radiated":
        return _Entrance("radiated", None, from_field(station))
    if disturber.path == "screen":
        return _Entrance("screen", None, from_screen(station))
    if disturber.path == "feeder" and station.neighbours:
        number = int(rng.integers(0, len(station.neighbours)))
        return _Entrance("feeder", None, from_neighbour(station, number, route_length_m(station.neighbours[number])))
    return _Entrance("far-end", station.length_m, from_cable(station, station.length_m))


def _nominal(current: SourceCurrent, response: ComplexArray) -> tuple[float, float]:
    """From the record's begin to the nominal onset [s], and the height of the response to a unit of area."""
    s = laplace_grid()
    wave = np.abs(to_samples(source_spectrum(current, s) * response * np.exp(-s * LEAD_S), _FINE_RATE_HZ))
    height = float(wave.max())
    return float(np.argmax(wave > ONSET_SHARE_OF_PEAK * height) / _FINE_RATE_HZ), height
