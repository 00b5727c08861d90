"""Drawing the parts of one circuit from the ranges of a scenario: what a utility does not know is random here."""

from __future__ import annotations

import numpy as np

from pdclass.sim.cable import ALUMINIUM_OHM_M, COPPER_OHM_M, Cable, Semicon
from pdclass.sim.interference import Background, draw_carrier
from pdclass.sim.nearend import Lead, LossyCapacitance, NearEnd, Panel
from pdclass.sim.network import FarEnd
from pdclass.sim.ranges import CableRanges, CaptureRanges, FarEndKind, InterferenceRanges, NearEndRanges
from pdclass.sim.receiver import Receiver
from pdclass.sim.source import SourceCurrent

#: Diameters of compacted conductors by area [mm2: mm] (IEC 60228 Annex C, least and most, from memory).
CONDUCTOR_MM = {
    50: (7.7, 8.6),
    70: (9.3, 10.2),
    95: (11.0, 12.0),
    120: (12.3, 13.5),
    150: (13.7, 15.0),
    185: (15.3, 16.8),
    240: (17.6, 19.2),
    300: (19.7, 21.6),
    400: (22.3, 24.6),
    500: (25.3, 27.6),
    630: (28.7, 32.5),
}
#: Relative permittivity and loss tangent of insulations at high frequency, least and most (from memory).
INSULATIONS = {"XLPE": ((2.25, 2.45), (2e-4, 1.5e-3)), "EPR": ((2.6, 3.3), (3e-3, 2e-2))}
_ALUMINIUM_SHARE = 0.7
_LEAD_LOSS_SHARE = 0.1
_SKIN_LOSS_HZ = 10e6


def even(bounds: tuple[float, float], *, rng: np.random.Generator) -> float:
    """A number drawn evenly between two bounds."""
    return float(rng.uniform(*bounds))


def log_even(bounds: tuple[float, float], *, rng: np.random.Generator) -> float:
    """A positive number whose logarithm is drawn evenly between two bounds."""
    return float(np.exp(rng.uniform(np.log(bounds[0]), np.log(bounds[1]))))


def whole(bounds: tuple[int, int], *, rng: np.random.Generator) -> int:
    """A whole number drawn evenly between two bounds, both included."""
    return int(rng.integers(bounds[0], bounds[1] + 1))


def draw_cable(ranges: CableRanges, *, rng: np.random.Generator) -> Cable:
    """A cable of standard size: conductors of IEC 60228, insulation thickness of IEC 60502-2."""
    conductor = even(CONDUCTOR_MM[int(rng.choice(ranges.areas_mm2))], rng=rng) / 2e3
    inner = conductor + even(ranges.semicon_mm, rng=rng) * 1e-3
    outer = inner + float(rng.choice(ranges.insulation_mm)) * 1e-3
    screen = outer + even(ranges.semicon_mm, rng=rng) * 1e-3
    permittivity, loss_tangent = INSULATIONS[str(rng.choice(ranges.insulations))]
    return Cable(
        conductor_m=conductor,
        inner_m=inner,
        outer_m=outer,
        screen_m=screen,
        screen_thickness_m=rng.uniform(0.1e-3, 0.4e-3),
        conductor_ohm_m=ALUMINIUM_OHM_M if rng.uniform() < _ALUMINIUM_SHARE else COPPER_OHM_M,
        screen_ohm_m=COPPER_OHM_M,
        permittivity=even(permittivity, rng=rng),
        loss_tangent=log_even(loss_tangent, rng=rng),
        semicon=(_draw_semicon(ranges, rng=rng), _draw_semicon(ranges, rng=rng)),
        excess=even(ranges.excess, rng=rng),
    )


def draw_far_end(kind: FarEndKind, *, rng: np.random.Generator) -> FarEnd:
    """A load of the given kind at the far end (values: common practice, no source)."""
    stray = log_even((50e-12, 300e-12), rng=rng)
    ohm, henry = log_even((1.0, 30.0), rng=rng), log_even((0.5e-6, 5e-6), rng=rng)
    if kind == "open":
        return FarEnd(0.0, 0.0, np.inf, 0.0, stray)
    if kind == "transformer":
        return FarEnd(ohm, henry, np.inf, log_even((0.5e-9, 3e-9), rng=rng), stray)
    return FarEnd(0.1 * ohm, 0.3 * henry, even((10.0, 45.0), rng=rng), 0.0, stray)


def draw_near_end(ranges: NearEndRanges, *, rng: np.random.Generator) -> NearEnd:
    """Termination, strap and switchgear at the sensor, with as many further feeders as drawn."""
    count = whole(ranges.panels, rng=rng)
    feeders = np.zeros(count, int)
    for _ in range(whole(ranges.feeders, rng=rng)):
        feeders[int(rng.integers(1, count))] += 1
    return NearEnd(
        tail=_draw_lead(ranges.tail_h, ranges, rng=rng),
        termination=_draw_capacitance(ranges.termination_f, ranges, rng=rng),
        box=_draw_capacitance(ranges.box_f, ranges, rng=rng),
        strap=_draw_lead(ranges.strap_h, ranges, rng=rng),
        soil_ohm=even(ranges.soil_ohm, rng=rng),
        screen_f=log_even(ranges.screen_f, rng=rng),
        panels=tuple(_draw_panel(ranges, int(number), rng=rng) for number in feeders),
    )


def draw_receiver(ranges: CaptureRanges, *, rng: np.random.Generator) -> Receiver:
    """A current transformer and digitiser."""
    return Receiver(
        rate_hz=float(rng.choice(ranges.rates_hz)),
        bits=int(rng.choice(ranges.bits)),
        transfer_ohm=log_even(ranges.transfer_ohm, rng=rng),
        low_hz=log_even(ranges.low_corner_hz, rng=rng),
        high_hz=log_even(ranges.high_corner_hz, rng=rng),
    )


def draw_background(ranges: InterferenceRanges, *, rng: np.random.Generator) -> Background:
    """Carriers and noise of a site; carriers that the scenario names are always there."""
    wanted: list[float | None] = [*ranges.carriers_hz, *([None] * whole(ranges.carriers, rng=rng))]
    carriers = tuple(draw_carrier(log_even(ranges.carrier_amplitude, rng=rng), hz=hz, rng=rng) for hz in wanted)
    return Background(carriers, even(ranges.low_noise, rng=rng), log_even(ranges.low_noise_hz, rng=rng))


def draw_discharge(*, rng: np.random.Generator) -> SourceCurrent:
    """The current of a discharge at its place: the same law in cable, termination and switchgear.

    Widths of a few to some tens of nanoseconds, longer in aged surfaces (orders of magnitude, from memory).
    """
    rise = log_even((2e-9, 20e-9), rng=rng)
    if rng.uniform() < 0.4:
        return SourceCurrent("gaussian", rise, rise)
    return SourceCurrent("asymmetric", rise, rise * log_even((1.0, 6.0), rng=rng))


def draw_converter(ranges: InterferenceRanges, *, rng: np.random.Generator) -> SourceCurrent:
    """The damped ringing of one switching edge of a converter."""
    hz, q = log_even(ranges.ring_hz, rng=rng), log_even(ranges.ring_q, rng=rng)
    edge = min(log_even((10e-9, 150e-9), rng=rng), 0.25 / hz)
    return SourceCurrent("ringing", edge, q / (np.pi * hz), hz)


def draw_arc(*, rng: np.random.Generator) -> SourceCurrent:
    """A single impulse of an arc or a contact (orders of magnitude: common practice, no source)."""
    rise = log_even((3e-9, 40e-9), rng=rng)
    return SourceCurrent("exponential", rise, rise * log_even((2.0, 40.0), rng=rng))


def _draw_semicon(ranges: CableRanges, *, rng: np.random.Generator) -> Semicon:
    dispersive = rng.uniform() < ranges.cole_cole_share
    permittivity = log_even(ranges.semicon_permittivity, rng=rng)
    step, spread = permittivity * log_even((1.0, 10.0), rng=rng), rng.uniform(0.0, 0.5)
    relaxation = log_even((1e-8, 1e-6), rng=rng)
    conductivity = log_even(ranges.semicon_s_per_m, rng=rng)
    return Semicon(conductivity, permittivity, step if dispersive else 0.0, relaxation, spread)


def _draw_panel(ranges: NearEndRanges, feeders: int, *, rng: np.random.Generator) -> Panel:
    ways = tuple(Lead(even(ranges.feeder_ohm, rng=rng), log_even(ranges.feeder_h, rng=rng)) for _ in range(feeders))
    return Panel(
        busbar=_draw_capacitance(ranges.busbar_f, ranges, rng=rng),
        dropper=_draw_lead(ranges.dropper_h, ranges, rng=rng),
        equipment=_draw_capacitance(ranges.equipment_f, ranges, rng=rng),
        feeders=ways,
        section=_draw_lead(ranges.section_h, ranges, rng=rng),
    )


def _draw_lead(bounds: tuple[float, float], ranges: NearEndRanges, *, rng: np.random.Generator) -> Lead:
    # contacts, earth bar and radiation: one part fixed, an equal one at 10 MHz that grows with sqrt(f)
    loss = log_even(ranges.loss_ohm, rng=rng) * _LEAD_LOSS_SHARE
    return Lead(loss, log_even(bounds, rng=rng), loss / np.sqrt(2 * np.pi * _SKIN_LOSS_HZ))


def _draw_capacitance(
    bounds: tuple[float, float], ranges: NearEndRanges, *, rng: np.random.Generator
) -> LossyCapacitance:
    return LossyCapacitance(log_even(bounds, rng=rng), log_even(ranges.loss_ohm, rng=rng))
