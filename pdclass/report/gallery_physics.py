"""What the gallery shows of the world's parts by themselves: cables, near ends, sensors, and when sources send."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import get_args

import numpy as np

from pdclass.pulses import FloatArray
from pdclass.report.gallery_world import families_of, patterns_of
from pdclass.sim.cable import DB_PER_NEPER, line_of
from pdclass.sim.cable_kinds import Kind
from pdclass.sim.disturbers import Repetition, disturber_signs, disturber_times
from pdclass.sim.draw import log_even
from pdclass.sim.drawn_cable import CableRanges, attenuation_spread, draw_cable, draw_lines, velocity_spread
from pdclass.sim.drawn_chain import ChainRanges, draw_receiver
from pdclass.sim.drawn_disturbance import draw_disturber
from pdclass.sim.drawn_near_end import draw_near_end
from pdclass.sim.grid import DAMPING_PER_S, LEAD_S, RECORD_S, ComplexArray, to_samples
from pdclass.sim.network import Route, Section
from pdclass.sim.phase import Pattern, activity_phases, draw_activity
from pdclass.sim.ranges import Scenario
from pdclass.sim.receiver import anti_alias_response, sensor_response
from pdclass.sim.source import SourceCurrent, source_spectrum
from pdclass.sim.station import Station, from_bus, from_cable, from_screen, solve_station

DISTANCES_KM = (0.0, 0.05, 0.2, 0.5, 1.0, 2.0, 5.0)
TABLE_MHZ = (1.0, 10.0, 30.0)
#: Width of the injected current between half heights [ns].
INJECTED_NS = 5.0
STATIONS, RINGS, CHAINS, CABLES = 20, 120, 20, 200
CYCLES, PULSES = 50, 220
#: So long after its arrival the charge of a wave is counted [us].
CHARGE_US = 30
#: Those that vary most from source to source stand twice.
PATTERNS: tuple[Pattern, ...] = (
    "void",
    "void",
    "surface",
    "surface",
    "floating",
    "floating",
    "corona",
    "positive-corona",
)
#: Thyristor bridges by their commutations a cycle.
BRIDGES = ("six", "twelve")

_SIGMAS_IN_WIDTH = float(np.sqrt(8 * np.log(2)))
_RATE_HZ = 1e9
_MEDIAN_OF = 101
_FOOT_NS = 1000
_FIRST_HZ, _LAST_HZ = 0.1e6, 50e6
#: At 50 Hz.
_DEG_PER_S = 360 * 50.0
#: More edges than any device has in what is shown of it.
_ALL_EDGES = 100_000


@dataclass(frozen=True)
class Step:
    """A pulse after a distance: its peak over the one sent, edges [ns], and the share of its charge within 30 us."""

    km: float
    peak_share: float
    rise_ns: float
    width_ns: float
    charge_share: float


@dataclass(frozen=True)
class Journey:
    """What distance does to a pulse on one cable.

    Attributes
    ----------
    kind : of the cable.
    db_per_km : its attenuation at 1, 10 and 30 MHz.
    steps : one for each distance.
    time_ns, waves : from where each wave reaches a tenth of its peak [ns], (samples,); waves over their peak,
        (distances, samples).
    """

    kind: str
    db_per_km: tuple[float, ...]
    steps: tuple[Step, ...]
    time_ns: FloatArray
    waves: FloatArray


@dataclass(frozen=True)
class Spread:
    """10, 50 and 90 % of drawn cables of one kind: attenuation [dB/km] and velocity [m/us], each (3, frequencies)."""

    kind: str
    mhz: FloatArray
    db_per_km: FloatArray
    m_per_us: FloatArray


@dataclass(frozen=True)
class NearEnds:
    """Strap current per current at the busbar, at the termination and into the screen, each (stations, frequencies).

    `ring_mhz` and `ring_q` belong to the strongest resonance for a current at the busbar, (more stations,).
    """

    mhz: FloatArray
    bus: FloatArray
    core: FloatArray
    screen: FloatArray
    ring_mhz: FloatArray
    ring_q: FloatArray


@dataclass(frozen=True)
class Chains:
    """Transfer impedance of drawn chains [V/A], (chains, frequencies); nothing above half of a chain's rate."""

    mhz: FloatArray
    ohm: FloatArray


@dataclass(frozen=True)
class PhasePattern:
    """Pulses of one source over fifty cycles: phase [deg] and signed size over the largest, each (pulses,)."""

    pattern: str
    phase_deg: FloatArray
    size: FloatArray


@dataclass(frozen=True)
class Intervals:
    """Time between neighbouring pulses of a converter [us], and the frequency at which it switches [Hz]."""

    interval_us: FloatArray
    switching_hz: float


def kinds_of(ranges: CableRanges) -> tuple[Kind, ...]:
    """Kinds of cable that a scenario draws; none where it uses a measured curve."""
    return () if ranges.curve is not None else tuple(kind for kind in get_args(Kind) if ranges.kinds.get(kind, 0) > 0)


def journey(ranges: CableRanges, kind: Kind, *, rng: np.random.Generator) -> Journey:
    """A current 5 ns wide along a matched cable: of 101 drawn ones that of median attenuation at 10 MHz."""
    cables = [draw_cable(ranges, kind, rng=rng) for _ in range(_MEDIAN_OF)]
    at_hz = np.array(TABLE_MHZ) * 1e6
    losses = np.array([_db_per_km(line_of(cable, _s_of(at_hz)).gamma) for cable in cables])
    middle = int(np.argsort(losses[:, 1], kind="stable")[_MEDIAN_OF // 2])
    return followed(kind, lambda s: line_of(cables[middle], s).gamma)


def followed(kind: str, propagation: Callable[[ComplexArray], ComplexArray]) -> Journey:
    """A current 5 ns wide along a matched line of a propagation constant [1/m] over complex frequencies [1/s]."""
    losses = _db_per_km(propagation(_s_of(np.array(TABLE_MHZ) * 1e6)))
    fine = (DAMPING_PER_S + 2j * np.pi * np.arange(round(_RATE_HZ / 2 * RECORD_S) + 1) / RECORD_S).astype(np.complex128)
    gamma = propagation(fine)
    sigma_s = INJECTED_NS * 1e-9 / _SIGMAS_IN_WIDTH
    sent = source_spectrum(SourceCurrent("gaussian", sigma_s, sigma_s), fine) * np.exp(-fine * LEAD_S)
    time_ns = np.arange(-100.0, 2001.0, 2.0)
    steps, waves = [], []
    for km in DISTANCES_KM:
        arrived = to_samples(np.asarray(sent * np.exp(-gamma * (km * 1e3))), _RATE_HZ)
        step, wave = _measured(km, arrived, time_ns)
        steps.append(step)
        waves.append(wave)
    first = steps[0]
    shared = tuple(
        Step(s.km, s.peak_share / first.peak_share, s.rise_ns, s.width_ns, s.charge_share / first.charge_share)
        for s in steps
    )
    return Journey(kind, tuple(losses.tolist()), shared, time_ns, np.array(waves))


def spread(ranges: CableRanges, kind: Kind, *, seed: int) -> Spread:
    """Attenuation and velocity of 200 drawn cables of one kind."""
    hz = np.unique(np.concatenate([np.geomspace(_FIRST_HZ, _LAST_HZ, 55), np.array(TABLE_MHZ) * 1e6]))
    # the same generator twice, so that both figures are of the same cables
    attenuation = attenuation_spread(ranges, kind, hz, CABLES, rng=np.random.default_rng(seed))
    velocity = velocity_spread(ranges, kind, hz, CABLES, rng=np.random.default_rng(seed))
    return Spread(kind, hz / 1e6, _tenths(attenuation), _tenths(velocity))


def near_ends(scenario: Scenario, *, rng: np.random.Generator) -> NearEnds:
    """Drawn stations whose cables are long enough to send nothing back: what rings is the near end alone."""
    hz = np.geomspace(_FIRST_HZ, 60e6, 1500)
    stations = [_echoless(scenario, _s_of(hz), rng=rng) for _ in range(RINGS)]
    bus = np.array([np.abs(from_bus(one, one.near.own)) for one in stations])
    rings = np.array([strongest_ring(hz, gain) for gain in bus])
    shown = stations[:STATIONS]
    thin = slice(None, None, 5)
    return NearEnds(
        mhz=hz[thin] / 1e6,
        bus=bus[:STATIONS, thin],
        core=np.array([np.abs(from_cable(one, 0.0))[thin] for one in shown]),
        screen=np.array([np.abs(from_screen(one))[thin] for one in shown]),
        ring_mhz=rings[:, 0] / 1e6,
        ring_q=rings[:, 1],
    )


def chains(ranges: ChainRanges, *, rng: np.random.Generator) -> Chains:
    """Transfer impedances of drawn chains without mains current, anti-alias filter included."""
    hz = np.geomspace(10e3, 100e6, 260)
    receivers = [draw_receiver(ranges, rng=rng) for _ in range(CHAINS)]
    gains = [
        np.abs(sensor_response(one, _s_of(hz)) * anti_alias_response(one.anti_alias, _s_of(hz))) for one in receivers
    ]
    rates = np.array([one.rate_hz for one in receivers])
    return Chains(hz / 1e6, np.where(hz < rates[:, None] / 2, np.array(gains), np.nan))


def phase_patterns(scenario: Scenario, *, rng: np.random.Generator) -> list[PhasePattern]:
    """Fifty cycles of one drawn source of each pattern that the world has."""
    found = []
    had = patterns_of(scenario)
    for pattern in (one for one in PATTERNS if one in had):
        activity = draw_activity(pattern, scenario.activity, rng=rng)
        pulses = activity_phases(activity, PULSES, 0.0, 360.0 * CYCLES, rng=rng)
        largest = max(float(np.abs(pulses.charge).max(initial=0.0)), 1e-12)
        found.append(PhasePattern(pattern, np.mod(pulses.phase_deg, 360.0), pulses.charge / largest))
    return found


def bridge_patterns(scenario: Scenario, *, rng: np.random.Generator) -> list[PhasePattern]:
    """Fifty cycles of a drawn thyristor bridge of six and one of twelve commutations; only those that the world has."""
    disturbers = scenario.interference
    if "thyristor" not in families_of(scenario):
        return []
    found = []
    for bridge in BRIDGES:
        if disturbers.thyristor.bridges.get(bridge, 0) <= 0:
            continue
        one = disturbers.thyristor.model_copy(update={"bridges": {bridge: 1.0}})
        drawn = draw_disturber(disturbers.model_copy(update={"thyristor": one}), family="thyristor", rng=rng)
        times = _all_times(drawn.repetition, CYCLES * 360 / _DEG_PER_S, rng=rng)
        signs = disturber_signs(drawn.repetition, times, rng=rng)
        found.append(PhasePattern(f"{bridge} commutations", np.mod(times * _DEG_PER_S, 360.0), signs))
    return found


def converter_intervals(scenario: Scenario, *, rng: np.random.Generator) -> Intervals | None:
    """Time between the pulses of one drawn converter over two tenths of a second; None where the world has none."""
    if "converter" not in families_of(scenario):
        return None
    disturber = draw_disturber(scenario.interference, family="converter", rng=rng)
    times = _all_times(disturber.repetition, 0.2, rng=rng)
    return Intervals(np.diff(times) * 1e6, disturber.repetition.hz)


def _all_times(repetition: Repetition, duration_s: float, *, rng: np.random.Generator) -> FloatArray:
    return disturber_times(repetition, duration_s, _ALL_EDGES, start_deg=0.0, deg_per_s=_DEG_PER_S, rng=rng)


def strongest_ring(hz: FloatArray, gain: FloatArray) -> tuple[float, float]:
    """Frequency of the highest peak between the ends of a response [Hz], and its Q from where its power is halved."""
    inner = np.flatnonzero((gain[1:-1] > gain[:-2]) & (gain[1:-1] >= gain[2:])) + 1
    if inner.size == 0:
        return float("nan"), float("nan")
    peak = int(inner[np.argmax(gain[inner])])
    level = gain[peak] / np.sqrt(2)
    below, above = np.flatnonzero(gain[:peak] < level), np.flatnonzero(gain[peak:] < level)
    halves = [hz[peak] - hz[below[-1]]] if below.size else []
    halves += [hz[peak + above[0]] - hz[peak]] if above.size else []
    if not halves:
        return float("nan"), float("nan")
    return float(hz[peak]), float(hz[peak] / (2 * np.mean(halves)))


def _s_of(hz: FloatArray) -> ComplexArray:
    return np.asarray(2j * np.pi * hz, np.complex128)


def _db_per_km(gamma: ComplexArray) -> FloatArray:
    return np.asarray(gamma.real * DB_PER_NEPER * 1e3)


def _tenths(values: FloatArray) -> FloatArray:
    return np.asarray(np.percentile(values, [10, 50, 90], axis=0))


def _measured(km: float, wave: FloatArray, time_ns: FloatArray) -> tuple[Step, FloatArray]:
    """Figures of a wave, sampled every nanosecond, and the wave as it is drawn."""
    peak = int(np.argmax(wave))
    height = float(wave[peak])
    at = np.arange(wave.size, dtype=np.float64)
    rising = wave[: peak + 1]
    start = int(np.flatnonzero(rising < 0.1 * height)[-1]) if (rising < 0.1 * height).any() else 0
    low, half, high = (
        float(np.interp(share * height, rising[start:], at[start : peak + 1])) for share in (0.1, 0.5, 0.9)
    )
    fallen = peak + int(np.argmax(wave[peak:] < height / 2))
    late = fallen - 1 + (wave[fallen - 1] - height / 2) / (wave[fallen - 1] - wave[fallen])
    soon = wave[max(0, start - _FOOT_NS) : start + CHARGE_US * 1000]
    step = Step(km, height, high - low, float(late - half), float(soon.sum()))
    return step, np.interp(low + time_ns, at, wave / height)


def _echoless(scenario: Scenario, s: ComplexArray, *, rng: np.random.Generator) -> Station:
    lines, _ = draw_lines(scenario.cable, 1, rng=rng, s=s)
    near = draw_near_end(scenario.near_end, rng=rng)
    length_m = log_even(scenario.cable.length_m, rng=rng)
    route = Route((Section(lines[0], length_m),), (), 1 / lines[0].impedance, s)
    return solve_station(near, route, [route] * near.feeders, s)
