"""Drawing impulsive interference: its families in stated proportions, their currents, repetition and paths.

Orders of magnitude are common practice without a source unless one is named beside them.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Annotated, Any, get_args

import numpy as np
from pydantic import Field

from pdclass.sim.disturbers import Disturber, Family, Path, Repetition
from pdclass.sim.draw import (
    Hertz,
    Pair,
    Positive,
    Range,
    Ranges,
    Seconds,
    Share,
    Some,
    Weights,
    chosen,
    even,
    known_names,
    log_even,
    whole,
    within,
)
from pdclass.sim.drawn_source import CORONA_PATTERNS, CoronaCurrentRanges, draw_corona
from pdclass.sim.grid import LEAD_S
from pdclass.sim.source import SourceCurrent

#: A ringing that begins more slowly than in a quarter of its period would hardly ring.
_SLOWEST_EDGE = 0.25
#: What rings longer would not fit into the record of one pulse [s].
_LONGEST_DECAY_S = 20e-6
_FEWEST_PERIODS = 3
_BRIDGES = {"two": 2, "six": 6, "twelve": 12}

PathWeights = Annotated[Weights, known_names(*get_args(Path))]
FamilyWeights = Annotated[Weights, known_names(*get_args(Family))]
BridgeWeights = Annotated[Weights, known_names(*_BRIDGES)]
#: Flanks, tails and envelopes of a current [s].
Flank = Annotated[Pair, within(1e-10, 1e-4, "s")]
_Draw = Callable[..., tuple[SourceCurrent, Repetition]]


class ConverterRanges(Ranges):
    """IGBT and silicon-carbide converters: a damped ringing at both edges of the switching period.

    Rise times up to 50 ns of silicon carbide: as published in a tutorial on emissions of power electronics.

    Attributes
    ----------
    switching_hz, jitter : switching frequency [Hz], and jitter of an edge as a share of its period.
    edge_s, carbide_edge_s : deviation of the flank of an IGBT, and of silicon carbide [s].
    carbide_share : of converters with silicon carbide, 0 to 1.
    ring_hz, ring_q : the ringing's frequency [Hz] and quality.
    paths : how it comes.
    """

    switching_hz: Hertz = (2e3, 20e3)
    jitter: Positive = (0.002, 0.02)
    edge_s: Flank = (25e-9, 150e-9)
    carbide_edge_s: Flank = (4e-9, 19e-9)
    carbide_share: Share = 0.3
    ring_hz: Hertz = (0.3e6, 20e6)
    ring_q: Positive = (1.5, 20.0)
    paths: PathWeights = Field(default={"radiated": 0.35, "screen": 0.3, "feeder": 0.15, "far-end": 0.2})


class ThyristorRanges(Ranges):
    """Line-commutated bridges: a slower edge and a lower ringing at both ends of each commutation.

    Attributes
    ----------
    bridges : two, six or twelve commutations a mains cycle.
    firing_deg, overlap_deg, jitter_deg : firing angle, duration of a commutation and its jitter [deg].
    edge_s : deviation of the flank [s].
    ring_hz, ring_q : the ringing's frequency [Hz] and quality.
    paths : how it comes.
    """

    bridges: BridgeWeights = Field(default={"two": 0.15, "six": 0.6, "twelve": 0.25})
    firing_deg: Range = (0.0, 150.0)
    overlap_deg: Positive = (1.0, 20.0)
    jitter_deg: Positive = (0.01, 0.3)
    edge_s: Flank = (0.08e-6, 1e-6)
    ring_hz: Hertz = (0.1e6, 2e6)
    ring_q: Positive = (1.5, 10.0)
    paths: PathWeights = Field(default={"radiated": 0.15, "screen": 0.25, "feeder": 0.35, "far-end": 0.25})


class SwitchModeRanges(Ranges):
    """Switch-mode supplies near the sensor: fast edges in bursts.

    Attributes
    ----------
    switching_hz, jitter : switching frequency [Hz], and jitter as a share of its period.
    edge_s : deviation of the flank [s].
    ring_hz, ring_q : the ringing's frequency [Hz] and quality.
    burst_pulses : edges in a burst that stand out.
    paths : how it comes.
    """

    switching_hz: Hertz = (60e3, 300e3)
    jitter: Positive = (0.001, 0.02)
    edge_s: Flank = (4e-9, 40e-9)
    ring_hz: Hertz = (1e6, 30e6)
    ring_q: Positive = (2.0, 20.0)
    burst_pulses: Some = (2, 40)
    paths: PathWeights = Field(default={"radiated": 0.55, "screen": 0.45})


class ArcRanges(Ranges):
    """Arcs of contacts and brushes.

    Attributes
    ----------
    rise_s, fall_over_rise : shorter time constant [s], and the longer one over it.
    brush_share : of arcs at the segments of a commutator rather than in bursts of a contact, 0 to 1.
    brush_hz, brush_jitter : passing of segments [Hz], jitter as a share of its period.
    burst_s, burst_pulses : of a contact [s].
    paths : how it comes.
    """

    rise_s: Flank = (3e-9, 40e-9)
    fall_over_rise: Positive = (2.0, 40.0)
    brush_share: Share = 0.3
    brush_hz: Hertz = (200.0, 5e3)
    brush_jitter: Positive = (0.03, 0.2)
    burst_s: Seconds = (0.1e-3, 3e-3)
    burst_pulses: Some = (2, 30)
    paths: PathWeights = Field(default={"radiated": 0.5, "screen": 0.3, "feeder": 0.1, "far-end": 0.1})


class RadioPacketRanges(Ranges):
    """Packets of a radio frequency, as rectifying contacts and transmitters switched on and off give.

    Attributes
    ----------
    hz : radio frequency [Hz].
    length_s : four deviations of the envelope, three periods or more [s].
    burst_share : of packets that come in bursts rather than at random, 0 to 1.
    burst_s, burst_pulses : of such a burst [s].
    paths : how it comes.
    """

    hz: Annotated[Pair, within(1e4, 1e9, "Hz")] = (0.3e6, 20e6)
    length_s: Flank = (1e-6, 20e-6)
    burst_share: Share = 0.5
    burst_s: Seconds = (0.1e-3, 3e-3)
    burst_pulses: Some = (2, 20)
    paths: PathWeights = Field(default={"radiated": 0.8, "screen": 0.2})


class LineCoronaRanges(Ranges):
    """Corona in air on an overhead line that goes on from this cable or another one.

    Attributes
    ----------
    current : at the point in air.
    line_km, rise_s_per_km : length of line on the way [km], and what a kilometre over lossy ground adds to both time
        constants, in power [s].
    paths : how it comes.
    """

    current: CoronaCurrentRanges = CoronaCurrentRanges()
    line_km: Positive = (0.03, 5.0)
    rise_s_per_km: Seconds = (10e-9, 100e-9)
    paths: PathWeights = Field(default={"radiated": 0.25, "feeder": 0.35, "far-end": 0.4})


class SfericRanges(Ranges):
    """Lightning: return strokes, and the trains of faster pulses of leaders.

    Attributes
    ----------
    stroke_share : of strokes rather than leaders, 0 to 1.
    stroke_rise_s, stroke_fall_s : time constants of a stroke's field or surge [s].
    leader_rise_s, leader_fall_s : time constants of a leader's pulses [s].
    train_s, train_pulses : of a leader [s].
    ring_share, ring_hz, ring_q : share of strokes that ring on a line or tower, and how [Hz].
    paths : how it comes.
    """

    stroke_share: Share = 0.4
    stroke_rise_s: Annotated[Pair, within(1e-8, 1e-4, "s")] = (0.2e-6, 5e-6)
    stroke_fall_s: Annotated[Pair, within(1e-8, 1e-4, "s")] = (8e-6, 40e-6)
    leader_rise_s: Flank = (0.03e-6, 0.5e-6)
    leader_fall_s: Flank = (0.6e-6, 6e-6)
    train_s: Seconds = (0.3e-3, 3e-3)
    train_pulses: Some = (4, 30)
    ring_share: Share = 0.3
    ring_hz: Hertz = (20e3, 300e3)
    ring_q: Positive = (0.8, 5.0)
    paths: PathWeights = Field(default={"radiated": 0.55, "feeder": 0.2, "far-end": 0.25})


class SwitchingOperationRanges(Ranges):
    """Breakers, disconnectors and capacitor banks elsewhere: oscillatory transients, many where contacts pre-strike.

    Above 500 kHz microseconds, 5 to 500 kHz tens of them (IEEE Std 1159-2019, 4.4.1.2, as quoted).

    Attributes
    ----------
    edge_s : deviation of the flank [s].
    ring_hz, ring_q : the oscillation's frequency [Hz] and quality.
    burst_s, burst_pulses : of pre-strikes [s].
    paths : how it comes.
    """

    edge_s: Flank = (10e-9, 200e-9)
    ring_hz: Hertz = (0.05e6, 2e6)
    ring_q: Positive = (2.0, 15.0)
    burst_s: Seconds = (0.1e-3, 3e-3)
    burst_pulses: Some = (1, 30)
    paths: PathWeights = Field(default={"radiated": 0.15, "screen": 0.2, "feeder": 0.35, "far-end": 0.3})


class DisturberRanges(Ranges):
    """Impulsive interference: how often each family is drawn, and what each is like.

    Attributes
    ----------
    families : how often each is drawn.
    converter, thyristor, switch_mode, arc, radio_packet, line_corona, sferic, switching_operation : each family.
    """

    families: FamilyWeights = Field(
        default={
            "converter": 0.28,
            "thyristor": 0.10,
            "switch-mode": 0.15,
            "arc": 0.15,
            "radio-packet": 0.08,
            "line-corona": 0.10,
            "sferic": 0.04,
            "switching-operation": 0.10,
        }
    )
    converter: ConverterRanges = ConverterRanges()
    thyristor: ThyristorRanges = ThyristorRanges()
    switch_mode: SwitchModeRanges = SwitchModeRanges()
    arc: ArcRanges = ArcRanges()
    radio_packet: RadioPacketRanges = RadioPacketRanges()
    line_corona: LineCoronaRanges = LineCoronaRanges()
    sferic: SfericRanges = SfericRanges()
    switching_operation: SwitchingOperationRanges = SwitchingOperationRanges()


def draw_disturber(
    ranges: DisturberRanges, *, family: Family | None = None, path: Path | None = None, rng: np.random.Generator
) -> Disturber:
    """A source of impulsive interference; family and path are drawn unless given."""
    families: dict[Family, tuple[Any, _Draw]] = {
        "converter": (ranges.converter, _draw_converter),
        "thyristor": (ranges.thyristor, _draw_thyristor),
        "switch-mode": (ranges.switch_mode, _draw_switch_mode),
        "arc": (ranges.arc, _draw_arc),
        "radio-packet": (ranges.radio_packet, _draw_radio_packet),
        "line-corona": (ranges.line_corona, _draw_line_corona),
        "sferic": (ranges.sferic, _draw_sferic),
        "switching-operation": (ranges.switching_operation, _draw_switching_operation),
    }
    name = family or chosen(ranges.families, rng=rng)
    own = next(one for one in families if one == name)
    settings, draw = families[own]
    way = path or chosen(settings.paths, rng=rng)
    current, repetition = draw(settings, rng=rng)
    return Disturber(own, next(one for one in get_args(Path) if one == way), current, repetition)


def _ringing(
    edge_s: tuple[float, float], ring_hz: tuple[float, float], ring_q: tuple[float, float], *, rng: np.random.Generator
) -> SourceCurrent:
    hz, q = log_even(ring_hz, rng=rng), log_even(ring_q, rng=rng)
    edge = min(log_even(edge_s, rng=rng), _SLOWEST_EDGE / hz)
    return _in_time(SourceCurrent("ringing", edge, min(q / (np.pi * hz), _LONGEST_DECAY_S), hz), 4)


def _in_time(current: SourceCurrent, deviations: float) -> SourceCurrent:
    """The same, so late that the record of a pulse holds so many deviations of its rising flank.

    What lay before the record would come back at its end, and loud: the record's damping is taken out there.
    """
    return replace(current, offsets_s=(max(0.0, deviations * current.rise_s - LEAD_S),))


def _exponential(rise_s: float, ratio: tuple[float, float], *, rng: np.random.Generator) -> SourceCurrent:
    return SourceCurrent("exponential", rise_s, rise_s * log_even(ratio, rng=rng))


def _bursts(pulses: tuple[int, int], lasts_s: tuple[float, float], *, rng: np.random.Generator) -> Repetition:
    return Repetition("bursts", burst_pulses=whole(pulses, rng=rng), burst_s=log_even(lasts_s, rng=rng))


def _draw_converter(ranges: ConverterRanges, *, rng: np.random.Generator) -> tuple[SourceCurrent, Repetition]:
    edge_s = ranges.carbide_edge_s if rng.uniform() < ranges.carbide_share else ranges.edge_s
    hz, jitter = log_even(ranges.switching_hz, rng=rng), log_even(ranges.jitter, rng=rng)
    return _ringing(edge_s, ranges.ring_hz, ranges.ring_q, rng=rng), Repetition("switching", hz, jitter)


def _draw_thyristor(ranges: ThyristorRanges, *, rng: np.random.Generator) -> tuple[SourceCurrent, Repetition]:
    repetition = Repetition(
        "mains-locked",
        commutations=_BRIDGES[chosen(ranges.bridges, rng=rng)],
        firing_deg=even(ranges.firing_deg, rng=rng),
        overlap_deg=log_even(ranges.overlap_deg, rng=rng),
        jitter_deg=log_even(ranges.jitter_deg, rng=rng),
    )
    return _ringing(ranges.edge_s, ranges.ring_hz, ranges.ring_q, rng=rng), repetition


def _draw_switch_mode(ranges: SwitchModeRanges, *, rng: np.random.Generator) -> tuple[SourceCurrent, Repetition]:
    hz, jitter = log_even(ranges.switching_hz, rng=rng), log_even(ranges.jitter, rng=rng)
    repetition = Repetition("bursts", hz, jitter, burst_pulses=whole(ranges.burst_pulses, rng=rng))
    return _ringing(ranges.edge_s, ranges.ring_hz, ranges.ring_q, rng=rng), repetition


def _draw_arc(ranges: ArcRanges, *, rng: np.random.Generator) -> tuple[SourceCurrent, Repetition]:
    current = _exponential(log_even(ranges.rise_s, rng=rng), ranges.fall_over_rise, rng=rng)
    if rng.uniform() < ranges.brush_share:
        hz, jitter = log_even(ranges.brush_hz, rng=rng), log_even(ranges.brush_jitter, rng=rng)
        return current, Repetition("switching", hz, jitter)
    return current, _bursts(ranges.burst_pulses, ranges.burst_s, rng=rng)


def _draw_radio_packet(ranges: RadioPacketRanges, *, rng: np.random.Generator) -> tuple[SourceCurrent, Repetition]:
    hz = log_even(ranges.hz, rng=rng)
    length_s = max(log_even(ranges.length_s, rng=rng), _FEWEST_PERIODS / hz)
    rise_share = rng.uniform(0.2, 0.5)
    rise_s, fall_s = length_s / 2 * rise_share, length_s / 2 * (1 - rise_share)
    current = _in_time(SourceCurrent("packet", rise_s, fall_s, hz), 7)
    if rng.uniform() < ranges.burst_share:
        return current, _bursts(ranges.burst_pulses, ranges.burst_s, rng=rng)
    return current, Repetition("random")


def _draw_line_corona(ranges: LineCoronaRanges, *, rng: np.random.Generator) -> tuple[SourceCurrent, Repetition]:
    polarity, current = draw_corona(ranges.current, rng=rng)
    travelled_s = log_even(ranges.line_km, rng=rng) * log_even(ranges.rise_s_per_km, rng=rng)
    rise_s, fall_s = np.hypot([current.rise_s, current.fall_s], travelled_s).tolist()
    arriving = replace(current, rise_s=rise_s, fall_s=fall_s)
    return arriving, Repetition("pattern", pattern=CORONA_PATTERNS[polarity])


def _draw_sferic(ranges: SfericRanges, *, rng: np.random.Generator) -> tuple[SourceCurrent, Repetition]:
    if rng.uniform() >= ranges.stroke_share:
        rise_s, fall_s = log_even(ranges.leader_rise_s, rng=rng), log_even(ranges.leader_fall_s, rng=rng)
        return SourceCurrent("exponential", rise_s, fall_s), _bursts(ranges.train_pulses, ranges.train_s, rng=rng)
    if rng.uniform() < ranges.ring_share:
        return _ringing(ranges.stroke_rise_s, ranges.ring_hz, ranges.ring_q, rng=rng), Repetition("random")
    rise_s, fall_s = log_even(ranges.stroke_rise_s, rng=rng), log_even(ranges.stroke_fall_s, rng=rng)
    return SourceCurrent("heidler", rise_s, fall_s), Repetition("random")


def _draw_switching_operation(
    ranges: SwitchingOperationRanges, *, rng: np.random.Generator
) -> tuple[SourceCurrent, Repetition]:
    current = _ringing(ranges.edge_s, ranges.ring_hz, ranges.ring_q, rng=rng)
    return current, _bursts(ranges.burst_pulses, ranges.burst_s, rng=rng)
