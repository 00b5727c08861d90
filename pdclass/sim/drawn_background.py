"""Drawing the background of a site: noise, broadcast carriers, carrier communication on mains lines.

Orders of magnitude are common practice without a source unless one is named beside them.
"""

from __future__ import annotations

from typing import Annotated

import numpy as np
from pydantic import Field

from pdclass.sim.draw import (
    Count,
    Hertz,
    Positive,
    Range,
    Ranges,
    Seconds,
    Shares,
    Weights,
    chosen,
    even,
    known_names,
    log_even,
    whole,
)
from pdclass.sim.interference import MAN_MADE, Background, Carrier, Communication, Noise, medium_wave_hz

#: Short-wave broadcast bands [Hz] (International Telecommunication Union allotments, from memory).
SHORT_WAVE_HZ = (
    (3.9e6, 4.0e6),
    (5.9e6, 6.2e6),
    (7.2e6, 7.45e6),
    (9.4e6, 9.9e6),
    (11.6e6, 12.1e6),
    (13.57e6, 13.87e6),
    (15.1e6, 15.8e6),
    (17.48e6, 17.9e6),
    (21.45e6, 21.85e6),
)
#: First and last sub-carrier, spacing [Hz] and symbol [s] of OFDM on mains lines. Bands: band plans of the open
#: specification for narrow-band OFDM carrier communication, as published; spacing and symbol: from memory.
OFDM_HZ = {
    "ofdm-35-91": (35.9375e3, 90.625e3, 1.5625e3, 695e-6),
    "ofdm-98-122": (98.4375e3, 121.875e3, 1.5625e3, 695e-6),
    "ofdm-154-488": (154.6875e3, 487.5e3, 4.6875e3, 231.7e-6),
}
_RAMP_S = 50e-6
_RASTERS = {"9 kHz": 9e3, "10 kHz": 10e3}
_BANDS = ("medium", "long", "short")
_COMMUNICATIONS = ("none", *OFDM_HZ, "fsk")


EnvironmentWeights = Annotated[Weights, known_names(*MAN_MADE)]
BandWeights = Annotated[Weights, known_names(*_BANDS)]
RasterWeights = Annotated[Weights, known_names(*_RASTERS)]
CommunicationWeights = Annotated[Weights, known_names(*_COMMUNICATIONS)]


class BackgroundRanges(Ranges):
    """Noise, carriers and communication of a site; heights in units of the white analogue noise's deviation.

    Attributes
    ----------
    converter_noise : white noise of the converter itself.
    low_noise, low_noise_hz : low-passed noise and its corner [Hz].
    field_noise : man-made noise that the strap's loop picks up. By ITU-R P.372 alone a loop of half a square metre
        in a city would give about the thermal noise of 50 ohm at 1 MHz; along the conductors comes more of the kind.
    environments : kinds of place after ITU-R P.372.
    carriers : number of broadcast carriers; those of `carriers_hz` [Hz] are there besides.
    carrier_amplitude : height of one.
    carrier_bands : medium, long or short wave; where the raster is 10 kHz there is no long wave.
    medium_wave_raster : of the region.
    modulation_depth : of the carriers, 0 to 1.
    communication : carrier communication on mains lines.
    communication_deviation : its deviation while it is on.
    frame_s, pause_s : its frames, and the time between them [s].
    fsk_hz, fsk_baud : its lower tone [Hz] and rate [1/s] where it is frequency-shift keying.
    """

    converter_noise: Positive = (0.05, 0.6)
    low_noise: Range = (0.0, 1.5)
    low_noise_hz: Hertz = (0.3e6, 5e6)
    field_noise: Range = (0.0, 1.5)
    environments: EnvironmentWeights = Field(
        default={"city": 0.3, "residential": 0.4, "rural": 0.25, "quiet-rural": 0.05}
    )
    carriers: Count = (0, 6)
    carrier_amplitude: Positive = (0.1, 3.0)
    carriers_hz: tuple[Annotated[float, Field(gt=0, le=50e6)], ...] = ()
    carrier_bands: BandWeights = Field(default={"medium": 0.55, "long": 0.1, "short": 0.35})
    medium_wave_raster: RasterWeights = Field(default={"9 kHz": 0.75, "10 kHz": 0.25})
    modulation_depth: Shares = (0.2, 0.6)
    communication: CommunicationWeights = Field(
        default={
            "none": 0.6,
            "ofdm-35-91": 0.12,
            "ofdm-98-122": 0.04,
            "ofdm-154-488": 0.14,
            "fsk": 0.1,
        }
    )
    communication_deviation: Positive = (0.1, 3.0)
    frame_s: Seconds = (1e-3, 30e-3)
    pause_s: Seconds = (0.5e-3, 30e-3)
    fsk_hz: Hertz = (40e3, 135e3)
    fsk_baud: Positive = (300.0, 4800.0)


def draw_background(ranges: BackgroundRanges, *, rng: np.random.Generator) -> Background:
    """Noise, carriers and communication of a site; carriers that the scenario names are always there."""
    raster_hz = _RASTERS[chosen(ranges.medium_wave_raster, rng=rng)]
    wanted: list[float | None] = [*ranges.carriers_hz, *([None] * whole(ranges.carriers, rng=rng))]
    environment = chosen(ranges.environments, rng=rng)
    noise = Noise(
        converter=log_even(ranges.converter_noise, rng=rng),
        low_share=even(ranges.low_noise, rng=rng),
        low_hz=log_even(ranges.low_noise_hz, rng=rng),
        field_share=even(ranges.field_noise, rng=rng),
        environment=next(name for name in MAN_MADE if name == environment),
    )
    carriers = tuple(_draw_carrier(ranges, raster_hz, hz, rng=rng) for hz in wanted)
    kind = chosen(ranges.communication, rng=rng)
    communication = () if kind == "none" else (_draw_communication(ranges, kind, rng=rng),)
    return Background(noise, carriers, communication)


def _draw_carrier(ranges: BackgroundRanges, raster_hz: float, hz: float | None, *, rng: np.random.Generator) -> Carrier:
    frequency = _draw_channel_hz(ranges, raster_hz, rng=rng) if hz is None else hz
    shares, phases = rng.dirichlet(np.ones(4)), rng.uniform(0.0, 1.0, 4)
    return Carrier(
        hz=frequency,
        amplitude=log_even(ranges.carrier_amplitude, rng=rng),
        depth=even(ranges.modulation_depth, rng=rng),
        phase=even((0.0, 1.0), rng=rng),
        tones_hz=tuple(float(tone) for tone in rng.uniform(100.0, 4000.0, 4)),
        tones=tuple((float(share), float(phase)) for share, phase in zip(shares, phases, strict=True)),
    )


def _draw_channel_hz(ranges: BackgroundRanges, raster_hz: float, *, rng: np.random.Generator) -> float:
    band = chosen(ranges.carrier_bands, rng=rng)
    nine = raster_hz == _RASTERS["9 kHz"]
    if band == "short":
        low, high = SHORT_WAVE_HZ[int(rng.integers(0, len(SHORT_WAVE_HZ)))]
        return low + 5e3 * int(rng.integers(0, int((high - low) / 5e3) + 1))
    if band == "long" and nine:
        return 153e3 + raster_hz * int(rng.integers(0, 15))
    return medium_wave_hz(int(rng.integers(0, 120 if nine else 118)), raster_hz)


def _draw_communication(ranges: BackgroundRanges, kind: str, *, rng: np.random.Generator) -> Communication:
    tones: tuple[float, ...]
    if kind == "fsk":
        lower = log_even(ranges.fsk_hz, rng=rng)
        tones, symbol_s = (lower, lower + even((1e3, 13e3), rng=rng)), 1 / log_even(ranges.fsk_baud, rng=rng)
    else:
        first, last, step, symbol_s = OFDM_HZ[kind]
        tones = tuple(np.arange(first, last + step / 2, step).tolist())
    on_s = log_even(ranges.frame_s, rng=rng)
    period_s = on_s + log_even(ranges.pause_s, rng=rng)
    return Communication(
        kind="fsk" if kind == "fsk" else "ofdm",
        tones_hz=tones,
        gains=(1.0,) * len(tones),
        deviation=log_even(ranges.communication_deviation, rng=rng),
        symbol_s=symbol_s,
        on_s=on_s,
        period_s=period_s,
        start_s=rng.uniform(0.0, period_s),
        ramp_s=_RAMP_S,
        seed=int(rng.integers(0, 2**32)),
    )
